"""Every issuer's decision on every path: one pass over the months, securities inside, paths innermost (C3, C4, C8).

For each security, path and month with a live right the deterministic bound comes first; what it does not settle is
solved on that month's own curve with the issuer's spread. A decision within a tie band of the bar is solved again on a
finer grid, and once more on a still finer one. The issuer sees the curve of the month and the model, never the path's
future.
"""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import numpy.typing as npt
import pandas as pd

from projector.arithmetic import KERNELS_DIGEST
from projector.bonds.call_rules import CallRule, Opportunity
from projector.bonds.exercise.path_kernels import Dates
from projector.bonds.solving import SECOND_GRID, THIRD_GRID, Jobs, MonthSolver, production_grid

Array = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]
BoolArray = npt.NDArray[np.bool_]

NEVER = -1
SECOND_BAND = {1: 0.002}  # per 100, by grid step; other steps:
SECOND_BAND_OTHER = 0.005
THIRD_BAND = 0.0001
SETTLED_BY = ("bound", "solve", "second grid", "third grid")

Discounts = Callable[[int], Array]  # month -> P(tau) [tau, path]


CALL, PUT, DOUBLE = 0, 1, 2
KINDS = ("call", "put", "sinking payment doubled")


@dataclass(frozen=True)
class CallEvents:
    """Par that leaves by a decision, in the order (security, path, month of payment) (C7).

    month    of payment
    decided  month of the decision: earlier where notice is due
    share    of the par outstanding when it is decided
    part     the same of the par of month 0, defaults aside
    kind     CALL, PUT or DOUBLE
    price    clean, per 100 of the par that leaves
    start    [security, path + 1] index of each security's and path's first event
    """

    month: IntArray
    decided: IntArray
    share: Array
    kind: IntArray
    price: Array
    part: Array
    start: IntArray

    def months(self) -> npt.NDArray[np.int16]:
        """Month of payment of each security's first call on each path, -1 never. shape (security, path)"""
        out = np.full((self.start.shape[0], self.start.shape[1] - 1), NEVER, dtype=np.int16)
        count = np.diff(self.start, axis=1).ravel()
        cell = np.repeat(np.arange(count.size), count)
        calls = np.flatnonzero(self.kind == CALL)[::-1]  # backward: the first one is written last
        out.reshape(-1)[cell[calls]] = self.month[calls]
        return out


@dataclass
class EventList:
    """Events as they are found, month by month."""

    parts: list[tuple[npt.NDArray[Any], ...]] = field(default_factory=list)

    def add(self, units: IntArray, share: Array, month: IntArray, decided: int, kind: int, price: Array) -> None:
        """Events where the share is above 0; share [unit, path], month and price [unit]."""
        n, p = np.nonzero(share > 0.0)
        self.parts.append(
            (units[n], p, month[n], np.full(n.size, decided), share[n, p], np.full(n.size, kind), price[n])
        )


@dataclass
class DecisionRows:
    """Rows of decisions of deterministic paths, gathered month by month; null continuation where a bound settled it."""

    parts: list[tuple[npt.NDArray[Any], ...]] = field(default_factory=list)

    def add(
        self,
        month: int,
        units: IntArray,
        looked: BoolArray,
        bound: Array,
        cost: Array,
        bar: Array,
        by: npt.NDArray[np.int8],
        share: Array,
    ) -> None:
        n, p = np.nonzero(looked)
        self.parts.append(
            (units[n], p, np.full(n.size, month), bound[n, p], cost[n, p], bar[n, p], by[n, p], share[n, p])
        )

    def frame(self) -> pd.DataFrame:
        """security index, path index, month, upper_bound, continuation, bar, decided_by, share"""
        names = ("unit", "path", "month", "upper_bound", "continuation", "bar", "by", "share")
        columns = zip(*self.parts) if self.parts else [[np.empty(0)]] * len(names)
        return pd.DataFrame({name: np.concatenate(list(parts)) for name, parts in zip(names, columns)})


