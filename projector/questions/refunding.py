"""At what refunding yield an issuer is indifferent: the par yield of new debt, and the shift that brings it there."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from projector.arithmetic.elementary import exp_array
from projector.bonds.refunding import new_bond_yield
from projector.bonds.solving import SECOND_GRID, Jobs, MonthSolver
from projector.rates.curve import CurveError, CurveReading, log_discount_nodes, monthly_discounts

Array = npt.NDArray[np.float64]

FIRST_STEP, WIDEST = 0.0005, 0.32  # [1/year] the search goes out 5 bp, then doubles, up to shifts of 3,200 bp
SHIFT_TOLERANCE = 1e-7  # [1/year] a thousandth of a basis point


def refunding_yield(discount: Array, spread: float, months: int) -> float:
    """Par yield of new non-callable debt for a life of whole months, bond-equivalent. [1/year]

    discount  Treasury P(tau) of the month, shape (tau,), tau in months
    spread    issuer's refunding spread, continuously compounded [1/year]
    months    remaining life, at least 1 [month]

    The yield itself is `bonds.refunding.new_bond_yield`, on the issuer's own curve.
    """
    decay = np.asarray(np.arange(months + 1) * (-spread / 12.0), dtype=np.float64)
    own = np.asarray(discount[: months + 1] * exp_array(decay), dtype=np.float64)
    return new_bond_yield(own, months)


def shift_where_equal(gap: Callable[[float], float], start: float = 0.0) -> float | None:
    """The shift at which a function that falls with it is zero, None when there is none. [1/year]

    gap    continuation - bar [per 100] at a parallel shift [1/year]; nan where the curve leaves no positive discount
    start  where to begin: last month's shift, or zero

    The search goes out from the start in the direction of the root, each step twice the last, then closes in.

    Source: Brent, Algorithms for Minimization without Derivatives, 1973, chapter 4 (cited from memory).
    """
    known: dict[float, float] = {}  # the closing in asks for the ends again, and a solve is dear

    def at(shift: float) -> float:
        if shift not in known:
            known[shift] = gap(shift)
        return known[shift]

    here = at(start)
    sign = 1.0 if here > 0.0 else -1.0
    inner, step = start, FIRST_STEP
    while True:
        outer = start + sign * step
        there = at(outer)
        if np.isnan(here) or np.isnan(there) or abs(outer) > WIDEST:
            return shift_where_equal(gap) if start != 0.0 else None
        if sign * there <= 0.0:
            break
        inner, step = outer, 2.0 * step
    from scipy.optimize import brentq  # here, not above: it takes a quarter of a second that `check` need not wait

    return float(brentq(at, min(inner, outer), max(inner, outer), xtol=SHIFT_TOLERANCE, rtol=1e-14))


@dataclass(frozen=True)
class MonthQuestion:
    """One security at one month of one path: what going on costs, and new debt, on shifted curves.

    yields  quoted yields of the month, shape (tenor,) [1/year]; a shift is added to all of them (C5)
    """

    solver: MonthSolver
    reading: CurveReading
    yields: Array
    unit: int
    month: int

    @property
    def life(self) -> int:
        """Remaining life. [month]"""
        return int(self.solver.bonds.maturity[self.unit]) - self.month

    def discount(self, shift: float) -> Array | None:
        """P(tau) [tau, 1] of the shifted curve, None where it leaves no positive discount."""
        try:
            nodes = log_discount_nodes((self.yields + shift)[None, :, None], self.reading)
        except CurveError:
            return None
        return monthly_discounts(nodes[0], self.life)

    def gap(self, shift: float) -> float:
        """Continuation less bar on the shifted curve, spread and model as they are. [per 100]"""
        discount = self.discount(shift)
        if discount is None:
            return float("nan")
        bonds = self.solver.bonds
        units = np.array([self.unit])
        at = self.solver.groups(self.month, units)[0][0]
        jobs = Jobs(at._replace(offset=at.step), units, np.zeros(1, dtype=np.int64))
        cost = self.solver.solve(jobs, discount, SECOND_GRID, bool(bonds.puttable[self.unit]))[0]
        return float(cost[0] - self.solver.call_bar(at, units, discount)[0, 0])

    def yield_at(self, shift: float) -> float:
        """The issuer's refunding yield on the shifted curve. [1/year]"""
        discount = self.discount(shift)
        assert discount is not None, "asked only where the curve has discounts"
        spread = float(self.solver.spreads.refunding[self.unit, self.month])
        return refunding_yield(discount[:, 0], spread, self.life)

    def critical_shift(self, start: float = 0.0) -> float | None:
        """Parallel shift at which continuation equals the bar, None when no shift does it. [1/year]

        The issuer calls at a curve shifted this far or further down, and goes on above. Solved on the grid of near
        ties, so that the two sides agree with the decision to that grid's accuracy.
        """
        return shift_where_equal(self.gap, start)
