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


def build_streams(table: pd.DataFrame, scenario_ids: tuple[str, ...], months: int) -> tuple[SuppliedStream, ...]:
    """Every block of the table, in the order (segment, block). The door has checked that each is there once."""
    blocks = []
    for (segment, block), part in table.groupby(["segment", "block"], sort=True):
        insensitive = bool((part["scenario"] == EVERY_PATH).all())
        order = {EVERY_PATH: 0} if insensitive else {s: p for p, s in enumerate(scenario_ids)}
        path = part["scenario"].map(order).to_numpy(dtype=np.int64)
        month = part["month"].to_numpy(dtype=np.int64)
        item = part["item"].astype(str).to_numpy()
        amount = part["amount"].to_numpy(dtype=np.float64)

        def table_of(name: str, item=item, month=month, path=path, amount=amount, order=order) -> Array:  # type: ignore[no-untyped-def]
            out = np.zeros((months + 1, len(order)))
            mine = (item == name) & (month <= months)
            out[month[mine], path[mine]] = amount[mine]
            return out

        flows = np.stack([table_of(name) for name in ITEM_NAMES])
        surrender = table_of("surrender_value") if (item == "surrender_value").any() else None
        blocks.append(
            SuppliedStream(str(block), str(segment), flows, table_of("reserve_statutory"), surrender, insensitive)
        )
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
