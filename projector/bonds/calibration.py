"""Each security's valuation spread: the one that gives its price back under the issuer's policy (C1, C6)."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt

from projector.bonds.exercise.path_kernels import Dates, straight_values
from projector.bonds.exercise.step_operator import GRID_FINE
from projector.bonds.mapped import MappedBonds
from projector.bonds.solving import ExerciseModel, Jobs, MonthSolver, production_grid
from projector.bonds.spreads import SpreadPath

Array = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]
BoolArray = npt.NDArray[np.bool_]

LOWEST, HIGHEST = -0.02, 0.20
PRICE_TOLERANCE = 1e-9  # per 100
NEAR_TOLERANCE = 1e-4  # per 100, on the coarser grid
LEAST_SLOPE = 0.2  # per 100 of price for 100 bp
USUAL_SLOPE = 0.0025  # spread for one point of price, for the first step only [1/year]
MOST_TURNS = 80


@dataclass(frozen=True)
class Calibrated:
    """Valuation spreads at month 0 and what they give back. shape (security,)

    origin  "price", "given" or "rating_spread" (the fallback: no root between -200 and 2,000 bp, or a slope under 0.2
            per 100 of price for 100 bp)
    """

    spread: Array
    model_price: Array  # clean, per 100
    clean_price: Array  # the price stated, or the model's where a spread was stated
    slope: Array  # change of price for +100 bp [per 100]
    origin: tuple[str, ...]


@dataclass(frozen=True)
class PriceToday:
    """Dirty value at month 0 as a function of the valuation spread, the issuer's policy held (or moved with it)."""

    bonds: MappedBonds
    spreads: SpreadPath
    model: ExerciseModel
    discount: Array  # [tau, 1] of month 0
    refunding_is_valuation: bool
    fine: bool = True  # on the fine grid, or on the coarser one of the paths

    def __call__(self, units: IntArray, spread: Array) -> Array:
        """Holder's value of every security at its spread. [per 100], shape (unit,)"""
        out = np.empty(units.size)
        with_rights = self.bonds.last_decision[units] > 0
        for s in sorted(set(self.bonds.coupon_step[units[~with_rights]].tolist())):
            rows = np.flatnonzero(~with_rights & (self.bonds.coupon_step[units] == s))
            value = np.empty((rows.size, 1))
            straight_values(
                0, int(s), units[rows], self.bonds.maturity, self.bonds.flow, spread[rows], self.discount,
                np.ones((rows.size, 1), dtype=np.bool_), value,
            )  # fmt: skip
            out[rows] = value[:, 0]
        solver = MonthSolver(self.bonds, self.spreads, self.model)
        rights = np.flatnonzero(with_rights)
        for at, part in solver.groups(0, units[rights]):
            rows = rights[part]
            out[rows] = self.solved(units[rows], spread[rows], at)
        return out

    def solved(self, units: IntArray, spread: Array, at: Dates) -> Array:
        """Holder's value of securities with rights, on one grid. [per 100], shape (unit,)"""
        refunding = self.spreads.refunding
        if self.refunding_is_valuation:
            refunding = refunding.copy()
            refunding[units, 0] = spread
        path = SpreadPath(self.spreads.class_spread, self.spreads.fade, self.spreads.residual, refunding)
        both = self.model.cost != 0.0 or not self.refunding_is_valuation
        solver = MonthSolver(self.bonds, path, self.model)
        jobs = Jobs(at, units, np.zeros(units.size, dtype=np.int64))
        grid = GRID_FINE if self.fine else production_grid(at.step)
        return solver.solve(jobs, self.discount, grid, both, holder_spread=spread)[1]


@dataclass(frozen=True)
class Roots:
    """Where prices meet their targets: the spread (nan: none between -200 and 2,000 bp) and what it gave on the way.

    slope  spread for one point of price at the last step [1/year]
    """

    spread: Array
    slope: Array


def spread_roots(
    price: Callable[[IntArray, Array], Array], units: IntArray, target: Array, start: Array, slope: Array,
    tolerance: float = PRICE_TOLERANCE, bounds: tuple[float, float] = (LOWEST, HIGHEST),
) -> Roots:  # fmt: skip
    """Spread at which each price meets its target, by a secant kept inside a bracket. [1/year]

    start, slope  where to begin, and the spread to add for one point of price too high on the first step
    bounds        where to look; a falling function of anything else than a spread brings its own
    """
    low, high = np.full(units.size, bounds[0]), np.full(units.size, bounds[1])
    x, slope = np.clip(start, *bounds), slope.copy()
    before, miss_before = x.copy(), np.zeros(units.size)
    root = np.full(units.size, np.nan)
    open_ = np.arange(units.size)
    for turn in range(MOST_TURNS):
        if open_.size == 0:
            break
        miss = price(units[open_], x[open_]) - target[open_]
        done = np.abs(miss) <= tolerance
        root[open_[done]] = x[open_[done]]
        above = miss > 0.0
        low[open_[above]] = x[open_[above]]
        high[open_[~above]] = x[open_[~above]]
        if turn > 0:
            rise = miss - miss_before[open_]
            slope[open_] = (before[open_] - x[open_]) / np.where(rise == 0.0, 1.0, rise)
        step = x[open_] + miss * slope[open_]
        inside = (step > low[open_]) & (step < high[open_])
        before[open_], miss_before[open_] = x[open_], miss
        shut = high[open_] - low[open_] < 1e-14  # the bracket closed on an end: no root in the range
        x[open_] = np.where(inside, step, 0.5 * (low[open_] + high[open_]))
        open_ = open_[~(done | shut)]
    return Roots(root, slope)


def roots_by_two_grids(price: PriceToday, units: IntArray, target: Array, start: Array) -> Array:
    """Spreads on the fine grid, begun from those of the coarser one: most turns are spent where they cost little."""
    usual = np.full(units.size, USUAL_SLOPE)
    near = spread_roots(replace(price, fine=False), units, target, start, usual, NEAR_TOLERANCE)
    found = ~np.isnan(near.spread)
    return spread_roots(
        price, units, target, np.where(found, near.spread, start), np.where(found, near.slope, usual)
    ).spread


def calibrate(price: PriceToday, clean_price: Array, given_spread: Array, class_spread: Array) -> Calibrated:
    """Valuation spreads from stated prices (nan where a spread was stated instead). shape (security,)"""
    units = np.arange(clean_price.size)
    accrued = price.bonds.accrued[:, 0]
    priced = np.flatnonzero(~np.isnan(clean_price))
    spread = given_spread.copy()
    origin = np.full(clean_price.size, "given", dtype=object)
    root = roots_by_two_grids(price, priced, clean_price[priced] + accrued[priced], class_spread[priced])
    found = ~np.isnan(root)
    spread[priced] = np.where(found, root, class_spread[priced])
    value = price(units, spread)
    slope = (price(units, spread + 1e-4) - value) * 100.0
    flat = np.abs(slope[priced]) < LEAST_SLOPE
    origin[priced] = np.where(found & ~flat, "price", "rating_spread")
    back = priced[found & flat]
    if back.size:
        spread[back] = class_spread[back]
        value[back] = price(back, spread[back])
    model = value - accrued
    stated = np.where(np.isnan(clean_price), model, clean_price)
    return Calibrated(spread, model, stated, slope, tuple(origin.tolist()))
