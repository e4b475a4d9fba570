"""Accrued interest, and price and yield of a dated bond, in the two conventions of the trade.

street    the broken period is compounded like a whole one; with a single payment left in the last period, simple
          interest.
treasury  the broken period bears simple interest, whole periods are compounded (31 CFR 356, Appendix B).

A yield is per year, compounded at the coupon frequency (half-yearly for a zero coupon bond); `bond_equivalent` puts it
on half-years. Prices are per 100 of par; clean excludes accrued interest, dirty includes it.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from datetime import date
from typing import NamedTuple

from projector.bonds.schedule import (
    DatedBond,
    coupon_times,
    coupons_between,
    interest_earned,
    next_coupon,
    periods_between,
    periods_left,
)

CONVENTIONS = ("street", "treasury")
HIGHEST_RATE = 1e6  # [1/period] beyond this there is no yield worth the name
LOWEST_GROWTH = 1e-15  # [-] 1 + rate a period
VALUE_CAP = 1e250  # [-] far below the largest float, so that sums and products of it stay finite


class Redemption(NamedTuple):
    """A date on which the bond may be redeemed, and the clean price paid then."""

    day: date
    price: float  # [per 100]


@dataclass(frozen=True, kw_only=True)
class RemainingPayments:
    """Payments after the settlement date, on the bond's own clock of regular periods."""

    periods_a_year: int
    broken: float  # first stretch that bears simple interest [period]
    whole: tuple[float, ...]  # time after that stretch, compounded [period], one for each payment
    amounts: tuple[float, ...]  # [per 100]


def accrued_interest(bond: DatedBond, settlement: date) -> float:
    """Interest earned since the last coupon, never more than the coupon itself. [per 100]

    settlement  from issue to the day before maturity; on a payment date the coupon of that day is paid: 0. Before the
                first coupon of a bond without a stated first coupon date it runs from the regular date before issue.

    The bound matters where a day count finds more days than the regular coupon pays for: ACT/360, and 30/360 from a
    month end of February.

    Source: MSRB Rule G-33(a) (cited from memory); 31 CFR 356, Appendix B, section I.D.
    """
    _refuse_settlement(bond, settlement)
    coupon = next_coupon(bond, settlement)
    if coupon is None:
        return 0.0
    earned = interest_earned(bond, coupon.start, settlement, (coupon.start, coupon.payment))
    return min(earned * bond.left_on(settlement), coupon.amount)


def _refuse_settlement(bond: DatedBond, settlement: date) -> None:
    if not bond.issue <= settlement < bond.maturity:
        raise ValueError(f"settlement {settlement} is not from issue {bond.issue} to before maturity {bond.maturity}")


def remaining_payments(
    bond: DatedBond, settlement: date, convention: str, redemption: Redemption | None = None
) -> RemainingPayments:
    """The coupons and the redemption after settlement, timed for a convention.

    convention  "street" or "treasury"
    redemption  date after settlement and up to maturity with its clean price; None means maturity at 100. Between
                coupon dates accrued interest is paid on top.
    """
    _refuse_settlement(bond, settlement)
    end = redemption or Redemption(bond.maturity, 100.0)
    if not settlement < end.day <= bond.maturity:
        raise ValueError(f"redemption {end.day} is not after settlement {settlement} and by maturity {bond.maturity}")
    now = periods_left(bond, settlement)
    coupons = coupons_between(bond, settlement, end.day)
    times = list(coupon_times(bond, settlement, end.day))
    amounts = [coupon.amount + coupon.principal for coupon in coupons]
    if coupons and coupons[-1].payment == end.day:
        amounts[-1] += end.price * bond.left_on(end.day)
    else:
        times.append(periods_between(bond, settlement, end.day))
        amounts.append(redemption_amount(bond, end))
    broken = broken_stretch(convention, now, times[-1], alone=len(times) == 1)
    return RemainingPayments(
        periods_a_year=bond.periods_a_year,
        broken=broken,
        whole=tuple(time - broken for time in times),
        amounts=tuple(amounts),
    )


def redemption_amount(bond: DatedBond, redemption: Redemption) -> float:
    """The redemption price with the interest accrued on its date. [per 100]"""
    accrued = accrued_interest(bond, redemption.day) if redemption.day < bond.maturity else 0.0
    return redemption.price * bond.left_on(redemption.day) + accrued


def broken_stretch(convention: str, periods_to_maturity: float, last: float, *, alone: bool) -> float:
    """How much of the time to the payments bears simple interest. [period]

    periods_to_maturity  from settlement, regular periods
    last                 time of the last payment [period]
    alone                whether there is one payment only

    Source: 31 CFR 356, Appendix B, section II; MSRB Rule G-33(b)(i)(B)(1), one period or less (cited from memory).
    """
    if convention not in CONVENTIONS:
        raise ValueError(f"yield convention {convention!r} is not one of {CONVENTIONS}")
    if convention == "street":
        return last if alone and last <= 1.0 else 0.0
    to_next_date = periods_to_maturity - math.ceil(periods_to_maturity) + 1.0
    return min(last, to_next_date)


def present_value(payments: RemainingPayments, annual_yield: float) -> float:
    """Value of the payments at a yield: the dirty price. [per 100]

    annual_yield  compounded at the payments' own periods [1/year], above -100 % a period

    Source: 31 CFR 356, Appendix B, section II; UK Debt Management Office, Formulae for Calculating Gilt Prices from
    Yields, 1998, section 1 (both cited from memory, held to their worked examples by the tests).
    """
    rate = annual_yield / payments.periods_a_year
    discount = 1.0 / (1.0 + rate)
    pairs = zip(payments.amounts, payments.whole, strict=True)
    return math.fsum(amount * growth(discount, time) for amount, time in pairs) / (1.0 + payments.broken * rate)


