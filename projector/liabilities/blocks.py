"""The door every liability comes through: month by month, seeing curves up to that month and last month's earned rate.

No function takes a finished liability array (C10): a block that credits from earned rates and a supplied stream answer
the same two calls.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np
import numpy.typing as npt

from projector.study.columns import FLOW_ITEMS as SUPPLIED_ITEMS

Array = npt.NDArray[np.float64]

# item -> sign into the company; order is the order of the flow arrays
FLOW_ITEMS: dict[str, int] = {name: 1 if name == "premium" else -1 for name in SUPPLIED_ITEMS}
ITEM_NAMES = tuple(FLOW_ITEMS)
SIGNS = np.array([float(sign) for sign in FLOW_ITEMS.values()])


@dataclass(frozen=True)
class Market:
    """What the world shows at a month end: curves up to that month only."""

    month: int
    discount: Array  # P(tau) of this month [tau, path]
    short_rate: Array  # one-month rate in force over this month, set at m - 1 [1/month], shape (path,)


@dataclass(frozen=True)
class MonthOutcome:
    """One block's month: flows not signed [item, path], and its balances at the month end [path]."""

    flows: Array
    reserve_statutory: Array
    surrender_value: Array | None


class LiabilityBlock(Protocol):
    """One block of business in one segment."""

    @property
    def name(self) -> str: ...

    @property
    def segment(self) -> str: ...

    def open(self, path_lo: int, path_hi: int) -> tuple[Any, MonthOutcome]:
        """State and balances at the valuation date, for some paths."""

    def month(self, state: Any, m: int, market: Market, earned_rate_lagged: Array) -> tuple[Any, MonthOutcome]:
        """State, flows and balances of month m. earned_rate_lagged: the segment's at m - 1 [1/year], shape (path,)"""


def signed(flows: Array) -> Array:
    """Flows with their sign into the company, from the item. shape (item, path)"""
    return flows * SIGNS[:, None]
