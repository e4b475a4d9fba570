"""What a bond promises, laid out by date once: coupon periods, payment dates and amounts per 100 of par.

Regular dates are counted back from maturity, each from maturity itself and not from its neighbour, so that a 31st is
never lost on the way through February. Dates are not moved for holidays: an annual test sees months, and
prospectuses pay the unadjusted amount anyway.
"""

from __future__ import annotations

from bisect import bisect_right
from dataclasses import dataclass, field
from datetime import date
from itertools import pairwise
from typing import NamedTuple

from projector.study.daycounts import actual_days, day_count_named, months_before, year_fraction

FREQUENCIES = (0, 1, 2, 4, 12)
ZERO_COUPON_PERIODS = 2  # a zero coupon bond is quoted on half-years


class Coupon(NamedTuple):
    """One coupon: it is earned from `start` and paid on `payment`."""

    start: date
    payment: date
    amount: float  # [per 100 of par held at the valuation date]
    principal: float = 0.0  # scheduled repayment on the same day, the last one left out [the same]


@dataclass(frozen=True, kw_only=True)
class DatedBond:
    """A fixed-rate bond or a zero coupon bond, dated. Built by `dated_bond`."""

    coupon_rate: float  # [1/year]
    frequency: int  # coupons a year, 0 = zero coupon
    day_count: str  # FpML name
    end_of_month: bool
    issue: date
    maturity: date
    coupons: tuple[Coupon, ...]  # all of them, from issue to maturity
    steps: tuple[tuple[date, float], ...] = ()  # coupon rates that follow, in order of their first day
    sunk: bool = False  # repaid in parts
    payment_dates: tuple[date, ...] = field(repr=False)  # of the coupons, for look-ups

    @property
    def periods_a_year(self) -> int:
        """Regular periods a year: the coupon frequency, half-years for a zero coupon bond."""
        return self.frequency or ZERO_COUPON_PERIODS

    def rate_on(self, day: date) -> float:
        """Coupon rate earned from a day on. [1/year]"""
        place = bisect_right([start for start, _ in self.steps], day)
        return self.steps[place - 1][1] if place else self.coupon_rate

    def left_on(self, day: date) -> float:
        """Share of the par held at the valuation date left after the payments of a day. [-]"""
        if not self.sunk:
            return 1.0
        return 1.0 - sum(c.principal for c in self.coupons if c.payment <= day) / 100.0

    def regular_date(self, periods: int) -> date:
        """The date so many regular periods before maturity."""
        return months_before(self.maturity, periods * 12 // self.periods_a_year, month_end=self.end_of_month)


def dated_bond(
    *,
    coupon_rate: float,
    frequency: int,
    day_count: str,
    end_of_month: bool,
    issue: date,
    maturity: date,
    first_coupon: date | None = None,
    steps: tuple[tuple[date, float], ...] = (),
    sinking: tuple[tuple[date, float], ...] = (),
) -> DatedBond:
    """Lay out the coupons of a bond.

    coupon_rate   annual rate, 0.05 means 5 % [1/year]; 0 exactly when frequency is 0
    frequency     coupons a year: 0, 1, 2, 4 or 12
    day_count     FpML name or ISO 20022 code; decides an odd first coupon and accrued interest
    end_of_month  coupons fall on month ends when maturity does
    first_coupon  None: the first coupon is a full regular one, earned from the last regular date on or before issue.
                  A date of the regular schedule: interest runs from issue, and the first coupon is short or long unless
                  issue is the regular date before it.

    steps         coupon rates that follow, each from a coupon date on
    sinking       coupon dates with the share repaid of the par held at the valuation date

    Every regular coupon is 100 x rate / frequency whatever the day count; only an odd first one is counted in days.
    ValueError when the terms contradict each other.
    """
    _refuse_contradictions(coupon_rate, frequency, issue, maturity, first_coupon)
    bare = DatedBond(
        coupon_rate=coupon_rate,
        frequency=frequency,
        day_count=day_count_named(day_count),
        end_of_month=end_of_month,
        issue=issue,
        maturity=maturity,
        coupons=(),
        payment_dates=(),
        steps=tuple(sorted(steps)),
    )
    coupons = _coupons(bare, first_coupon) if frequency else ()
    if sinking:
        coupons = _sunk(coupons, dict(sinking))
    days = tuple(c.payment for c in coupons)
    return DatedBond(**{**vars(bare), "coupons": coupons, "payment_dates": days, "sunk": bool(sinking)})


def _sunk(coupons: tuple[Coupon, ...], shares: dict[date, float]) -> tuple[Coupon, ...]:
    """The coupons on the par still left, and the repayments of their days."""
    out, left = [], 1.0
    for coupon in coupons:
        repaid = shares.get(coupon.payment, 0.0)
        out.append(coupon._replace(amount=coupon.amount * left, principal=100.0 * repaid))
        left -= repaid
    return tuple(out)


def _refuse_contradictions(rate: float, frequency: int, issue: date, maturity: date, first: date | None) -> None:
    if frequency not in FREQUENCIES:
        raise ValueError(f"coupon frequency {frequency} is not one of {FREQUENCIES}")
    if (rate == 0) != (frequency == 0) or rate < 0:
        raise ValueError(f"coupon rate {rate} does not go with {frequency} coupons a year")
    if issue >= maturity:
        raise ValueError(f"issue {issue} is not before maturity {maturity}")
    if first is not None and (frequency == 0 or not issue < first <= maturity):
        raise ValueError(f"first coupon {first} is not possible between issue {issue} and maturity {maturity}")


def _coupons(bond: DatedBond, first_coupon: date | None) -> tuple[Coupon, ...]:
    stop = bond.issue if first_coupon is None else first_coupon
    dates = [bond.maturity]  # payment dates, backward; without a first coupon date also the start of the first period
    while dates[-1] > stop:
        dates.append(bond.regular_date(len(dates)))
    dates.reverse()
    regular = 100.0 * bond.coupon_rate / bond.frequency
    if bond.steps and first_coupon is None:
        return tuple(Coupon(a, b, 100.0 * bond.rate_on(a) / bond.frequency) for a, b in pairwise(dates))
    if first_coupon is None:
        return tuple(Coupon(start, end, regular) for start, end in pairwise(dates))
    if dates[0] != first_coupon:
        raise ValueError(f"first coupon {first_coupon} is not on the schedule counted back from {bond.maturity}")
    opening = bond.regular_date(len(dates))
    amount = (
        regular
        if opening == bond.issue
        else interest_earned(bond, bond.issue, first_coupon, (bond.issue, first_coupon))
    )
    later = (Coupon(a, b, 100.0 * bond.rate_on(a) / bond.frequency) for a, b in pairwise(dates))
    return (Coupon(bond.issue, first_coupon, amount), *later)


def interest_earned(bond: DatedBond, start: date, end: date, period: tuple[date, date]) -> float:
    """Interest at the coupon rate from start to end by the bond's day count. [per 100]

    period  the coupon period they lie in, regular or odd

    ACT/ACT.ICMA is summed over the regular periods the stretch touches; for a bond on half-years this is also the rule
    of the United States Treasury for long and short first periods.

    Source: ICMA Rule 251.1(iii); 31 CFR 356, Appendix B, section I.C (both cited from memory).
    """
    rate = bond.rate_on(start)
    if bond.day_count != "ACT/ACT.ICMA":
        fraction = year_fraction(
            bond.day_count, start, end, period=period, frequency=bond.frequency, termination=bond.maturity
        )
        return 100.0 * rate * fraction
    fraction = 0.0
    index = whole_periods_left(bond, start)
    while True:
        opening, closing = bond.regular_date(index + 1), bond.regular_date(index)
        inside = max(start, opening), min(end, closing)
        fraction += actual_days(*inside) / (bond.frequency * actual_days(opening, closing))
        if closing >= end:
            return 100.0 * rate * fraction
        index -= 1


def whole_periods_left(bond: DatedBond, day: date) -> int:
    """Whole regular periods from the regular date after `day` to maturity; `day` is before maturity."""
    step = 12 // bond.periods_a_year
    months = (bond.maturity.year - day.year) * 12 + bond.maturity.month - day.month
    index = months // step
    while bond.regular_date(index) <= day:
        index -= 1
    while bond.regular_date(index + 1) > day:
        index += 1
    return index


def periods_left(bond: DatedBond, day: date) -> float:
    """Regular periods from `day` to maturity, the broken one as a share; 0 at maturity. [period]

    The share that is left of a broken period is 1 - (days gone / days of the period): with days of the bond's own
    30/360 over 360 / frequency, with actual days over actual days for every other count.

    Source: MSRB Rule G-33(b), (e): (E - A) / E; 31 CFR 356, Appendix B: r / s (cited from memory).
    """
    if day >= bond.maturity:
        return 0.0
    whole = whole_periods_left(bond, day)
    return whole + _share_left(bond, bond.regular_date(whole + 1), bond.regular_date(whole), day)


def _share_left(bond: DatedBond, opening: date, closing: date, day: date) -> float:
    actual = actual_days(day, closing) / actual_days(opening, closing)
    if not bond.day_count.startswith("30"):
        return actual
    gone = year_fraction(bond.day_count, opening, day, termination=bond.maturity) * bond.periods_a_year
    # 30/360 can count the last day before a payment as gone; the actual share is used there, so that a yield exists.
    return 1.0 - gone if gone < 1.0 else actual


def periods_between(bond: DatedBond, start: date, end: date) -> float:
    """Regular periods from `start` to a later `end`, always above 0. [period]

    The difference of `periods_left`; where 30/360 finds no time between two days, as from a 30th to a 31st, actual days
    over the actual days of the period.
    """
    between = periods_left(bond, start) - periods_left(bond, end)
    if between > 0.0 or end <= start:
        return between
    whole = whole_periods_left(bond, start)
    return actual_days(start, end) / actual_days(bond.regular_date(whole + 1), bond.regular_date(whole))


def next_coupon(bond: DatedBond, day: date) -> Coupon | None:
    """The first coupon paid after `day`, or None."""
    place = bisect_right(bond.payment_dates, day)
    return bond.coupons[place] if place < len(bond.coupons) else None


def coupons_between(bond: DatedBond, after: date, until: date) -> tuple[Coupon, ...]:
    """Coupons paid after `after` and on or before `until`."""
    return bond.coupons[bisect_right(bond.payment_dates, after) : bisect_right(bond.payment_dates, until)]


def coupon_times(bond: DatedBond, after: date, until: date) -> tuple[float, ...]:
    """Regular periods from `after` to each of the coupons of `coupons_between`. [period]

    The last coupon is at maturity and each other a whole period before the next, so no calendar is asked.
    """
    now = periods_left(bond, after)
    places = range(bisect_right(bond.payment_dates, after), bisect_right(bond.payment_dates, until))
    return tuple(now - (len(bond.coupons) - 1 - place) for place in places)
