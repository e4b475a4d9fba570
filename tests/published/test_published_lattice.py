"""A small lattice of lognormal one-year rates, held to the worked examples it was published with.

The lattice is no part of the program: it is a second road to callable bonds, kept here so that the published figures
of the literature stand beside the program's own model. Node rates of a year differ by the factor exp(2 x volatility),
up and down are equally likely, and each year's lowest rate is solved so that the par bond of that life is worth 100.

"published" = figure read on a public page; "recalled" = recalled from memory and confirmed by this lattice; "own" = our
figure, by a second program.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
import pytest
from scipy.optimize import brentq

Rates = list[np.ndarray]  # one array a year, lowest rate first


@dataclass(frozen=True)
class LatticeBond:
    """Annual coupons per 100, clean call and put prices by year; rights are used after the coupon of their year."""

    coupons: tuple[float, ...]
    call: Mapping[int, float] = field(default_factory=dict)
    put: Mapping[int, float] = field(default_factory=dict)


def level(coupon: float, years: int, **rights: Mapping[int, float]) -> LatticeBond:
    return LatticeBond((coupon,) * years, **rights)


def value(bond: LatticeBond, rates: Rates, spread: float = 0.0) -> float:
    """Backward through the years: mean of the two values to come, discounted; then the issuer, then the holder."""
    years = len(bond.coupons)
    worth = np.full(years + 1, 100.0)
    for year in range(years, 0, -1):
        if year < years:
            worth = np.maximum(np.minimum(worth, bond.call.get(year, math.inf)), bond.put.get(year, -math.inf))
        worth = worth + bond.coupons[year - 1]
        worth = 0.5 * (worth[:-1] + worth[1:]) / (1.0 + rates[year - 1] + spread)
    return float(worth[0])


def calibrated(par_yields: Sequence[float], volatility: float) -> Rates:
    rates: Rates = []
    for year, par in enumerate(par_yields):
        shape = np.exp(2.0 * volatility * np.arange(year + 1))
        bond = level(100.0 * par, year + 1)
        lowest = brentq(lambda low, s=shape, b=bond: value(b, [*rates, low * s]) - 100.0, 1e-6, 0.5, xtol=1e-16)
        rates.append(lowest * shape)
    return rates


def option_adjusted_spread(bond: LatticeBond, rates: Rates, price: float) -> float:
    return float(brentq(lambda spread: value(bond, rates, spread) - price, -0.02, 0.2, xtol=1e-14))


# ---- the four-year example ------------------------------------------------------------------------------------------
# Kalotay, Williams and Fabozzi, A Model for Valuing Bonds and Embedded Options, Financial Analysts Journal, 1993, in
# the four-year form of Fabozzi's handbooks (Valuing Bonds with Embedded Options): par yields 3.5, 4.2, 4.7 and 5.2 %
# with annual coupons, volatility 10 %.

HANDBOOK = calibrated([0.035, 0.042, 0.047, 0.052], 0.10)
FREE = level(6.5, 4)
CALLABLE = level(6.5, 4, call={1: 100.0, 2: 100.0, 3: 100.0})
PUTABLE = level(6.5, 4, put={1: 100.0, 2: 100.0, 3: 100.0})


def test_known_rates_of_the_handbook_lattice():
    """Published to three decimals; the four decimals of the first two years recalled."""
    assert 100 * HANDBOOK[1] == pytest.approx([4.4448, 5.4289], abs=6e-5)
    assert 100 * HANDBOOK[2] == pytest.approx([4.6958, 5.7354, 7.0053], abs=6e-5)
    assert 100 * HANDBOOK[3] == pytest.approx([5.048, 6.166, 7.531, 9.199], abs=1.1e-3)


def test_known_handbook_bond_without_options():
    """Recalled."""
    assert value(FREE, HANDBOOK) == pytest.approx(104.643, abs=5.1e-4)


def test_known_handbook_bond_callable_at_par():
    """Recalled."""
    assert value(CALLABLE, HANDBOOK) == pytest.approx(102.899, abs=5.1e-4)
    assert value(FREE, HANDBOOK) - value(CALLABLE, HANDBOOK) == pytest.approx(1.744, abs=1.1e-3)


def test_known_handbook_bond_putable_at_par():
    """Recalled."""
    assert value(PUTABLE, HANDBOOK) == pytest.approx(105.327, abs=5.1e-4)
    assert value(PUTABLE, HANDBOOK) - value(FREE, HANDBOOK) == pytest.approx(0.684, abs=1.1e-3)


def test_known_handbook_step_up_note():
    """Recalled: 4.25 % for two years, then 7.5 %."""
    assert value(LatticeBond((4.25, 4.25, 7.5, 7.5)), HANDBOOK) == pytest.approx(102.082, abs=5.1e-4)


def test_known_handbook_option_adjusted_spread():
    """Recalled: a market price of 102.218 is 35 bp."""
    assert 1e4 * option_adjusted_spread(CALLABLE, HANDBOOK, 102.218) == pytest.approx(35.0, abs=0.5)


def test_known_eight_percent_bond_callable_once_at_102():
    """Own figure for a question of a public exercise sheet: three years, 8 %, callable at 102 after two."""
    assert value(level(8.0, 3, call={2: 102.0}), HANDBOOK) == pytest.approx(108.766608, abs=5e-7)


def floater(rates: Rates, cap: float) -> float:
    """A four-year note that pays the year's opening rate, at most the cap, at the year's end."""
    worth = np.full(5, 100.0)
    for year in range(4, 0, -1):
        paid = 100.0 * np.minimum(rates[year - 1], cap)
        worth = (0.5 * (worth[:-1] + worth[1:]) + paid) / (1.0 + rates[year - 1])
    return float(worth[0])


def test_known_floating_notes_with_and_without_a_cap():
    """Own figures; without a cap the note is worth par by identity."""
    assert floater(HANDBOOK, math.inf) == pytest.approx(100.0, abs=1e-10)
    assert floater(HANDBOOK, 0.0725) == pytest.approx(99.724055, abs=5e-7)


# ---- other curves and volatilities ----------------------------------------------------------------------------------
# Own figures, by a second program: discrete arithmetic, so agreement is to the last printed digit.

CURVES = {
    "flat": [0.05] * 10,
    "rising": [0.03, 0.034, 0.037, 0.0395, 0.0415, 0.043, 0.0443, 0.0453, 0.0461, 0.0468],
    "falling": [0.062, 0.058, 0.055, 0.053, 0.0515, 0.0505, 0.0497, 0.049, 0.0485, 0.048],
}
BONDS = {
    "declining": level(5.5, 10, call={3: 102.0, 4: 101.5, 5: 101.0, 6: 100.5, 7: 100.0, 8: 100.0, 9: 100.0}),
    "at par": level(5.0, 5, call={2: 100.0, 3: 100.0, 4: 100.0}),
    "put": level(4.0, 7, put={3: 100.0, 5: 100.0}),
    "both": level(4.75, 10, call=dict.fromkeys(range(3, 10), 101.0), put={5: 99.0}),
}
GRID = [  # curve, volatility, bond, spread, price, price without options, effective duration, convexity (25 bp)
    ("flat", 0.05, "both", 0.01, 93.99744225, 90.79932644, 4.355364, 39.614),
    ("flat", 0.10, "both", 0.01, 94.16862853, 90.79763355, 4.551301, -41.122),
    ("flat", 0.20, "declining", 0.01, 94.09057563, 96.31078488, 6.177228, 41.5109),
    ("rising", 0.05, "at par", 0.0, 102.92874886, 103.80144867, 2.468585, -77.6052),
    ("rising", 0.10, "at par", 0.0, 102.60836773, 103.80144867, 2.725854, -101.404),
    ("rising", 0.10, "declining", 0.01, 98.32739479, 98.78374128, 6.984031, -42.2072),
    ("rising", 0.10, "put", 0.0, 100.9886868, 97.42787074, 3.058088, 16.2958),
    ("falling", 0.10, "at par", 0.0, 98.11440273, 99.35780609, 2.801107, -272.1104),
    ("falling", 0.10, "put", 0.0, 96.32178062, 94.43023115, 3.629881, 274.6695),
    ("falling", 0.10, "both", 0.01, 93.69040052, 92.17615679, 4.680423, 170.213),
    ("falling", 0.20, "declining", 0.01, 94.61453223, 97.68265259, 5.874139, -18.4235),
]


@pytest.mark.parametrize(("curve", "volatility", "name", "spread", "price", "free", "duration", "bend"), GRID)
def test_known_lattice_prices_and_effective_measures(curve, volatility, name, spread, price, free, duration, bend):
    bond, shift = BONDS[name], 0.0025
    down, mid, up = (calibrated([par + d for par in CURVES[curve]], volatility) for d in (-shift, 0.0, shift))
    assert value(bond, mid, spread) == pytest.approx(price, abs=1e-6)
    assert value(LatticeBond(bond.coupons), mid, spread) == pytest.approx(free, abs=1e-6)
    low, high = value(bond, up, spread), value(bond, down, spread)
    assert (high - low) / (2 * price * shift) == pytest.approx(duration, abs=1e-4)
    assert (high + low - 2 * price) / (price * shift**2) == pytest.approx(bend, abs=0.05)


@pytest.mark.parametrize("curve", CURVES)
@pytest.mark.parametrize("volatility", [0.05, 0.10, 0.20])
def test_limit_par_bonds_of_every_life_are_worth_par(curve, volatility):
    rates = calibrated(CURVES[curve], volatility)
    for years, par in enumerate(CURVES[curve], start=1):
        assert value(level(100 * par, years), rates) == pytest.approx(100.0, abs=1e-9)


@pytest.mark.parametrize("curve", CURVES)
def test_order_a_call_costs_the_holder_a_put_pays_him_and_volatility_adds_to_both(curve):
    worth = {
        (name, volatility): value(BONDS[name], calibrated(CURVES[curve], volatility))
        for name in ("at par", "put")
        for volatility in (0.05, 0.10, 0.20)
    }
    free = {name: value(LatticeBond(BONDS[name].coupons), calibrated(CURVES[curve], 0.1)) for name in ("at par", "put")}
    assert worth["at par", 0.20] <= worth["at par", 0.10] <= worth["at par", 0.05] <= free["at par"] + 1e-12
    assert worth["put", 0.20] >= worth["put", 0.10] >= worth["put", 0.05] >= free["put"] - 1e-12