@dataclass(frozen=True)
class DecisionPass:
    """One pass over the months for a block of paths."""

    solver: MonthSolver
    rule: CallRule
    last_month: int

    def run(
        self, discounts: Discounts, paths: int, rows: DecisionRows | None = None, asked: IntArray | None = None
    ) -> CallEvents:
        """Decides every right of months 1..last_month; a security with nothing left outstanding is asked no more.

        asked  securities to decide for, all when not given
        """
        bonds = self.solver.bonds
        left = np.ones((len(bonds.ids), paths))
        if asked is not None:
            left[:] = 0.0
            left[asked] = 1.0
        events = EventList()
        for month in range(1, min(self.last_month, bonds.last_month) + 1):
            units = np.flatnonzero(bonds.decisions[:, month])
            units = units[(left[units] > 0.0).any(axis=1)]
            if units.size == 0:
                continue
            discount = discounts(month)
            for at, rows_of in self.solver.groups(month, units):
                part = units[rows_of]
                month_left = self.decide(at, part, discount, left[part] > 0.0, rows, events)
                left[part] = left[part] * month_left
        return ordered_events(events.parts, left.shape)

    def decide(
        self, at: Dates, units: IntArray, discount: Array, alive: BoolArray, rows: DecisionRows | None,
        events: EventList,
    ) -> Array:  # fmt: skip
        """Decides every right that is live this month; what is left of each security. [-], [unit, path]

        The issuer first, then the holder of what has not been called (C4).
        """
        bonds, tables, month = self.solver.bonds, self.solver.bonds.tables, at.month
        called, put_on = (self.solver.payment_month(units, month, lag) for lag in (at.call_lag, at.put_lag))
        price, bar = bonds.clean_price[units, called], self.solver.call_bar(at, units, discount)
        double = tables.double_share[units, month]
        double_bar = np.where(double > 0.0, (100.0 + self.solver.model.cost) * bonds.outstanding[units, month], np.inf)
        put_now = self.solver.worth_now(at, units, put_on, tables.put, False, discount)
        bound = self.solver.bounds(at, units, discount, alive)
        cost, value, by = self.continuations(at, units, bound, np.minimum(bar, double_bar[:, None]), put_now, discount)
        # where the bound lies under the bar the cost of going on does too: the rule may be told the bound instead
        told = np.where(np.isnan(cost), bound, cost)
        # a doubling comes first: what a call of all is weighed against has it inside
        shut = np.isinf(double_bar)[:, None]
        doubled = alive & ~shut & (told >= double_bar[:, None])
        weighed = np.where(doubled, double[:, None] * np.where(shut, 0.0, double_bar[:, None]), 0.0)
        weighed = weighed + np.where(doubled, 1.0 - double[:, None], 1.0) * told
        share = np.where(alive, self.rule.share_called(Opportunity(month, weighed, bar)), 0.0)
        share = np.where(np.isfinite(bar), share, 0.0)
        twice = np.where(doubled & (share == 0.0), double[:, None], 0.0)
        puts = np.where(alive & (share == 0.0) & (value <= put_now), 1.0, 0.0)
        safe = np.where(called > 0, called, month)
        events.add(units, share, safe, month, CALL, price)
        events.add(units, twice, np.full(units.size, month), month, DOUBLE, np.full(units.size, 100.0))
        events.add(units, puts, np.where(put_on > 0, put_on, month), month, PUT, bonds.put_price[units, put_on])
        if rows is not None:
            rows.add(month, units, alive & np.isfinite(bar), bound, cost, bar, by, share)
        return (1.0 - share) * (1.0 - twice) * (1.0 - puts)

    def continuations(
        self, at: Dates, units: IntArray, bound: Array, bar: Array, put_now: Array, discount: Array
    ) -> tuple[Array, Array, npt.NDArray[np.int8]]:
        """Issuer's cost and holder's value of going on where a bound does not settle it, nan elsewhere; which grid did.

        bar, put_now  least bar of the issuer's rights, and what a put is worth now [unit, path]
        """
        cost, value = np.full(bound.shape, np.nan), np.full(bound.shape, np.nan)
        by: npt.NDArray[np.int8] = np.zeros(bound.shape, dtype=np.int8)
        n, p = np.nonzero((bound >= bar) | ((put_now > -np.inf) & (bound > -np.inf)))
        bands = (SECOND_BAND.get(at.step, SECOND_BAND_OTHER), THIRD_BAND)
        for code, grid in enumerate((production_grid(at.step), SECOND_GRID, THIRD_GRID), start=1):
            if n.size == 0:
                break
            jobs = Jobs(at._replace(offset=at.step), units[n], p.astype(np.int64))
            found = self.solver.solve(jobs, discount, grid, bool(self.solver.bonds.puttable[units[n]].any()))
            cost[n, p], value[n, p] = found
            by[n, p] = code
            if code <= len(bands):
                distance = np.minimum(
                    np.abs(found[0] - bar[n, p]),
                    np.where(put_now[n, p] > -np.inf, np.abs(found[1] - put_now[n, p]), np.inf),
                )
                near = distance < bands[code - 1]
                n, p = n[near], p[near]
        return cost, value, by


