"""The yield at which an issuer is indifferent to calling, and the yield it would pay today.

The critical refunding yield belongs to the next right: with today's curve moved in parallel until the cost of going on
equals the bar at that right, it is the yield of the issuer's own new par bond for the life then remaining. Where the
issuer's present yield lies below it, the issuer calls at the next right if the curve stays as it is.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt

from projector.arithmetic.elementary import exp_array
from projector.bonds.calibration import NEAR_TOLERANCE, spread_roots
from projector.bonds.exercise.step_operator import GRID_FINE
from projector.bonds.solving import Jobs, MonthSolver, production_grid
from projector.rates.curve import CurveError, CurveReading
from projector.rates.key_rates import shifted_discounts

Array = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

SHIFTS = (-0.10, 0.10)  # parallel shifts looked at [1/year]
TOLERANCE = 1e-6  # per 100
USUAL_SLOPE = 0.0025  # shift for one point of value, for the first step only [1/year]


@dataclass(frozen=True)
class Refunding:
    """By security, nan where no right is ahead. shape (unit,)

    present   yield of the issuer's new par bond on today's curve, for the life remaining at the next right [1/year]
    critical  the same on the curve at which calling at the next right is just worth it [1/year]; nan also where no
              shift within 10 points reaches it
    """

    present: Array
    critical: Array


def new_bond_yield(discount: Array, months: int) -> float:
    """Coupon rate, paid half-yearly, at which a new bond is worth par. [1/year]

    discount  on the issuer's own curve, P(tau) by month, shape (tau,)
    months    life; payments are counted back from its end, and a first period shorter than six months pays its share

    Source: Kalotay, Williams and Fabozzi, A Model for Valuing Bonds and Embedded Options, Financial Analysts Journal
    49(3), 1993, refunding at the issuer's par yield (cited from memory).
    """
    at = np.arange(months, 0, -6)
    share = np.minimum(at, 6) / 6.0
    return float(2.0 * (1.0 - discount[months]) / (share * discount[at]).sum())


def next_rights(solver: MonthSolver, units: IntArray) -> IntArray:
    """Month in which the next call can be decided, 0 where there is none. shape (unit,)"""
    live = np.isfinite(solver.bonds.clean_price[units])
    return np.where(live.any(axis=1), live.argmax(axis=1) - solver.bonds.call_lag[units], 0)


@dataclass(frozen=True)
class CostAtNextRight:
    """The issuer's cost of going on at each security's next right, as a function of a parallel shift of the curve."""

    solver: MonthSolver
    yields: Array  # of the written-out starting curve [1/year]
    reading: CurveReading
    fine: bool = True  # on the fine grid, or on the coarser one of the paths

    def discounts(self, shift: Array, months: int) -> Array:
        """Today's curve, each column moved by its shift; nan where the moved curve is none. [-], shape (tau, job)"""
        try:
            return shifted_discounts(self.yields, self.reading, shift[None, :], months)
        except CurveError:
            if shift.size == 1:
                return np.full((months + 1, 1), np.nan)
            return np.hstack([self.discounts(shift[[i]], months) for i in range(shift.size)])

    def __call__(self, units: IntArray, shift: Array) -> Array:
        """Less the bar: above nothing the issuer calls. [per 100], shape (unit,)"""
        bonds, out = self.solver.bonds, np.empty(units.size)
        month = next_rights(self.solver, units)
        for m in sorted(set(month.tolist())):
            now = np.flatnonzero(month == m)
            for at, part in self.solver.groups(m, units[now]):
                rows = now[part]
                mine, paths = units[rows], np.arange(rows.size)
                discount = self.discounts(shift[rows], int(bonds.maturity[mine].max()) - m)
                jobs = Jobs(at._replace(offset=at.step), mine, paths)
                grid = GRID_FINE if self.fine else production_grid(at.step)
                cost = self.solver.solve(jobs, discount, grid, bool(bonds.puttable[mine].any()))[0]
                out[rows] = cost - self.solver.job_bars(at, mine, paths, discount)
        return out

    def new_bond_yields(self, units: IntArray, shift: Array) -> Array:
        """Yields of the issuers' new par bonds for the lives remaining at the next rights. [1/year], shape (unit,)"""
        bonds, out = self.solver.bonds, np.empty(units.size)
        month = next_rights(self.solver, units)
        lives = bonds.maturity[units] - month
        discount = self.discounts(shift, int(lives.max(initial=1)))
        spread = self.solver.spreads.refunding[units, month]
        for i, life in enumerate(lives.tolist()):
            fade = exp_array(np.asarray(-spread[i] / 12.0 * np.arange(life + 1), dtype=np.float64))
            out[i] = new_bond_yield(discount[: life + 1, i] * fade, life)
        return out


def refunding_yields(solver: MonthSolver, units: IntArray, yields: Array, reading: CurveReading) -> Refunding:
    """Present and critical refunding yield of every security.

    yields, reading  the starting curve, written out

    The curve of the next right's date is taken to be today's, moved in parallel: no forward drift, so that the yield
    can be held against today's. Later rights and the issuer's cost are inside, at the spread of the life remaining.
    """
    present, critical = np.full(units.size, np.nan), np.full(units.size, np.nan)
    month = next_rights(solver, units)
    rows = np.flatnonzero(month > 0)
    mine, nothing = units[rows], np.zeros(rows.size)
    cost = CostAtNextRight(solver, yields, reading)
    usual = np.full(rows.size, USUAL_SLOPE)
    near = spread_roots(replace(cost, fine=False), mine, nothing, nothing, usual, NEAR_TOLERANCE, SHIFTS)
    found = ~np.isnan(near.spread)
    start, slope = np.where(found, near.spread, 0.0), np.where(found, near.slope, usual)
    shift = spread_roots(cost, mine, nothing, start, slope, TOLERANCE, SHIFTS).spread
    present[rows] = cost.new_bond_yields(mine, nothing)
    reached = ~np.isnan(shift)
    critical[rows[reached]] = cost.new_bond_yields(mine[reached], shift[reached])
    return Refunding(present, critical)
