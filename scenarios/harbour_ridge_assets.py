"""The invented holdings of the Harbour Ridge demo: securities, call rights and lots, drawn from one fixed seed.

Nothing here is an observation of a real security. A coupon is the Treasury level of the year of issue plus the spread
of that year; a lot is bought near par and carried by effective yield toward the redemption that gives least.
"""

from __future__ import annotations

import bisect
import random
from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import date, timedelta
from typing import Any

from projector.study.daycounts import months_before

VALUATION = date(2022, 12, 31)

# Approximate year averages of the ten-year Treasury yield, from memory; demo only. [1/year]
TREASURY_LEVEL = {
    2008: 0.0370, 2009: 0.0330, 2010: 0.0320, 2011: 0.0280, 2012: 0.0180, 2013: 0.0235, 2014: 0.0255, 2015: 0.0215,
    2016: 0.0185, 2017: 0.0235, 2018: 0.0290, 2019: 0.0215, 2020: 0.0090, 2021: 0.0145, 2022: 0.0295,
}  # fmt: skip

# Spreads at issue as a multiple of the class spreads at the valuation date: wide in 2008-2009 and 2020. Invented.
SPREAD_MULTIPLE = {
    2008: 1.90, 2009: 1.90, 2010: 1.35, 2011: 1.45, 2012: 1.35, 2013: 1.15, 2014: 1.00, 2015: 1.15, 2016: 1.25,
    2017: 0.95, 2018: 1.05, 2019: 1.05, 2020: 1.50, 2021: 0.85, 2022: 1.10,
}  # fmt: skip

LIVES = (1, 3, 5, 7, 10, 20, 30)
# Class spreads over Treasury at the valuation date by remaining life. Invented; AAA stands for agency paper. [bp]
CLASS_SPREADS = {
    "AAA": (8, 11, 14, 17, 20, 26, 30),
    "AA": (35, 48, 58, 66, 75, 92, 98),
    "A+": (55, 70, 82, 90, 100, 118, 124),
    "A": (65, 82, 95, 105, 115, 133, 140),
    "A-": (75, 94, 108, 118, 130, 148, 155),
    "BBB+": (95, 115, 130, 142, 155, 174, 182),
    "BBB": (115, 138, 155, 168, 182, 202, 212),
    "BBB-": (150, 175, 195, 210, 225, 250, 262),
    "BB+": (210, 240, 265, 280, 300, 330, 340),
    "BB": (265, 300, 325, 345, 365, 395, 405),
}
# Net annual cost of default by rating. Invented. [1/year]
DEFAULT_COST = {
    "AAA": 0.0002, "AA": 0.0004, "A+": 0.0005, "A": 0.0007, "A-": 0.0009, "BBB+": 0.0014, "BBB": 0.0018,
    "BBB-": 0.0028, "BB+": 0.0080, "BB": 0.0120,
}  # fmt: skip

# Invented words; no company of these names is known to the writer.
FIRST_WORDS = (
    *("Abernook", "Brindlemoor", "Calverquist", "Dorrowmere", "Elstowick", "Farrowquay", "Gildermarsh", "Hexlefen"),
    *("Inverquoy", "Jasperholt", "Kelvaston", "Lanternby", "Marrowgate", "Nettlequist", "Oxenmere", "Pellavor"),
    *("Quillmere", "Rookhallow", "Saltquarry", "Tamberlyn", "Umberwick", "Varrowdale", "Wyndlecote", "Yarrowfenn"),
    *("Zephyrholm", "Ashquill", "Bramblecoft", "Corriven", "Dunsparrow", "Emberquay", "Fossilmoor", "Glimmerstow"),
    *("Hollowquist", "Ironwhistle", "Juniperstow", "Kettlemarsh", "Larkenvale", "Mistlequay", "Norrowby", "Otterquill"),
)
SECTOR_WORDS = {
    "government": ("Housing Loan Agency", "Farm Loan Agency", "Export Agency", "Turnpike District", "Water District"),
    "utilities": ("Light and Power", "Water and Gas", "Electric Cooperative"),
    "banks": ("Bancshares", "Savings Group"),
    "energy": ("Pipelines", "Petroleum"),
    "healthcare": ("Medical Devices", "Medicines"),
    "consumer": ("Foods", "Stores"),
    "industrials": ("Machine Works", "Paperboard"),
    "communications": ("Networks", "Broadcasting"),
    "transportation": ("Railroad", "Freight Lines"),
    "real_estate": ("Property Trust", "Warehouse Trust"),
}
BUSINESS_SECTORS = tuple(name for name in SECTOR_WORDS if name not in ("government", "utilities"))
IG_CORPORATE = {"AA": 10, "A+": 12, "A": 18, "A-": 18, "BBB+": 20, "BBB": 18, "BBB-": 6}
EVEN_YEARS = dict.fromkeys(range(2008, 2023), 6.0) | {
    2012: 4.0,
    2018: 10.0,
    2019: 7.0,
    2020: 3.0,
    2021: 5.0,
    2022: 12.0,
}
AGENCY_YEARS = EVEN_YEARS | {2018: 9.0, 2020: 6.0, 2021: 7.0, 2022: 9.0}
TIGHT_YEARS = dict.fromkeys(range(2012, 2023), 6.0) | {2018: 4.0, 2021: 8.0, 2022: 5.0}
UTILITY_YEARS = EVEN_YEARS | {2008: 5.0, 2009: 5.0, 2012: 6.0, 2022: 7.0}