def ordered_events(parts: list[tuple[npt.NDArray[Any], ...]], shape: tuple[int, int]) -> CallEvents:
    """Events in the order (security, path, month of payment), with where each security and path begins.

    parts  columns unit, path, month, decided, share, kind, price
    """
    columns = [np.concatenate([part[i] for part in parts]) if parts else np.empty(0) for i in range(7)]
    whole = [c.astype(np.int64) for c in columns]
    shares, prices = columns[4].astype(np.float64), columns[6].astype(np.float64)
    cell = whole[0] * shape[1] + whole[1]
    part = np.empty(cell.size)
    by_decision = np.lexsort((whole[5], whole[3], cell))
    left, before = 1.0, -1
    for e in by_decision.tolist():
        left = left if cell[e] == before else 1.0
        before = int(cell[e])
        part[e] = left * shares[e]
        left = left * (1.0 - shares[e])
    order = np.lexsort((whole[5], whole[3], whole[2], cell))
    edges = np.searchsorted(cell[order], np.arange(shape[0] * shape[1] + 1))
    start = np.empty((shape[0], shape[1] + 1), dtype=np.int64)
    start[:, :-1] = edges[:-1].reshape(shape)
    start[:, -1] = edges[1:].reshape(shape)[:, -1]
    return CallEvents(
        whole[2][order], whole[3][order], shares[order], whole[5][order], prices[order], part[order], start
    )


def unit_key(solver: MonthSolver, rule: CallRule, unit: int, set_digest: str, last_month: int) -> str:
    """The name under which a security's decisions and values are kept (C8).

    SHA-256 of kernel sources, rule, model, exercise terms per 100, spread path, path set, tie bands and grids. Par,
    book value, segment, liabilities and strategy are not in it.
    """
    bonds, model = solver.bonds, solver.model
    digest = hashlib.sha256()
    for text in (KERNELS_DIGEST, rule.name, repr(rule), repr(model), set_digest, str(last_month), repr(SECOND_BAND),
                 repr((SECOND_BAND_OTHER, THIRD_BAND)), repr(production_grid(int(bonds.step[unit]))),
                 repr((SECOND_GRID, THIRD_GRID))):  # fmt: skip
        digest.update(text.encode() + b"\0")
    months = np.arange(bonds.last_month + 1)
    valuation = solver.spreads.class_spread[unit] + solver.spreads.residual[unit] * solver.spreads.fade
    for array in (bonds.flow[unit], bonds.dirty_price[unit], bonds.dirty_put[unit], bonds.outstanding[unit],
                  bonds.double_share[unit], valuation, solver.spreads.refunding[unit], months):  # fmt: skip
        digest.update(np.ascontiguousarray(array, dtype="<f8").tobytes())
    digest.update(
        np.array([x[unit] for x in (bonds.maturity, bonds.step, bonds.call_lag, bonds.put_lag)], dtype="<i8").tobytes()
    )
    return digest.hexdigest()
