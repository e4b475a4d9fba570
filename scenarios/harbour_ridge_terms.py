"""Terms of the Harbour Ridge demo beyond plain calls: notice by sector, puts, sinking funds, coupon steps, a call."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from datetime import date
from typing import Any

from harbour_ridge_assets import VALUATION, Bond, later, life_years

Rows = list[dict[str, Any]]

NOTICE_DAYS = {"agency": 5, "corporate": 15, "high_yield": 15, "utility": 30, "municipal": 30, "private": 60}
ANNOUNCED_PAYMENT = date(2023, 1, 25)


def notice_days(bond: Bond) -> int:
    """Days from notice to payment, by kind of issuer. [day]"""
    return NOTICE_DAYS[bond.recipe.asset_class]


def coupon_date(bond: Bond, years_ahead: int) -> date:
    """The last coupon date up to so many years after the valuation date."""
    day, latest = bond.maturity, VALUATION.replace(year=VALUATION.year + years_ahead)
    while day > latest:
        day = later(day, -12 // bond.frequency, bond.month_end)
    return day


def some(bonds: Iterable[Bond], count: int, fit: Callable[[Bond], bool]) -> list[Bond]:
    """The first few that fit, in the order of their names."""
    return sorted((b for b in bonds if fit(b) and b.frequency == 2), key=lambda b: b.name)[:count]


def put_rows(bonds: list[Bond]) -> Rows:
    """Three corporate bonds may be put at par on one coupon date, three to five years ahead."""
    chosen = some(
        bonds, 3, lambda b: b.par_call is not None and b.rating[0] == "B" and 8.0 < life_years(b.maturity) < 15.0
    )
    rows = []
    for bond, years in zip(chosen, (3, 4, 5)):
        day = coupon_date(bond, years)
        rows.append(
            {"security_id": bond.name, "first_date": day, "last_date": day, "style": "european", "price": "100.000",
             "notice_days": 30}
        )  # fmt: skip
    return rows


def sinking_rows(bonds: list[Bond]) -> Rows:
    """Four private placements repay a tenth a year, two may double it; two utilities repay a twentieth."""
    private = some(bonds, 4, lambda b: b.recipe.form == "make_whole_life" and life_years(b.maturity) > 6.0)
    utility = some(bonds, 2, lambda b: b.recipe.form == "declining" and life_years(b.maturity) > 10.0)
    rows = []
    for k, bond in enumerate([*private, *utility]):
        share, years = ("0.1", 5) if bond in private else ("0.05", 8)
        for year in range(1, years + 1):
            rows.append(
                {"security_id": bond.name, "payment_date": coupon_date(bond, year), "share_of_par": share,
                 "may_double": "true" if k < 2 else "false"}
            )  # fmt: skip
    return rows


def step_rows(bonds: list[Bond]) -> Rows:
    """Two callable agency bonds pay three quarters of a point more from two dates on."""
    chosen = some(bonds, 2, lambda b: b.recipe.form == "bermudan" and life_years(b.maturity) > 5.0)
    return [
        {"security_id": b.name, "start_date": coupon_date(b, years), "coupon_rate": f"{b.coupon + rise:.4f}"}
        for b in chosen
        for years, rise in ((2, 0.0075), (4, 0.0150))
    ]


def announced_rows(bonds: list[Bond]) -> Rows:
    """One high-yield bond has been called by the valuation date, at the price then in force."""

    def in_force(bond: Bond) -> list[float]:
        return [r.price for r in bond.rights if r.price is not None and r.first <= ANNOUNCED_PAYMENT <= r.last]

    chosen = some(bonds, 1, lambda b: b.recipe.asset_class == "high_yield" and bool(in_force(b)))
    return [
        {"security_id": b.name, "payment_date": ANNOUNCED_PAYMENT, "price": f"{in_force(b)[0]:.3f}"} for b in chosen
    ]


def special_tables(bonds: list[Bond]) -> dict[str, Rows]:
    """The optional tables by name."""
    return {
        "put_rights": put_rows(bonds),
        "sinking_payments": sinking_rows(bonds),
        "coupon_steps": step_rows(bonds),
        "announced_calls": announced_rows(bonds),
    }