@dataclass(frozen=True)
class Recipe:
    """How many securities of one kind to invent, and from what."""

    code: str  # start of the security id
    asset_class: str
    count: int
    segment: str
    ratings: Mapping[str, float]
    form: str  # which rights, see `rights_of`
    life: tuple[float, float]  # remaining years at the valuation date, from and to
    terms: tuple[int, ...]  # years from issue to maturity
    par: tuple[float, float]  # relative size of the first lot, from and to
    sectors: tuple[str, ...] = BUSINESS_SECTORS
    years: Mapping[int, float] = field(default_factory=lambda: EVEN_YEARS)
    lean: float = 1.0  # above 1 the remaining lives lean to the short end
    extra_bp: float = 0.0  # coupon above that of a bullet, for the issuer's right to call or for scarce trading


DA, PO, GI = "deferred_annuities", "payout", "guaranteed_interest"
GOVERNMENT, UTILITIES = ("government",), ("utilities",)
RECIPES = (
    Recipe("AGY", "agency", 5, DA, {"AAA": 1}, "european",
           (2, 9), (5, 7, 10, 15), (4, 7), GOVERNMENT, AGENCY_YEARS, extra_bp=30),
    Recipe("AGY", "agency", 5, DA, {"AAA": 1}, "bermudan",
           (2, 10), (7, 10, 15, 20), (4, 7), GOVERNMENT, AGENCY_YEARS, extra_bp=40),
    Recipe("AGY", "agency", 4, DA, {"AAA": 1}, "american",
           (3, 10), (7, 10, 15, 20), (4, 7), GOVERNMENT, AGENCY_YEARS, extra_bp=45),
    Recipe("AGY", "agency", 4, GI, {"AAA": 1}, "european",
           (1.4, 5), (5, 7), (3, 5), GOVERNMENT, AGENCY_YEARS, extra_bp=25),
    Recipe("AGZ", "agency", 4, PO, {"AAA": 1}, "zero", (12, 26), (20, 25, 30), (9, 16), GOVERNMENT),
    Recipe("MUN", "municipal", 5, DA, {"AA": 3, "A+": 2}, "american_late",
           (4, 14), (15, 20, 25), (3, 5), GOVERNMENT, UTILITY_YEARS, extra_bp=25),
    Recipe("MUN", "municipal", 4, PO, {"AA": 3, "A+": 2}, "american_late",
           (6, 18), (15, 20, 25, 30), (3, 5), GOVERNMENT, UTILITY_YEARS, extra_bp=25),
    Recipe("UTL", "utility", 10, DA, {"A": 2, "A-": 4, "BBB+": 4}, "declining",
           (3, 13), (15, 20, 25, 30), (4, 7), UTILITIES, UTILITY_YEARS, extra_bp=30),
    Recipe("UTL", "utility", 6, PO, {"A": 2, "A-": 4, "BBB+": 4}, "declining",
           (8, 23), (20, 25, 30), (4, 7), UTILITIES, UTILITY_YEARS, extra_bp=30),
    Recipe("UTL", "utility", 10, DA, {"A": 3, "A-": 4, "BBB+": 3}, "make_whole",
           (1.4, 11), (10, 15, 20), (3, 7), UTILITIES),
    Recipe("UTL", "utility", 10, PO, {"A": 3, "A-": 4, "BBB+": 3}, "make_whole",
           (3, 23), (15, 20, 25, 30), (4, 8), UTILITIES, lean=1.2),
    Recipe("PRV", "private", 11, DA, {"A-": 2, "BBB+": 4, "BBB": 5, "BBB-": 1}, "private",
           (2, 10), (7, 10, 12, 15), (4, 7), years=TIGHT_YEARS, extra_bp=25),
    Recipe("PRV", "private", 8, PO, {"A-": 3, "BBB+": 4, "BBB": 3}, "make_whole_life",
           (2, 18), (10, 15, 20, 25), (4, 7), extra_bp=35),
    Recipe("PRV", "private", 4, GI, {"A-": 3, "BBB+": 4}, "make_whole_life", (1, 6), (5, 7, 10), (3, 5), extra_bp=35),
    Recipe("HYD", "high_yield", 15, DA, {"BB+": 6, "BB": 5}, "high_yield",
           (2.4, 8), (7, 8, 10), (2.2, 4), extra_bp=25,
           years={2014: 4, 2015: 5, 2016: 6, 2017: 6, 2018: 7, 2019: 8, 2020: 4, 2021: 9, 2022: 8}),
    Recipe("CRP", "corporate", 60, DA, IG_CORPORATE, "make_whole",
           (0.4, 10), (3, 5, 7, 10, 12, 15), (3, 8), lean=1.25),
    Recipe("CRP", "corporate", 9, DA, IG_CORPORATE, "none", (0.4, 5), (3, 5, 7, 10), (3, 6)),
    Recipe("CRP", "corporate", 40, PO, IG_CORPORATE, "make_whole", (0.4, 22), (10, 15, 20, 25, 30), (3, 8), lean=1.3),
    Recipe("CRP", "corporate", 36, GI, IG_CORPORATE, "make_whole", (0.4, 6.5), (3, 5, 7, 10), (3, 8), lean=1.15),
    Recipe("CRP", "corporate", 7, GI, IG_CORPORATE, "none", (0.4, 3.5), (3, 5, 7), (3, 6)),
)  # fmt: skip
EXTRA_LOTS = 76

