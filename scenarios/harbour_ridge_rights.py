"""Call schedules and statement values of the Harbour Ridge demo."""

from __future__ import annotations

import random
from dataclasses import replace
from datetime import date, timedelta

from harbour_ridge_assets import (
    BELOW_MAKE_WHOLE,
    EXTRA_LOTS,
    RECIPES,
    VALUATION,
    Bond,
    Issuers,
    Lot,
    Recipe,
    Right,
    between,
    class_spread_bp,
    coupon_of,
    frequency_and_count,
    issue_and_maturity,
    later,
    life_years,
    pick,
    years_between,
)

DAY = timedelta(days=1)


def staircase(dates: list[date], prices: list[float], last: date, style: str) -> tuple[Right, ...]:
    """Rows that follow each other without a gap: price i from date i to the day before date i + 1."""
    ends = [d - DAY for d in dates[1:]] + [last]
    return tuple(
        Right(first, end, style, round(price, 3)) for first, end, price in zip(dates, ends, prices) if first <= end
    )


def yearly(start: date, first_price: float, step: float, last: date, style: str, month_end: bool) -> tuple[Right, ...]:
    """A schedule that falls by `step` a year to 100 and stays there."""
    dates, prices, price, year = [start], [first_price], first_price, 0
    while price > 100.0:
        year += 1
        price = max(100.0, price - step)
        dates.append(later(start, 12 * year, month_end))
        prices.append(price)
    kept = [i for i, d in enumerate(dates) if d <= last]
    return staircase([dates[i] for i in kept], [prices[i] for i in kept], last, style)


def lockout(recipe: Recipe, rng: random.Random, term: int) -> int:
    """Months from issue to the first call."""
    if recipe.form == "american_late":
        return 120
    if recipe.form == "declining":
        return pick(rng, {60: 4, 120: 5}) if term <= 20 else 120
    if recipe.form == "private":
        return 36 if term <= 10 else 60
    if recipe.form == "high_yield":
        return 36 if term <= 8 else 60
    return min(pick(rng, {24: 4, 36: 3, 60: 3}), 12 * term - 12)


def rights_of(
    recipe: Recipe, rng: random.Random, issue: date, maturity: date, coupon: float, month_end: bool
) -> tuple[Right, ...]:
    """The call schedule of one security, par-call window and make-whole rows aside."""
    term, last = maturity.year - issue.year, maturity - DAY
    if recipe.form in ("none", "zero", "make_whole", "make_whole_life"):
        return ()
    start = later(issue, lockout(recipe, rng, term), month_end)
    if recipe.form == "european":  # one date, the first coupon date after today where the lockout is past
        while start <= VALUATION + 100 * DAY:
            start = later(start, 12, month_end)
        start = min(start, months_earlier(maturity, 12, month_end))
        return (Right(start, start, "european", 100.0),)
    if recipe.form in ("bermudan", "american"):
        return (Right(start, last, recipe.form, 100.0),)
    if recipe.form == "american_late":
        return yearly(start, pick(rng, {100.0: 3, 101.0: 2}), 0.5, last, "american", month_end)
    if recipe.form == "declining":
        return yearly(start, 100.0 + round(50.0 * coupon, 2), 0.5, last, "american", month_end)
    if recipe.form == "private":
        return yearly(start, pick(rng, {102.0: 2, 103.0: 2, 101.0: 1}), 1.0, last, "bermudan", month_end)
    half = round(50.0 * coupon, 3)  # high yield: half the coupon, then a quarter, then par
    dates = [later(start, 12 * i, month_end) for i in range(3)]
    return staircase(dates, [100.0 + half, 100.0 + half / 2, 100.0], last, "american")


def months_earlier(day: date, months: int, month_end: bool) -> date:
    return later(day, -months, month_end)


def make_whole_bp(rating: str, term: int) -> int:
    """Make-whole spread: about 15 % of the spread at issue, in steps of 5, 10 at least. [bp]

    The spreads of 2022 stand for those of issue, so that no crisis year writes a make-whole spread of 40.
    """
    return max(10, 5 * round(0.15 * class_spread_bp(rating, term) / 5.0))


