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


@dataclass(frozen=True)
class CallEvents:
    """Calls in the order (security, path, month): month of payment and share of the par then outstanding (C7).

    start  [security, path + 1] index of each security's and path's first event
    """

    month: IntArray
    share: Array
    start: IntArray

    def months(self) -> npt.NDArray[np.int16]:
        """Month of each security's first call on each path, -1 never. shape (security, path)"""
        out = np.full((self.start.shape[0], self.start.shape[1] - 1), NEVER, dtype=np.int16)
        has = self.start[:, 1:] > self.start[:, :-1]
        out[has] = self.month[self.start[:, :-1][has]]
        return out


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
        self.parts.append((units[n], p, np.full(n.size, month), bound[n, p], cost[n, p], bar[n], by[n, p], share[n, p]))

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
        events: list[tuple[IntArray, IntArray, IntArray, Array]] = []
        live = np.isfinite(bonds.clean_price)
        for month in range(1, min(self.last_month, bonds.last_month) + 1):
            units = np.flatnonzero(live[:, month] & (bonds.maturity > month))
            units = units[(left[units] > 0.0).any(axis=1)]
            if units.size == 0:
                continue
            discount = discounts(month)
            for step in sorted(set(bonds.step[units].tolist())):
                part = units[bonds.step[units] == step]
                share = self.month_shares(month, int(step), part, discount, left[part] > 0.0, rows)
                n, p = np.nonzero(share > 0.0)
                events.append((part[n], p, np.full(n.size, month, dtype=np.int64), share[n, p]))
                left[part] = left[part] * (1.0 - share)
        return ordered_events(events, left.shape)

    def month_shares(
        self, month: int, step: int, units: IntArray, discount: Array, alive: BoolArray, rows: DecisionRows | None
    ) -> Array:
        """Share called by every security with a right live this month. [-], [unit, path]"""
        bonds, cost = self.solver.bonds, self.solver.model.cost
        bar = bonds.dirty_price[units, month] + cost
        bound = self.solver.bounds(month, step, units, discount, alive)
        continuation = np.full(bound.shape, np.nan)
        by: npt.NDArray[np.int8] = np.zeros(bound.shape, dtype=np.int8)
        n, p = np.nonzero(bound >= bar[:, None])
        if n.size:
            continuation[n, p], by[n, p] = self.continuations(month, step, units[n], p, bar[n], discount)
        # where the bound lies under the bar the cost of going on does too: the rule may be told the bound instead
        told = np.where(np.isnan(continuation), bound, continuation)
        opportunity = Opportunity(month, told, np.broadcast_to(bar[:, None], told.shape))
        share = np.where(alive, self.rule.share_called(opportunity), 0.0)
        if rows is not None:
            rows.add(month, units, alive, bound, continuation, bar, by, share)
        return share

    def continuations(
        self, month: int, step: int, units: IntArray, paths: IntArray, bar: Array, discount: Array
    ) -> tuple[Array, npt.NDArray[np.int8]]:
        """Issuer's cost of going on, and which grid settled it. shape (job,)"""
        value = self.solver.solve(
            Jobs(month, step, step, units, paths.astype(np.int64)), discount, production_grid(step), False
        )[0]
        by = np.ones(value.size, dtype=np.int8)
        for grid, band, code in (
            (SECOND_GRID, SECOND_BAND.get(step, SECOND_BAND_OTHER), 2),
            (THIRD_GRID, THIRD_BAND, 3),
        ):
            near = np.flatnonzero((np.abs(value - bar) < band) & (by == code - 1))
            if near.size:
                jobs = Jobs(month, step, step, units[near], paths[near].astype(np.int64))
                value[near] = self.solver.solve(jobs, discount, grid, False)[0]
                by[near] = code
        return value, by


def ordered_events(events: list[tuple[IntArray, IntArray, IntArray, Array]], shape: tuple[int, int]) -> CallEvents:
    """Events in the order (security, path, month), with where each security and path begins."""
    units, paths, months, shares = (
        (np.concatenate([e[i] for e in events]) if events else np.empty(0, dtype=np.int64)) for i in range(4)
    )
    order = np.lexsort((months, paths, units))
    cell = units[order] * shape[1] + paths[order]
    edges = np.searchsorted(cell, np.arange(shape[0] * shape[1] + 1))
    start = np.empty((shape[0], shape[1] + 1), dtype=np.int64)
    start[:, :-1] = edges[:-1].reshape(shape)
    start[:, -1] = edges[1:].reshape(shape)[:, -1]
    return CallEvents(months[order].astype(np.int64), shares[order].astype(np.float64), start)


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
    for array in (bonds.flow[unit], bonds.dirty_price[unit], valuation, solver.spreads.refunding[unit], months):
        digest.update(np.ascontiguousarray(array, dtype="<f8").tobytes())
    digest.update(np.array([bonds.maturity[unit], bonds.step[unit]], dtype="<i8").tobytes())
    return digest.hexdigest()
