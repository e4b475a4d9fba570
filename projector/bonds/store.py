"""Decisions and values kept apart from the roll-forward, by the key of a security and the range of paths (C8, C9).

A second run with other liabilities, strategies, par or book values asks for the same solves and finds them here; a run
with another price, spread, rule, model or path set has other keys and finds nothing.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np
import numpy.typing as npt
import pandas as pd

Array = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]
BoolArray = npt.NDArray[np.bool_]

Place = tuple[str, int, int]  # key, first path, stop path


@dataclass(frozen=True)
class UnitDecisions:
    """One security's events on a range of paths: path, and columns of `CallEvents` in order; and rows, if kept."""

    path: IntArray
    columns: tuple[npt.NDArray[Any], ...]  # month, decided, share, kind, price
    rows: pd.DataFrame | None


@dataclass
class SolveStore:
    """What has been solved, in memory. `solved` and `found` count securities asked for, for tests and progress."""

    decisions: dict[Place, UnitDecisions] = field(default_factory=dict)
    values: dict[tuple[Place, int], tuple[Array, BoolArray]] = field(default_factory=dict)
    solved: int = 0
    found: int = 0

    def value(self, place: Place, month: int, wanted: BoolArray) -> Array | None:
        """Values at a month if every wanted path is known. [per 100], shape (path,)"""
        known = self.values.get((place, month))
        if known is None or (wanted & ~known[1]).any():
            return None
        return np.where(wanted, known[0], 0.0)

    def keep_value(self, place: Place, month: int, value: Array, wanted: BoolArray) -> None:
        """Adds values of the wanted paths to those known."""
        old, have = self.values.get((place, month), (np.zeros(value.size), np.zeros(value.size, dtype=np.bool_)))
        self.values[(place, month)] = (np.where(wanted, value, old), have | wanted)
