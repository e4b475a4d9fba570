"""Solves on the curves of one month: what both the decision pass and the values ask for (C4, C8)."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from projector.arithmetic.elementary import exp_array
from projector.bonds.exercise.path_kernels import run_jobs, straight_values, upper_bounds
from projector.bonds.exercise.pricing import operator_arguments, operator_for
from projector.bonds.exercise.step_operator import GRID_FINE, GRID_FINER, GRID_HALF_YEAR, GRID_MONTHLY, Grid
from projector.bonds.mapped import MappedBonds
from projector.bonds.spreads import SpreadPath

Array = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]
BoolArray = npt.NDArray[np.bool_]


@dataclass(frozen=True)
class ExerciseModel:
    """The issuer's world: mean reversion, normal volatility [1/year] and cost per 100 of par."""

    mean_reversion: float
    normal_volatility: float
    cost: float


def production_grid(step: int) -> Grid:
    """The grid of path decisions and values for a grid step [month]."""
    return GRID_MONTHLY if step == 1 else GRID_HALF_YEAR


@dataclass(frozen=True)
class Jobs:
    """Solves of one month that share a grid step and the months to its next date."""

    month: int
    step: int
    offset: int
    units: IntArray
    paths: IntArray


@dataclass(frozen=True)
class MonthSolver:
    """Bonds, spreads and model bound together; every method is a pure function of a month's discounts."""

    bonds: MappedBonds
    spreads: SpreadPath
    model: ExerciseModel

    def needs_holder(self, month: int, units: IntArray) -> bool:
        """Whether the holder's value differs from the issuer's cost for any of these securities."""
        valuation = self.spreads.valuation(units, month)
        return self.model.cost != 0.0 or bool((valuation != self.spreads.refunding[units, month]).any())

    def solve(
        self, jobs: Jobs, discount: Array, grid: Grid, both: bool, holder_spread: Array | None = None
    ) -> tuple[Array, Array]:
        """Issuer's cost and holder's value of every job, ex coupon of `jobs.month`. [per 100], shape (job,)

        discount  P(tau) of that month [tau, path]
        With no volatility the issuer's cost is the least over policies fixed in advance, and the holder has what
        that policy pays (`deterministic`).
        """
        month = jobs.month
        held = self.spreads.valuation(jobs.units, month) if holder_spread is None else holder_spread
        refunding = self.spreads.refunding[jobs.units, month]
        if self.model.normal_volatility == 0.0:
            return self.deterministic(jobs, discount, refunding, held)
        steps = int((self.bonds.maturity[jobs.units].max() - month - jobs.offset) // jobs.step + 1)
        op = operator_for(self.model.mean_reversion, self.model.normal_volatility, jobs.step, jobs.offset, steps, grid)
        # lanes of one batch work as long as its longest: jobs with like spans of rights go together
        order = np.argsort(self.bonds.rights_left(month)[jobs.units], kind="stable")
        units, paths = jobs.units[order], jobs.paths[order]
        issuer, holder = np.empty(units.size), np.empty(units.size)
        run_jobs(
            *operator_arguments(op), month, jobs.offset, jobs.step, units, paths, self.bonds.maturity, self.bonds.flow,
            self.bonds.dirty_price, self.model.cost, refunding[order], held[order], discount, both, issuer, holder,
        )  # fmt: skip
        back = np.empty_like(order)
        back[order] = np.arange(order.size)
        return issuer[back], holder[back]

    def deterministic(self, jobs: Jobs, discount: Array, refunding: Array, held: Array) -> tuple[Array, Array]:
        """The zero-volatility limit: the issuer takes the cheapest date on the forward curve, the later of equals."""
        issuer, holder = np.empty(jobs.units.size), np.empty(jobs.units.size)
        for j, (u, p) in enumerate(zip(jobs.units, jobs.paths)):
            tau = np.arange(1, int(self.bonds.maturity[u]) - jobs.month + 1)
            months = jobs.month + tau
            flow, price = self.bonds.flow[u, months], self.bonds.dirty_price[u, months]
            stops: list[Array] = []
            for spread, bar in ((refunding[j], price + self.model.cost), (held[j], price)):
                d = discount[tau, p] * exp_array(-spread * tau / 12.0)
                paid = np.cumsum(flow * d)
                stop = paid + bar * d
                stop[-1] = paid[-1]
                stops.append(stop)
            k = stops[0].size - 1 - int(np.argmin(stops[0][::-1]))
            issuer[j], holder[j] = stops[0][k], stops[1][k]
        return issuer, holder

    def bounds(self, month: int, step: int, units: IntArray, discount: Array, alive: BoolArray) -> Array:
        """Upper bound of the issuer's continuation on every path, -inf where gone. [per 100], [unit, path]"""
        out = np.empty((units.size, discount.shape[1]))
        spread = self.spreads.refunding[units, month]
        upper_bounds(
            month, step, units, self.bonds.maturity, self.bonds.flow, self.bonds.dirty_price, self.model.cost, spread,
            discount, alive, out,
        )  # fmt: skip
        return out

    def values(self, month: int, units: IntArray, discount: Array, wanted: BoolArray) -> Array:
        """Holder's value, ex coupon, of securities not yet matured. [per 100 dirty], [unit, path], 0 where not wanted.

        Securities with a right left are solved on their own dates, the rest discounted.
        """
        out = np.zeros((units.size, discount.shape[1]))
        later = np.asarray(np.isfinite(self.bonds.clean_price[units, month + 1 :]).any(axis=1))
        self.add_straight(month, units, np.flatnonzero(~later), discount, wanted, out)
        step = self.bonds.step[units]
        offset = (self.bonds.maturity[units] - month - 1) % step + 1
        for s, o in sorted({(int(a), int(b)) for a, b in zip(step[later], offset[later])}):
            rows = np.flatnonzero(later & (step == s) & (offset == o))
            n, p = np.nonzero(wanted[rows])
            if n.size:
                jobs = Jobs(month, s, o, units[rows[n]], p.astype(np.int64))
                both = self.needs_holder(month, units[rows])
                out[rows[n], p] = self.solve(jobs, discount, production_grid(s), both)[1]
        return out

    def add_straight(
        self, month: int, units: IntArray, rows: IntArray, discount: Array, wanted: BoolArray, out: Array
    ) -> None:
        """Fills the rows of securities without a right left."""
        for s in sorted(set(self.bonds.coupon_step[units[rows]].tolist())):
            part = rows[self.bonds.coupon_step[units[rows]] == s]
            values = np.zeros((part.size, discount.shape[1]))
            spread = self.spreads.valuation(units[part], month)
            straight_values(
                month, int(s), units[part], self.bonds.maturity, self.bonds.flow, spread, discount, wanted[part], values
            )  # fmt: skip
            out[part] = values


SECOND_GRID, THIRD_GRID = GRID_FINE, GRID_FINER