def growth(base: float, periods: float) -> float:
    """base ** periods, and VALUE_CAP where that is larger: a search at rates near -100 % may pass there. [-]"""
    if base > 1.0 and periods * math.log(base) > math.log(VALUE_CAP):
        return VALUE_CAP
    return base**periods


def yield_of(payments: RemainingPayments, dirty_price: float) -> float:
    """The yield at which the payments are worth the dirty price. [1/year]

    dirty_price  above 0 [per 100]

    ValueError when no yield above -100 % a period and below 1e8 % gives the price.
    """
    if dirty_price <= 0:
        raise ValueError(f"a dirty price of {dirty_price} has no yield")
    frequency = payments.periods_a_year
    if payments.whole == (0.0,):  # a single payment at simple interest
        return frequency * (payments.amounts[0] / dirty_price - 1.0) / payments.broken
    return frequency * rate_at_price(lambda rate: present_value(payments, rate * frequency), dirty_price)


def rate_at_price(value: Callable[[float], float], price: float) -> float:
    """The rate a period at which a falling function takes the price. [1/period]

    value  price [per 100] as a falling function of the rate a period, above -100 %
    """
    low, high = 0.0, 0.0
    lowest, shrink = 1.0, 0.95
    while value(low) < price:
        lowest, shrink = lowest * shrink, max(shrink**3, 0.25)
        if lowest < LOWEST_GROWTH:
            raise ValueError(f"no yield above -100 % a period gives the price {price}")
        low, high = lowest - 1.0, low
    step = 0.05
    while value(high) > price:
        low, high, step = high, high + step, step * 4.0
        if high > HIGHEST_RATE:
            raise ValueError(f"no yield gives the price {price}")
    if low == high:
        return low
    from scipy.optimize import brentq  # here, not above: it takes a quarter of a second that `check` need not wait

    return float(brentq(lambda rate: value(rate) - price, low, high, xtol=1e-16, rtol=1e-15, maxiter=300))


def dirty_price(
    bond: DatedBond, settlement: date, annual_yield: float, convention: str, redemption: Redemption | None = None
) -> float:
    """Price with accrued interest at a yield. [per 100]"""
    return present_value(remaining_payments(bond, settlement, convention, redemption), annual_yield)


def clean_price(
    bond: DatedBond, settlement: date, annual_yield: float, convention: str, redemption: Redemption | None = None
) -> float:
    """Price without accrued interest at a yield. [per 100]"""
    return dirty_price(bond, settlement, annual_yield, convention, redemption) - accrued_interest(bond, settlement)


def yield_from_clean(
    bond: DatedBond, settlement: date, clean: float, convention: str, redemption: Redemption | None = None
) -> float:
    """Yield at a clean price, compounded at the coupon frequency. [1/year]"""
    payments = remaining_payments(bond, settlement, convention, redemption)
    return yield_of(payments, clean + accrued_interest(bond, settlement))


def bond_equivalent(annual_yield: float, periods_a_year: int) -> float:
    """The same yield compounded half-yearly. [1/year]

    Source: Fabozzi, Fixed Income Mathematics, bond-equivalent yield (cited from memory).
    """
    if periods_a_year == 2:
        return annual_yield
    return 2.0 * ((1.0 + annual_yield / periods_a_year) ** (periods_a_year / 2) - 1.0)


def from_bond_equivalent(annual_yield: float, periods_a_year: int) -> float:
    """A yield compounded half-yearly, compounded at other periods; undoes `bond_equivalent`. [1/year]"""
    if periods_a_year == 2:
        return annual_yield
    return periods_a_year * ((1.0 + annual_yield / 2.0) ** (2.0 / periods_a_year) - 1.0)


def macaulay_duration(payments: RemainingPayments, annual_yield: float) -> float:
    """Mean time of the payments, weighted by their values at the yield. [year]

    Source: Macaulay, Some Theoretical Problems Suggested by the Movements of Interest Rates, 1938 (cited from memory).
    """
    rate = annual_yield / payments.periods_a_year
    discount = 1.0 / (1.0 + rate)
    values = [amount * discount**time for amount, time in zip(payments.amounts, payments.whole, strict=True)]
    mean = math.fsum(value * time for value, time in zip(values, payments.whole, strict=True)) / math.fsum(values)
    return (payments.broken + mean) / payments.periods_a_year


def modified_duration(payments: RemainingPayments, annual_yield: float) -> float:
    """Minus the derivative of the dirty price by the yield, over the dirty price. [year]

    Where every period is compounded this is Macaulay's over 1 + yield / periods a year.
    """
    return _log_slopes(payments, annual_yield)[0] / payments.periods_a_year


def convexity(payments: RemainingPayments, annual_yield: float) -> float:
    """Second derivative of the dirty price by the yield, over the dirty price; not halved. [year^2]

    The price moves by about price x (-modified duration x change + convexity / 2 x change^2).
    """
    return _log_slopes(payments, annual_yield)[1] / payments.periods_a_year**2


def _log_slopes(payments: RemainingPayments, annual_yield: float) -> tuple[float, float]:
    """-P'/P and P''/P by the rate a period, from the exact derivatives of v^m / (1 + w i)."""
    rate = annual_yield / payments.periods_a_year
    discount = 1.0 / (1.0 + rate)
    simple = payments.broken / (1.0 + payments.broken * rate)
    total, first, second = 0.0, 0.0, 0.0
    for amount, time in zip(payments.amounts, payments.whole, strict=True):
        value = amount * discount**time
        slope = simple + time * discount
        total += value
        first += value * slope
        second += value * (slope * slope + simple * simple + time * discount * discount)
    return first / total, second / total
