"""Yield to call, yield to worst, the lowest price over all redemption dates, and the make-whole price.

The redemption dates of a bond are its call dates with their clean prices, and maturity at 100. Price falls as yield
rises for each of them, so the lowest price over all of them falls too, and the yield at which that lowest price equals
the market's is the lowest of all yields: one root instead of one for each date.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from datetime import date
from typing import NamedTuple

from projector.bonds.schedule import DatedBond, coupon_times, coupons_between, periods_between, periods_left
from projector.bonds.yields import (
    VALUE_CAP,
    Redemption,
    accrued_interest,
    broken_stretch,
    growth,
    rate_at_price,
    redemption_amount,
    yield_from_clean,
)

TIE = 1e-9  # [per 100] prices closer than this count as equal


class RedemptionYield(NamedTuple):
    """A redemption and the yield when it comes to pass."""

    redemption: Redemption
    annual_yield: float  # [1/year] compounded at the coupon frequency


class RedemptionValue(NamedTuple):
    """A redemption and what the bond is worth when it is known to come to pass."""

    redemption: Redemption
    clean_price: float  # [per 100]


@dataclass(frozen=True)
class _Ending:
    """One way the payments may end: how many coupons come before, and the last payment."""

    coupons: int  # paid before the last payment
    amount: float  # last payment [per 100], with its coupon or accrued interest
    broken: float  # bears simple interest [period]
    whole: float  # compounded after it [period]


@dataclass(frozen=True)
class _Endings:
    """All ways of one bond at one settlement date; `times` and `amounts` are those of the coupons."""

    redemptions: tuple[Redemption, ...]
    endings: tuple[_Ending, ...]
    times: tuple[float, ...]  # from settlement [period]
    amounts: tuple[float, ...]

    def values(self, rate: float) -> list[float]:
        """Dirty price of each redemption at a rate a period. [per 100]"""
        discount = 1.0 / (1.0 + rate)
        paid, total = [0.0], 0.0  # value of the first n coupons, every period compounded
        power = growth(discount, self.times[0]) if self.times else 1.0
        for amount in self.amounts:  # they stand a whole period apart
            total += amount * power
            paid.append(total)
            power *= discount
            if power > VALUE_CAP:  # not min(): this loop runs for every trial rate of every security
                power = VALUE_CAP
        # Coupons before the end share its simple stretch w: v^t becomes v^(t - w) / (1 + w i).
        return [
            (paid[end.coupons] * (1.0 + rate) ** end.broken + end.amount * growth(discount, end.whole))
            / (1.0 + end.broken * rate)
            for end in self.endings
        ]


def redemptions(bond: DatedBond, settlement: date, calls: Iterable[Redemption]) -> tuple[Redemption, ...]:
    """The call dates after settlement in order of date, and maturity at 100 as the last.

    ValueError when a call lies on or after maturity, or two lie on one date.
    """
    later = sorted(call for call in calls if call.day > settlement)
    days = [call.day for call in later]
    if days and days[-1] >= bond.maturity:
        raise ValueError(f"call {days[-1]} is not before maturity {bond.maturity}")
    if len(set(days)) < len(days):
        raise ValueError("two call prices stand on one date")
    return (*later, Redemption(bond.maturity, 100.0))


def _endings(bond: DatedBond, settlement: date, ways: tuple[Redemption, ...], convention: str) -> _Endings:
    now = periods_left(bond, settlement)
    coupons = coupons_between(bond, settlement, bond.maturity)
    return _Endings(
        redemptions=ways,
        endings=tuple(_ending(bond, settlement, now, way, convention) for way in ways),
        times=coupon_times(bond, settlement, bond.maturity),
        amounts=tuple(coupon.amount + coupon.principal for coupon in coupons),
    )


def _ending(bond: DatedBond, settlement: date, now: float, way: Redemption, convention: str) -> _Ending:
    before = coupons_between(bond, settlement, way.day)
    amount = redemption_amount(bond, way)
    if before and before[-1].payment == way.day:
        amount += before[-1].amount + before[-1].principal
        before = before[:-1]
    last = periods_between(bond, settlement, way.day)
    broken = broken_stretch(convention, now, last, alone=not before)
    return _Ending(coupons=len(before), amount=amount, broken=broken, whole=last - broken)


def yields_to_redemptions(
    bond: DatedBond, settlement: date, clean_price: float, calls: Iterable[Redemption], convention: str
) -> tuple[RedemptionYield, ...]:
    """The yield to each call after settlement and, last, to maturity. [1/year]

    clean_price  [per 100]
    calls        dates with clean prices; those on or before settlement are left out

    Source: MSRB Rule G-33(b) and its notice on yields to call (cited from memory).
    """
    return tuple(
        RedemptionYield(way, yield_from_clean(bond, settlement, clean_price, convention, way))
        for way in redemptions(bond, settlement, calls)
    )


def yield_to_worst(
    bond: DatedBond, settlement: date, clean_price: float, calls: Iterable[Redemption], convention: str
) -> RedemptionYield:
    """The lowest yield over all calls and maturity, and the redemption that gives it.

    Where several redemptions give the same yield the latest is named: nothing is lost by an earlier one.

    Source: MSRB Rule G-15(a), yield to the lower of call and maturity; MSRB, Calculation of Price and Yield on
    Continuously Callable Securities, 1989 (cited from memory).
    """
    ways = redemptions(bond, settlement, calls)
    endings = _endings(bond, settlement, ways, convention)
    dirty = clean_price + accrued_interest(bond, settlement)
    try:
        rate = rate_at_price(lambda rate: min(endings.values(rate)), dirty)
    except ValueError:
        # A call within the last period at a loss may yield less than -100 % a period at simple interest.
        each = yields_to_redemptions(bond, settlement, clean_price, ways[:-1], convention)
        return min(each, key=lambda found: found.annual_yield)
    lowest = _latest_lowest(endings.values(rate))
    return RedemptionYield(ways[lowest], rate * bond.periods_a_year)


def lowest_price(
    bond: DatedBond, settlement: date, annual_yield: float, calls: Iterable[Redemption], convention: str
) -> RedemptionValue:
    """The lowest clean price at a required yield over all calls and maturity. [per 100]

    annual_yield  compounded at the coupon frequency [1/year]

    Every redemption date is looked at: with prices that decline steeply neither the first nor the last call need be the
    lowest. Of equal prices the latest date is named.

    Source: MSRB, Calculation of Price and Yield on Continuously Callable Securities, 1989; SSAP No. 26, amortisation to
    the call or maturity value that gives the lowest asset value (both cited from memory).
    """
    ways = redemptions(bond, settlement, calls)
    values = _endings(bond, settlement, ways, convention).values(annual_yield / bond.periods_a_year)
    lowest = _latest_lowest(values)
    return RedemptionValue(ways[lowest], values[lowest] - accrued_interest(bond, settlement))


def _latest_lowest(values: Sequence[float]) -> int:
    bar = min(values) + TIE
    return max(place for place, value in enumerate(values) if value <= bar)


def make_whole_price(
    amounts: Sequence[float],
    half_years: Sequence[float],
    treasury_yield: float,
    spread: float,
    accrued: float = 0.0,
) -> float:
    """Clean make-whole price: the larger of par and the discounted remaining payments. [per 100]

    amounts         coupons to the par-call date and 100 on it [per 100]
    half_years      time of each from the redemption date, half-years of 30/360
    treasury_yield  par yield for the life to the par-call date, bond-equivalent [1/year]
    spread          make-whole spread [1/year], 0.0025 = 25 bp
    accrued         interest accrued on the redemption date, paid on top of the price [per 100]

    Source: redemption clause usual in United States corporate prospectuses since the 1990s: present value at the
    Treasury rate plus spread, semi-annual, 360 days of twelve 30-day months, excluding accrued interest (from memory).
    """
    discount = 1.0 / (1.0 + (treasury_yield + spread) / 2.0)
    value = math.fsum(amount * discount**time for amount, time in zip(amounts, half_years, strict=True))
    return max(100.0, value - accrued)