def with_make_whole(bond: Bond, term: int) -> Bond:
    """Adds the make-whole row, up to the par-call window where there is one."""
    window = {3: 1, 5: 1, 7: 2, 10: 3, 12: 3, 15: 4}.get(term, 6)
    par_call = months_earlier(bond.maturity, window, bond.month_end) if bond.recipe.form == "make_whole" else None
    if par_call is not None and par_call <= VALUATION + 31 * DAY:
        par_call = None
    last = (par_call or bond.maturity) - DAY
    row = Right(bond.issue + DAY, last, "make_whole", None, make_whole_bp(bond.rating, term))
    return replace(bond, par_call=par_call, rights=(row,))


def make_bond(rng: random.Random, issuers: Issuers, recipe: Recipe, name: str, place: float) -> Bond:
    """One security. Price noise is at most a tenth of the class spread."""
    rating, sector = pick(rng, recipe.ratings), pick(rng, dict.fromkeys(recipe.sectors, 1.0))
    issue, maturity, month_end = issue_and_maturity(rng, recipe, place)
    frequency, day_count = frequency_and_count(rng, recipe)
    term = maturity.year - issue.year
    coupon = coupon_of(recipe, rating, issue.year, term)
    spread = class_spread_bp(rating, life_years(maturity))
    bond = Bond(
        name=name,
        issuer=issuers.name(recipe.asset_class, sector, rating),
        recipe=recipe,
        sector=sector,
        rating=rating,
        coupon=coupon,
        frequency=frequency,
        day_count=day_count,
        month_end=month_end,
        issue=issue,
        first_coupon=None,
        maturity=maturity,
        par_call=None,
        rights=rights_of(recipe, rng, issue, maturity, coupon, month_end),
        spread_bp=round(spread + between(rng, -0.09, 0.09) * spread, 1),
    )
    return with_make_whole(bond, term) if recipe.form.startswith("make_whole") else bond


def odd_first_coupons(bonds: list[Bond]) -> list[Bond]:
    """The two latest half-yearly corporate issues get a first coupon that is still ahead: one long, one short."""
    fit = [
        b
        for b in bonds
        if b.recipe.asset_class == "corporate" and b.frequency == 2 and not b.month_end and b.issue.year == 2022
    ]
    fit = sorted(fit, key=lambda b: (b.issue, b.name))[-2:]
    changed = {}
    for bond, days in zip(fit, (-24, 40)):  # issued before or after the regular date of a first coupon still ahead
        first = later(bond.issue, 6, False)
        while first <= VALUATION:
            first = later(first, 6, False)
        issue = months_earlier(first, 6, False) + timedelta(days=days)
        row = replace(bond.rights[0], first=issue + DAY) if bond.rights else None
        changed[bond.name] = replace(bond, issue=issue, first_coupon=first, rights=(row,) if row else ())
    return [changed.get(b.name, b) for b in bonds]


def crisis_make_whole(bonds: list[Bond]) -> list[Bond]:
    """Three high-grade bonds keep a make-whole spread written in a crisis, above their spread of today."""
    fit = [
        b
        for b in bonds
        if b.recipe.form == "make_whole" and b.rating in ("AA", "A+") and b.issue.year in (2008, 2009, 2020)
    ]
    names = {
        b.name
        for b in sorted(fit, key=lambda b: (class_spread_bp(b.rating, life_years(b.maturity)), b.name))[
            :BELOW_MAKE_WHOLE
        ]
    }
    out = []
    for bond in bonds:
        if bond.name in names:
            above = class_spread_bp(bond.rating, life_years(bond.maturity)) + 25.0  # above refunding too
            row = replace(bond.rights[0], make_whole_bp=5 * round(above / 5.0))
            bond = replace(bond, rights=(row,))
        out.append(bond)
    return out


