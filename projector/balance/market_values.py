"""Exact market values of sale groups, solved where and when asked for, kept for whoever asks again (C9)."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt

from projector.balance.holdings import Holdings
from projector.balance.holdings_kernels import group_values
from projector.bonds.decisions import CallEvents
from projector.bonds.solving import MonthSolver
from projector.bonds.store import Place, SolveStore

Array = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]
BoolArray = npt.NDArray[np.bool_]


def outstanding(events: CallEvents, month: int) -> Array:
    """Share of each security on which nothing was decided up to and including a month. [-], shape (security, path)"""
    shape = (events.start.shape[0], events.start.shape[1] - 1)
    left = np.ones(shape)
    past = events.decided <= month
    np.subtract.at(left.reshape(-1), event_cells(events)[past], events.part[past])
    return left


def event_cells(events: CallEvents) -> IntArray:
    """Security x paths + path of every event. shape (event,)"""
    count = (events.start[:, 1:] - events.start[:, :-1]).ravel()
    return np.repeat(np.arange(count.size), count)


@dataclass
class GroupValues:
    """Value incl. accrued of each group at a held share of one, by month and path; never interpolated."""

    holdings: Holdings
    solver: MonthSolver
    survival: Array  # [security, month]
    events: CallEvents
    store: SolveStore | None = None
    places: dict[int, Place] = field(default_factory=dict)  # by security, when a store is given
    known: dict[int, tuple[Array, BoolArray]] = field(default_factory=dict)

    def at(self, month: int, discount: Array, wanted: BoolArray) -> Array:
        """Values of the groups of each segment on the paths wanted. [currency], shape (group, path)

        discount  P(tau) of that month; wanted [segment, path]; other cells hold what was known before, or 0
        """
        shape = (self.holdings.groups.count, discount.shape[1])
        value, have = self.known.get(month, (np.zeros(shape), np.zeros(wanted.shape, dtype=np.bool_)))
        missing = wanted & ~have
        if missing.any():
            fresh = self.solve(month, discount, missing)
            rows = missing[self.holdings.groups.segment]
            value = np.where(rows, fresh, value)
            self.known[month] = (value, have | missing)
        return value

    def solve(self, month: int, discount: Array, wanted: BoolArray) -> Array:
        """Solves every security of the segments wanted on those paths and adds its holdings up to groups."""
        bonds = self.solver.bonds
        out = np.zeros((self.holdings.groups.count, discount.shape[1]))
        alive = bonds.maturity[self.holdings.security] > month
        rows = np.flatnonzero(alive & np.asarray(wanted.any(axis=1))[self.holdings.segment])
        if rows.size == 0:
            return out
        units, at = np.unique(self.holdings.security[rows], return_inverse=True)
        left = outstanding(self.events, month)[units]
        asked = np.zeros((units.size, discount.shape[1]), dtype=np.bool_)
        np.logical_or.at(asked, at, wanted[self.holdings.segment[rows]])
        unit_value = self.unit_values(month, units, discount, asked & (left > 0.0)) * left
        unit_value += self.announced(month, units, discount, asked)
        scale = self.holdings.par[rows] / 100.0 * self.survival[self.holdings.security[rows], month]
        group_values(at, self.holdings.group[rows], scale, unit_value, out)
        return out

    def announced(self, month: int, units: IntArray, discount: Array, wanted: BoolArray) -> Array:
        """Value of what has been called or put and is not yet paid. [per 100], [unit, path]"""
        out, events, paths = np.zeros(wanted.shape), self.events, wanted.shape[1]
        cell = event_cells(events)
        due = np.flatnonzero((events.decided <= month) & (events.month > month))
        if due.size == 0:
            return out
        unit, path = cell[due] // paths, cell[due] % paths
        row = np.searchsorted(units, unit)
        mine = (row < units.size) & (units[np.minimum(row, units.size - 1)] == unit)
        due, unit, path, row = due[mine], unit[mine], path[mine], row[mine]
        bonds, effect = self.solver.bonds, events.month[due]
        amount = events.price[due] * bonds.outstanding[unit, effect] + bonds.accrued[unit, effect]
        spread = self.solver.spreads.valuation(unit, month)
        value = self.solver.settled(month, unit, path, effect, amount, spread, discount)
        np.add.at(out, (row, path), value * events.part[due])
        return np.where(wanted, out, 0.0)

    def unit_values(self, month: int, units: IntArray, discount: Array, wanted: BoolArray) -> Array:
        """Values of securities, from the store where it holds them. [per 100 dirty], [unit, path]"""
        if self.store is None:
            return self.solver.values(month, units, discount, wanted)
        out = np.zeros(wanted.shape)
        missing = []
        for n, u in enumerate(units):
            known = self.store.value(self.places[int(u)], month, wanted[n])
            if known is None:
                missing.append(n)
            else:
                out[n] = known
        self.store.found += units.size - len(missing)
        self.store.solved += len(missing)
        if missing:
            out[missing] = self.solver.values(month, units[missing], discount, wanted[missing])
            for n in missing:
                self.store.keep_value(self.places[int(units[n])], month, out[n], wanted[n])
        return out
