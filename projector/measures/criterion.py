"""The study's own criterion, applied as written and fixed before the results."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from projector.study.records import Criterion

Array = npt.NDArray[np.float64]
BoolArray = npt.NDArray[np.bool_]


def criterion_values(criterion: Criterion, statement: Array, market: Array) -> Array:
    """The measure at its worst date (or at the end), by scenario. [currency], shape (path,)

    statement, market  surplus at the year ends 1, 2, ..., all segments together [year end, path]
    """
    measured = statement if criterion.measure == "statement_surplus" else market
    return measured[-1] if criterion.dates == "end" else measured.min(axis=0)


def scenarios_met(criterion: Criterion, values: Array) -> BoolArray:
    """Whether each scenario lies at or above the limit; a miss under a millionth of the limit's unit is rounding."""
    return values >= criterion.limit - 1e-6


def criterion_met(criterion: Criterion, values: Array) -> bool:
    """Whether no more scenarios lie below the limit than the study allows."""
    return int((~scenarios_met(criterion, values)).sum()) <= criterion.scenarios_allowed_below