def make_bonds(rng: random.Random) -> list[Bond]:
    """Every security, in the order of the recipes."""
    issuers, counts, bonds = Issuers(rng), dict.fromkeys((r.code for r in RECIPES), 0), []
    for recipe in RECIPES:
        for i in range(recipe.count):
            counts[recipe.code] += 1
            name = f"{recipe.code}{counts[recipe.code]:03d}"
            bonds.append(make_bond(rng, issuers, recipe, name, (i + 0.5) / recipe.count))
    return crisis_make_whole(odd_first_coupons(bonds))


def value_at(rate: float, coupon: float, redemption: float, years: float) -> float:
    """Value of a level coupon and a redemption at a half-yearly yield. [per 100]"""
    fall = (1.0 + 0.5 * rate) ** (-2.0 * years)
    level = 2.0 * years / 2.0 if abs(rate) < 1e-9 else (1.0 - fall) / rate
    return 100.0 * coupon * level + redemption * fall


def yield_of(price: float, coupon: float, redemption: float, years: float) -> float:
    """Half-yearly yield at a price, by bisection. [1/year]"""
    low, high = -0.5, 1.0
    for _ in range(80):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if value_at(middle, coupon, redemption, years) > price else (low, middle)
    return 0.5 * (low + high)


def redemptions(bond: Bond) -> list[tuple[date, float]]:
    """Where the bond may end: each row of its schedule at its start, the par-call date, and maturity."""
    ends = [(r.first, r.price) for r in bond.rights if r.price is not None]
    if bond.par_call is not None:
        ends.append((bond.par_call, 100.0))
    return [*ends, (bond.maturity, 100.0)]


def carried(bond: Bond, bought: date, price: float) -> float:
    """Statement value today per 100: by effective yield from purchase to the redemption that gives the lowest value.

    Years are fractions of 365.25 days and coupons flow evenly at half-years: good enough for an invented ledger.
    """
    values = []
    for end, redemption in redemptions(bond):
        if end <= bought or (end - bought).days < 30:
            continue
        if end <= VALUATION:  # passed without a call: no more than what the issuer may pay since then
            values.append(redemption if redemption < price else price)
            continue
        rate = yield_of(price, bond.coupon, redemption, years_between(bought, end))
        values.append(value_at(rate, bond.coupon, redemption, years_between(VALUATION, end)))
    in_force = [r.price for r in bond.rights if r.price is not None and r.first <= VALUATION <= r.last]
    return min(values + in_force)


def purchase(rng: random.Random, bond: Bond) -> tuple[date, float]:
    """When and at what clean price a lot was bought: mostly at issue, else in the market."""
    if bond.frequency == 0:
        rate = 0.0385 + 0.008 * rng.random()
        return bond.issue, value_at(rate, 0.0, 100.0, years_between(bond.issue, bond.maturity))
    if rng.random() < 0.7:
        return bond.issue, round(between(rng, 98.9, 100.4), 3)
    days = (VALUATION - bond.issue).days - 20
    return bond.issue + timedelta(days=max(0, int(days * 0.7 * rng.random()))), round(between(rng, 97.0, 104.0), 3)


def make_lot(rng: random.Random, bond: Bond, segment: str, share: float, name: str) -> Lot:
    low, high = bond.recipe.par
    size = share * between(rng, low, high)
    bought, price = purchase(rng, bond)
    book = carried(bond, bought, price)
    return Lot(name, bond, segment, size, book, book + between(rng, -0.3, 0.3))


def make_lots(rng: random.Random, bonds: list[Bond]) -> list[Lot]:
    """One lot of every security, then further ones, some in another segment."""
    pairs = [(bond, bond.recipe.segment, 1.0) for bond in bonds]
    for _ in range(EXTRA_LOTS):
        bond = bonds[int(rng.random() * len(bonds))]
        other = "payout" if life_years(bond.maturity) > 11.0 else "deferred_annuities"
        pairs.append((bond, bond.recipe.segment if rng.random() < 0.6 else other, 0.5))
    return [make_lot(rng, bond, segment, share, f"L{i + 1:04d}") for i, (bond, segment, share) in enumerate(pairs)]