# Issued when spreads were wide, with a make-whole spread above what the market asks today: see README.md.
BELOW_MAKE_WHOLE = 3


@dataclass(frozen=True)
class Right:
    """One row of the call schedule."""

    first: date
    last: date
    style: str
    price: float | None
    make_whole_bp: int | None = None


@dataclass(frozen=True)
class Bond:
    """One invented security with its rights."""

    name: str
    issuer: str
    recipe: Recipe
    sector: str
    rating: str
    coupon: float
    frequency: int
    day_count: str
    month_end: bool
    issue: date
    first_coupon: date | None
    maturity: date
    par_call: date | None
    rights: tuple[Right, ...]
    spread_bp: float  # valuation spread: class spread plus noise


@dataclass(frozen=True)
class Lot:
    """One purchase. book is per 100 of par."""

    name: str
    bond: Bond
    segment: str
    size: float  # relative until scaled, then currency
    book: float
    tax: float


def pick(rng: random.Random, weights: Mapping[Any, float]) -> Any:
    """One key, drawn with its weight."""
    keys = list(weights)
    edges, total = [], 0.0
    for key in keys:
        total += weights[key]
        edges.append(total)
    return keys[min(bisect.bisect_right(edges, rng.random() * total), len(keys) - 1)]


def between(rng: random.Random, low: float, high: float) -> float:
    return low + (high - low) * rng.random()


def years_between(start: date, end: date) -> float:
    """Years of 365.25 days, enough for an invented amortisation."""
    return (end - start).days / 365.25


def class_spread_bp(rating: str, years: float) -> float:
    """Class spread, linear between lives and flat outside. [bp]"""
    spreads = CLASS_SPREADS[rating]
    if years <= LIVES[0]:
        return float(spreads[0])
    for i in range(1, len(LIVES)):
        if years <= LIVES[i]:
            share = (years - LIVES[i - 1]) / (LIVES[i] - LIVES[i - 1])
            return spreads[i - 1] + share * (spreads[i] - spreads[i - 1])
    return float(spreads[-1])


