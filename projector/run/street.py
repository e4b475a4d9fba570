"""Street figures at the valuation date on exact dates: redemptions to look at, yields, required-yield and make-whole
prices. Yields are bond-equivalent, the settlement date is the valuation date."""

from __future__ import annotations

import math
from datetime import date, timedelta
from typing import Any, NamedTuple

import numpy as np
import numpy.typing as npt

from projector.bonds.mapped import Terms
from projector.bonds.schedule import DatedBond, coupons_between
from projector.bonds.worst import lowest_price, make_whole_price, yield_to_worst
from projector.bonds.yields import (
    Redemption,
    accrued_interest,
    bond_equivalent,
    from_bond_equivalent,
    redemption_amount,
    yield_from_clean,
)
from projector.rates.key_rates import par_yield_at
from projector.study.daycounts import thirty_360_days

Array = npt.NDArray[np.float64]

BELIEVABLE = 1.0  # a call days away at a loss has a yearly yield of thousands of percent, which says nothing
NO_YIELD = float("nan")


class WorstYield(NamedTuple):
    """Yield to worst, bond-equivalent [1/year], nan where none within 100 %; and the redemption that gives it."""

    annual_yield: float
    redemption: Redemption


def street_redemptions(
    bond: DatedBond, row: dict[str, Any], rights: list[dict[str, Any]], settlement: date
) -> list[Redemption]:
    """First and last usable date of every price still ahead: with one price in between, one of the two is the worst.

    That holds while the coupon stays: on its way to a date the yield moves towards what the coupon then pays on the
    price, and never past it. So the dates on which a coupon steps are looked at too.

    A bermudan row is usable on the coupon dates inside it. Make-whole rights have no price and are left out; from the
    par-call date on no price is above 100.
    """
    after = settlement + timedelta(days=1)
    price: dict[date, float] = {}  # a row that starts on a day rules that day, so later rows overwrite
    for r in rights:
        if r["style"] == "make_whole" or r["last_date"] < after:
            continue
        usable = [max(r["first_date"], after), r["last_date"]]
        if r["style"] == "bermudan":
            usable = [c.payment for c in coupons_between(bond, usable[0] - timedelta(days=1), usable[1])]
        if usable:
            changes = [day for day, _ in bond.steps if usable[0] < day < usable[-1]]
            price |= dict.fromkeys((usable[0], *changes, usable[-1]), float(r["price"]))
    par_call = row["par_call_date"]
    if par_call is not None:
        price = {day: min(k, 100.0) if day >= par_call else k for day, k in price.items()}
        for day in (max(par_call, after), row["maturity_date"] - timedelta(days=1)):
            price[day] = min(price.get(day, 100.0), 100.0)
    return [Redemption(day, k) for day, k in sorted(price.items()) if after <= day < row["maturity_date"]]


def believable(bond: DatedBond, annual_yield: float) -> float:
    """The yield, bond-equivalent; nan where it is 100 % a year or more. [1/year]"""
    equivalent = bond_equivalent(annual_yield, bond.periods_a_year)
    return equivalent if abs(equivalent) < BELIEVABLE else NO_YIELD


def yield_to(bond: DatedBond, settlement: date, price: float, redemption: Redemption | None = None) -> float:
    """Yield to a redemption (None: maturity) at a clean price, bond-equivalent. [1/year]; nan: none within 100 %"""
    try:
        return believable(bond, yield_from_clean(bond, settlement, price, "street", redemption))
    except (ValueError, OverflowError, ZeroDivisionError):
        return NO_YIELD


def worst_yield(bond: DatedBond, redemptions: list[Redemption], settlement: date, price: float) -> WorstYield:
    """Yield to worst at a clean price [per 100], and where it is reached."""
    if price <= 100.0 and not bond.steps and all(r.price >= 100.0 for r in redemptions):
        redemptions = []  # bought at a discount: being repaid sooner at par or more only yields more
    try:
        found = yield_to_worst(bond, settlement, price, redemptions, "street")
    except ValueError:
        return WorstYield(NO_YIELD, redemptions[0] if redemptions else Redemption(bond.maturity, 100.0))
    return WorstYield(believable(bond, found.annual_yield), found.redemption)


def worst_of(bond: DatedBond, terms: Terms, settlement: date, price: float) -> WorstYield:
    """Yield to worst of a security; of one whose call is announced, to the day on which that is paid."""
    if terms.announced is not None:
        way = Redemption(terms.announced["payment_date"], float(terms.announced["price"]))
        return WorstYield(yield_to(bond, settlement, price, way), way)
    return worst_yield(bond, street_redemptions(bond, terms.row, list(terms.calls), settlement), settlement, price)


def price_at_required_yield(
    bond: DatedBond, redemptions: list[Redemption], settlement: date, required: float
) -> tuple[float, date]:
    """The lowest clean price over all redemptions at a required bond-equivalent yield [per 100], and its date.

    Paying no more than this, the buyer has at least the required yield whenever the bond is repaid.
    """
    annual = from_bond_equivalent(required, bond.periods_a_year)
    found = lowest_price(bond, settlement, annual, redemptions, "street")
    return found.clean_price, found.redemption.day


def make_whole_right(rights: list[dict[str, Any]], settlement: date) -> dict[str, Any] | None:
    """The make-whole row in force on a day, the later start of several; None when there is none."""
    live = [r for r in rights if r["style"] == "make_whole" and r["first_date"] <= settlement <= r["last_date"]]
    return max(live, key=lambda r: r["first_date"]) if live else None


def make_whole_today(
    bond: DatedBond, row: dict[str, Any], rights: list[dict[str, Any]], settlement: date, discount: Array
) -> float:
    """Clean make-whole price of a right in force (C6); nan where there is none or par is already enough. [per 100]

    discount  Treasury P(tau) by month, shape (tau,)

    Payments up to the par-call date, or maturity where there is none, with the interest accrued on that date.
    """
    right = make_whole_right(rights, settlement)
    end = row["par_call_date"] or row["maturity_date"]
    if right is None or end <= settlement:
        return NO_YIELD
    coupons = coupons_between(bond, settlement, end)
    days = [*(c.payment for c in coupons), end]
    amounts = [*(c.amount for c in coupons), 100.0]
    if not coupons or coupons[-1].payment != end:
        amounts[-1] = redemption_amount(bond, Redemption(end, 100.0))
    half_years = [thirty_360_days(settlement, day) / 180.0 for day in days]
    treasury = float(par_yield_at(discount, np.array([half_years[-1] / 2.0]))[0])
    spread = float(right["make_whole_spread_bp"]) * 1e-4
    price = make_whole_price(amounts, half_years, treasury, spread, accrued_interest(bond, settlement))
    return price if math.isfinite(price) else NO_YIELD
