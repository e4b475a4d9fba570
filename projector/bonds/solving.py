"""Solves on the curves of one month: what both the decision pass and the values ask for (C4, C8)."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from projector.arithmetic.elementary import exp_array
from projector.bonds.exercise.path_kernels import Dates, announced_values, run_jobs, straight_values, upper_bounds
from projector.bonds.exercise.pricing import operator_for, operator_tables
from projector.bonds.exercise.settle_kernels import NEVER_PUT
from projector.bonds.exercise.solver_kernels import Rights
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
    """Solves of one month of securities whose decisions fall on the same months, with the same notice."""

    at: Dates
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

    def groups(self, month: int, units: IntArray) -> list[tuple[Dates, IntArray]]:
        """Securities whose decisions fall on the same months, with the same notice: dates and rows of `units`."""
        bonds = self.bonds
        step, call_lag, put_lag = bonds.step[units], bonds.call_lag[units], bonds.put_lag[units]
        offset = (bonds.maturity[units] - call_lag - month - 1) % step + 1
        keys = np.stack([step, offset, call_lag, put_lag])
        return [
            (Dates(month, int(o), int(s), int(c), int(p)), np.flatnonzero((keys == [[s], [o], [c], [p]]).all(axis=0)))
            for s, o, c, p in sorted({tuple(int(x) for x in key) for key in keys.T})
        ]

    def solve(
        self, jobs: Jobs, discount: Array, grid: Grid, both: bool, holder_spread: Array | None = None
    ) -> tuple[Array, Array]:
        """Issuer's cost and holder's value of every job, ex coupon of its month. [per 100], shape (job,)

        discount  P(tau) of that month [tau, path]
        With no volatility the curve is all there is to know and both sides act on it (`deterministic`).
        """
        at = jobs.at
        held = self.spreads.valuation(jobs.units, at.month) if holder_spread is None else holder_spread
        refunding = self.spreads.refunding[jobs.units, at.month]
        if self.model.normal_volatility == 0.0:
            return self.deterministic(jobs, discount, refunding, held)
        longest = int(self.bonds.maturity[jobs.units].max())
        steps = (longest - at.month - at.offset) // at.step + 1
        lag = at.call_lag % at.step
        op = operator_for(self.model.mean_reversion, self.model.normal_volatility, at.step, at.offset, steps, grid, lag)
        puts = bool(self.bonds.puttable[jobs.units].any())
        doubles = bool(self.bonds.may_double[jobs.units].any())
        rights = Rights(at.call_lag // at.step, at.put_lag // at.step, both or puts, at.call_lag > 0, puts, doubles)
        # lanes of one batch work as long as its longest: jobs with like spans of rights go together
        order = np.argsort(self.bonds.rights_left(at.month)[jobs.units], kind="stable")
        units, paths = jobs.units[order], jobs.paths[order]
        issuer, holder = np.empty(units.size), np.empty(units.size)
        run_jobs(
            operator_tables(op), at, units, paths, self.bonds.tables, self.model.cost, refunding[order], held[order],
            discount, rights, issuer, holder,
        )  # fmt: skip
        back = np.empty_like(order)
        back[order] = np.arange(order.size)
        return issuer[back], holder[back]

    def deterministic(self, jobs: Jobs, discount: Array, refunding: Array, held: Array) -> tuple[Array, Array]:
        """The zero-volatility limit: both sides act on the forward curve; the issuer waits where it costs the same."""
        issuer, holder = np.empty(jobs.units.size), np.empty(jobs.units.size)
        for j, (u, p) in enumerate(zip(jobs.units, jobs.paths)):
            tau = np.arange(int(self.bonds.maturity[u]) - jobs.at.month + 1)
            curves = [discount[tau, p] * exp_array(-spread * tau / 12.0) for spread in (refunding[j], held[j])]
            issuer[j], holder[j] = self.certain(int(u), jobs.at, curves)
        return issuer, holder

    def certain(self, unit: int, at: Dates, curves: list[Array]) -> tuple[float, float]:
        """Cost and value of one security when the curve comes true, by backward steps over months. [per 100]

        curves  P(tau) of issuer and holder, tau 0..life
        """
        bonds, cost, life = self.bonds, self.model.cost, int(self.bonds.maturity[unit]) - at.month
        flow = bonds.flow[unit, at.month : at.month + life + 1]
        paid = [np.cumsum(np.where(np.arange(life + 1) > 0, flow, 0.0) * curve) for curve in curves]
        # from each month on, discounted to today, without what is paid up to it
        going = [float(total[-1]) for total in paid]
        for tau in range(life - 1, 0, -1):
            month = at.month + tau
            on = [g - float(total[tau]) for g, total in zip(going, paid)]
            share, effect = bonds.tables.double_share[unit, month], min(tau + at.call_lag, life)
            price = bonds.tables.price[unit, at.month + effect] if effect < life else np.inf
            left = bonds.tables.outstanding[unit, min(at.month + effect, int(bonds.maturity[unit]))]
            due = [float(total[effect] - total[tau]) for total in paid]
            here = bonds.tables.outstanding[unit, month]
            after = on
            if share > 0.0 and on[0] > (100.0 + cost) * here * curves[0][tau]:
                bars = ((100.0 + cost) * here, 100.0 * here)
                after = [share * bar * float(c[tau]) + (1.0 - share) * x for bar, c, x in zip(bars, curves, on)]
            if price < np.inf and after[0] > due[0] + (price + cost * left) * curves[0][effect]:
                bars = (price + cost * left, price)
                after = [d + bar * float(c[effect]) for d, bar, c in zip(due, bars, curves)]
            else:
                effect = min(tau + at.put_lag, life)
                put = bonds.tables.put[unit, at.month + effect] if effect < life else NEVER_PUT
                due = [float(total[effect] - total[tau]) for total in paid]
                if put > NEVER_PUT and after[1] <= due[1] + put * curves[1][effect]:
                    after = [d + put * float(c[effect]) for d, c in zip(due, curves)]
            going = [x + float(total[tau]) for x, total in zip(after, paid)]
        return going[0], going[1]

    def bounds(self, at: Dates, units: IntArray, discount: Array, alive: BoolArray) -> Array:
        """Upper bound of the issuer's continuation on every path, -inf where gone. [per 100], [unit, path]"""
        out = np.empty((units.size, discount.shape[1]))
        spread = self.spreads.refunding[units, at.month]
        upper_bounds(at, units, self.bonds.tables, self.model.cost, spread, discount, alive, out)
        return out

    def settled(
        self, month: int, units: IntArray, paths: IntArray, effect: IntArray, amount: Array, spread: Array,
        discount: Array,
    ) -> Array:  # fmt: skip
        """Value of payments up to month `effect` and an amount on it. [per 100], shape (job,)"""
        out = np.empty(units.size)
        announced_values(month, units, effect, amount, self.bonds.flow, spread, discount, paths, out)
        return out

    def payment_month(self, units: IntArray, decided: int, lag: int) -> IntArray:
        """Month in which a right decided now is paid, 0 where the security ends before. shape (unit,)"""
        return np.where(self.bonds.maturity[units] > decided + lag, decided + lag, 0)

    def call_bar(self, at: Dates, units: IntArray, discount: Array) -> Array:
        """What calling this month costs the issuer, inf where no call is live. [per 100], [unit, path]"""
        paid = self.payment_month(units, at.month, at.call_lag)
        return self.worth_now(at, units, paid, self.bonds.tables.price, True, discount)

    def job_bars(self, at: Dates, units: IntArray, paths: IntArray, discount: Array) -> Array:
        """What calling this month costs the issuer, job by job; a call must be live. [per 100], shape (job,)"""
        paid = self.payment_month(units, at.month, at.call_lag)
        amount = self.bonds.tables.price[units, paid] + self.model.cost * self.bonds.outstanding[units, paid]
        if at.call_lag == 0:
            return amount
        return self.settled(at.month, units, paths, paid, amount, self.spreads.refunding[units, at.month], discount)

    def worth_now(
        self, at: Dates, units: IntArray, paid: IntArray, table: Array, issuer: bool, discount: Array
    ) -> Array:
        """What a right decided this month costs or brings, seen from now, with what is paid until then. [per 100]

        paid    month in which each would be paid, 0: not live; table  dirty prices by month
        issuer  with his cost and at his spread, else at the holder's
        [unit, path]: inf where no call is live, -inf where no put is.
        """
        amount = table[units, paid]
        live = (amount < np.inf) & (amount > NEVER_PUT) & (paid > 0)
        if issuer:
            amount = amount + self.model.cost * self.bonds.outstanding[units, paid]
        out = np.full((units.size, discount.shape[1]), np.inf if table is self.bonds.tables.price else -np.inf)
        at_once = live & (paid == at.month)
        out[at_once] = amount[at_once][:, None]
        later = np.flatnonzero(live & (paid > at.month))
        if later.size:
            n, p = np.repeat(later, discount.shape[1]), np.tile(np.arange(discount.shape[1]), later.size)
            spreads = self.spreads.refunding[units, at.month] if issuer else self.spreads.valuation(units, at.month)
            out[n, p] = self.settled(at.month, units[n], p, paid[n], amount[n], spreads[n], discount)
        return out

    def values(self, month: int, units: IntArray, discount: Array, wanted: BoolArray) -> Array:
        """Holder's value, ex coupon, of securities not yet matured. [per 100 dirty], [unit, path], 0 where not wanted.

        Securities with a right left to be decided are solved on their own dates, the rest discounted.
        """
        out = np.zeros((units.size, discount.shape[1]))
        later = self.bonds.last_decision[units] > month
        self.add_straight(month, units, np.flatnonzero(~later), discount, wanted, out)
        with_rights = np.flatnonzero(later)
        for at, part in self.groups(month, units[with_rights]):
            rows = with_rights[part]
            n, p = np.nonzero(wanted[rows])
            if n.size:
                jobs = Jobs(at, units[rows[n]], p.astype(np.int64))
                both = self.needs_holder(month, units[rows])
                out[rows[n], p] = self.solve(jobs, discount, production_grid(at.step), both)[1]
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
