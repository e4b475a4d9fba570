"""Streams supplied from elsewhere, bound to the rate paths they were made on (C10)."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
import pandas as pd

from projector.liabilities.blocks import ITEM_NAMES, Market, MonthOutcome
from projector.study.errors import LocatedError

Array = npt.NDArray[np.float64]

EVERY_PATH = "all"


@dataclass(frozen=True)
class StreamState:
    """Which paths the block was opened for; a stream remembers nothing else."""

    path_lo: int
    path_hi: int


@dataclass(frozen=True)
class SuppliedStream:
    """One block as supplied: flows [item, month, path] and balances [month, path]; one path when insensitive."""

    name: str
    segment: str
    flows: Array
    reserve: Array
    surrender: Array | None
    insensitive: bool

    def part(self, values: Array, state: StreamState) -> Array:
        """The last axis cut to the paths opened, or repeated when one stream serves them all."""
        if self.insensitive:
            return np.repeat(values, state.path_hi - state.path_lo, axis=-1)
        return values[..., state.path_lo : state.path_hi]

    def outcome(self, state: StreamState, m: int) -> MonthOutcome:
        surrender = None if self.surrender is None else self.part(self.surrender[m], state)
        return MonthOutcome(self.part(self.flows[:, m], state), self.part(self.reserve[m], state), surrender)

    def open(self, path_lo: int, path_hi: int) -> tuple[StreamState, MonthOutcome]:
        state = StreamState(path_lo, path_hi)
        return state, self.outcome(state, 0)

    def month(
        self, state: StreamState, m: int, market: Market, earned_rate_lagged: Array
    ) -> tuple[StreamState, MonthOutcome]:
        return state, self.outcome(state, m)


@dataclass(frozen=True)
class StreamRows:
    """Rows of one block as arrays, and the room they fill: months 0..months and so many paths."""

    item: npt.NDArray[np.object_]
    month: npt.NDArray[np.int64]
    path: npt.NDArray[np.int64]
    amount: Array
    months: int
    paths: int

    def table(self, name: str) -> Array:
        """Amounts of one item. [currency], shape (month, path), zero where the block has no row"""
        out = np.zeros((self.months + 1, self.paths))
        mine = (self.item == name) & (self.month <= self.months)
        out[self.month[mine], self.path[mine]] = self.amount[mine]
        return out


def build_streams(table: pd.DataFrame, scenario_ids: tuple[str, ...], months: int) -> tuple[SuppliedStream, ...]:
    """Every block of the table, in the order (segment, block). The door has checked that each is there once."""
    blocks = []
    for (segment, block), part in table.groupby(["segment", "block"], sort=True):
        insensitive = bool((part["scenario"] == EVERY_PATH).all())
        order = {EVERY_PATH: 0} if insensitive else {s: p for p, s in enumerate(scenario_ids)}
        rows = StreamRows(
            part["item"].astype(str).to_numpy(),
            part["month"].to_numpy(dtype=np.int64),
            part["scenario"].map(order).to_numpy(dtype=np.int64),
            part["amount"].to_numpy(dtype=np.float64),
            months,
            len(order),
        )
        flows = np.stack([rows.table(name) for name in ITEM_NAMES])
        surrender = rows.table("surrender_value") if (rows.item == "surrender_value").any() else None
        reserve = rows.table("reserve_statutory")
        blocks.append(SuppliedStream(str(block), str(segment), flows, reserve, surrender, insensitive))
    return tuple(blocks)


def digest_errors(stated: str | None, actual: str, sensitive_blocks: tuple[str, ...], file: str) -> list[LocatedError]:
    """The streams must have been made on the very paths of this run."""
    if stated == actual or (stated is None and not sensitive_blocks):
        return []
    return [
        LocatedError(
            code="E451",
            file=file,
            column="liabilities.scenario_set_digest",
            value=stated or "",
            problem="the liability streams are bound to another set of rate paths than this study's",
            remedy=(
                f"this study's set has digest {actual}; feed streams made on these paths in this order and state that"
                " digest, or name the blocks in liabilities.rate_insensitive_blocks if one stream serves every path"
            ),
        )
    ]