def life_years(maturity: date) -> float:
    """Remaining life in mapped months, as years."""
    return ((maturity.year - VALUATION.year) * 12 + maturity.month - VALUATION.month) / 12.0


def later(day: date, months: int, month_end: bool) -> date:
    return months_before(day, -months, month_end=month_end)


def issue_and_maturity(rng: random.Random, recipe: Recipe, place: float) -> tuple[date, date, bool]:
    """Dates drawn from the years and terms that leave a remaining life at a place of the recipe's range.

    place  0 to 1: the securities of a recipe are spread evenly over its range, so that maturities ladder
    """
    low, high = recipe.life
    target = low + (high - low) * place**recipe.lean
    away = {
        (year, term): abs(year + term + 0.5 - 2023.0 - target)
        for year in recipe.years
        for term in recipe.terms
        if low <= year + term + 0.5 - 2023.0 <= high
    }
    nearest = max(0.5, min(away.values())) + 1e-9
    year, term = pick(rng, {pair: recipe.years[pair[0]] for pair, gap in away.items() if gap <= nearest})
    first = 4 if year + term == 2023 else 1  # at least three months of life left
    month = first + int(rng.random() * ((12 if year == 2022 else 13) - first))
    month = 3 if month == 2 else month  # no 29th of February to explain
    month_end = rng.random() < 0.18
    day = (
        later(date(year, month, 1), 1, False) - timedelta(days=1)
        if month_end
        else date(year, month, pick(rng, {1: 3, 15: 6, 20: 1}))
    )
    return day, later(day, 12 * term, month_end), month_end


def frequency_and_count(rng: random.Random, recipe: Recipe) -> tuple[int, str]:
    """Coupons a year and day count usual for the kind; a few of the rarer ones."""
    if recipe.form == "zero":
        return 0, "30/360"
    if recipe.asset_class == "private":
        return pick(rng, {(2, "30/360"): 6, (4, "30/360"): 3, (4, "ACT/360"): 2, (2, "ACT/ACT.ISDA"): 1})
    if recipe.asset_class == "corporate":
        return pick(rng, {
            (2, "30/360"): 40, (2, "30E/360"): 3, (1, "ACT/ACT.ICMA"): 3, (4, "ACT/365.FIXED"): 1, (12, "30/360"): 1,
            (2, "30E/360.ISDA"): 1,
        })  # fmt: skip
    return pick(rng, {(2, "30/360"): 14, (2, "ACT/ACT.ICMA"): 2, (4, "30/360"): 1})


def coupon_of(recipe: Recipe, rating: str, year: int, term: float) -> float:
    """Treasury level of the year + spread at issue, to the nearest twentieth of a point. [1/year]"""
    if recipe.form == "zero":
        return 0.0
    spread = class_spread_bp(rating, term) * SPREAD_MULTIPLE[year] + recipe.extra_bp
    return round((TREASURY_LEVEL[year] + spread * 1e-4) * 2000.0) / 2000.0


class Issuers:
    """Names in a fixed order; some issuers have two or three securities."""

    def __init__(self, rng: random.Random) -> None:
        self.rng, self.used = rng, 0
        self.given: set[str] = set()
        self.known: dict[tuple[str, str, str], list[str]] = {}

    def name(self, asset_class: str, sector: str, rating: str) -> str:
        mine = self.known.setdefault((asset_class, sector, rating), [])
        if mine and self.rng.random() < 0.45:
            return mine[int(self.rng.random() * len(mine))]
        words = SECTOR_WORDS[sector]
        if sector == "government":  # the first three are agencies, the others districts that tax or charge tolls
            words = words[:3] if asset_class == "agency" else words[3:]
        while True:
            first, turn = FIRST_WORDS[(self.used * 7) % len(FIRST_WORDS)], self.used // len(FIRST_WORDS)
            self.used += 1
            found = f"{first} {words[turn % len(words)]}"
            if found not in self.given:
                break
        self.given.add(found)
        mine.append(found)
        return mine[-1]
