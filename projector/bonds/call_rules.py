"""Call rules: what share of the par outstanding an issuer calls at one opportunity (C7).

A rule sees the opportunity, never the path's future. Market values and spreads always assume optimal exercise with
the stated cost; a rule changes cash flows only, so that rules compare like with like.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[np.float64]


@dataclass(frozen=True)
class Opportunity:
    """What an issuer knows when a right is live: values per 100, one for every path asked."""

    month: int
    continuation: Array  # cost of going on, optimal from here
    bar: Array  # clean price + cost + accrued


class CallRule(Protocol):
    """One verb: the share called."""

    @property
    def name(self) -> str:
        """The rule's name in the study."""

    def share_called(self, opportunity: Opportunity) -> Array:
        """Share of the par outstanding called, in [0, 1], shape of the opportunity."""


@dataclass(frozen=True)
class OptimalWithCost:
    """The issuer calls all when going on costs at least as much as calling; ties call.

    Source: Hull and White 1990 for the model; the refunding cost belongs inside the comparison and inside every later
    one, as in Mauer, Optimal bond call policies under transactions costs, J. Financial Research 16(1), 1993 (cited
    from memory).
    """

    name: str = "optimal_with_cost"

    def share_called(self, opportunity: Opportunity) -> Array:
        return np.where(opportunity.continuation >= opportunity.bar, 1.0, 0.0)
