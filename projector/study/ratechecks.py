"""Tables of rates: the starting curve has the tenors it needs, and tables of paths have no gaps."""

from __future__ import annotations

from functools import partial
from typing import Any, NamedTuple

import numpy as np
import pandas as pd

from projector.study.cells import figure, plain_text
from projector.study.errors import LocatedError, first_errors
from projector.study.names import listed
from projector.study.streamchecks import spans

START_TO = 1e-9  # imported paths meet the starting curve to this


def curve_errors(curve: pd.DataFrame, file: str) -> list[LocatedError]:
    """The starting curve quotes 12 and 120 months, and 3 or 6."""
    have = set(curve["tenor_months"].tolist())
    lacking = [str(tenor) for tenor in (12, 120) if tenor not in have]
    lacking += [] if have & {3, 6} else ["one of 3 or 6"]
    return [
        LocatedError(
            code="E319",
            file=file,
            column="tenor_months",
            problem=f"the yield curve has no tenor of {tenor} months",
            remedy="add the row: the short end, one year and ten years are needed",
        )
        for tenor in lacking
    ]


def rate_table_errors(
    kind: str, table: pd.DataFrame, curve: pd.DataFrame, horizon_months: int, file: str
) -> list[LocatedError]:
    """The faults of one table of paths.

    kind   "shift_table", "history" or "imported"
    curve  the starting curve, checked
    """
    path = "scenario" if kind == "imported" else "title"
    time = "year" if kind == "shift_table" else "month"
    gaps: list[Gap] = []
    others: list[pd.DataFrame] = []
    starts: list[pd.DataFrame] = []
    for title, rows in table.groupby(path, sort=True):
        tenors = sorted(set(curve["tenor_months"] if kind == "imported" else rows["tenor_months"]))
        expected = _expected(kind, rows[time], horizon_months)
        gaps += _gaps(rows, str(title), time, expected, tenors)
        other = rows[~rows[time].isin(expected) | ~rows["tenor_months"].isin(tenors)]
        others += [other.assign(path=title, span=spans(expected))] if len(other) else []
        starts += [_off_start(rows, curve).assign(path=title)] if kind == "imported" else []
    return [
        *first_errors(gaps, partial(_gap_error, time, file)),
        *_other_errors(others, time, file),
        *_start_errors(starts, file),
    ]


def _expected(kind: str, times: pd.Series, horizon_months: int) -> list[int]:
    """The years or months that a path must have: from 0, without a gap unless shifts skip years."""
    if kind == "shift_table":
        return sorted({0, *times.tolist()})
    return list(range((int(times.max()) if kind == "history" else horizon_months) + 1))


class Gap(NamedTuple):
    """A time of a path at which tenors have no rate."""

    title: str
    time: int
    lacking: list[int]
    tenors: list[int]


def _gaps(rows: pd.DataFrame, title: str, time: str, expected: list[int], tenors: list[int]) -> list[Gap]:
    """Expected times at which a tenor is missing."""
    table = rows.pivot(index=time, columns="tenor_months", values="row").reindex(index=expected, columns=tenors)
    filled = table.notna().to_numpy()
    return [
        Gap(title, expected[at], np.array(tenors)[~filled[at]].tolist(), tenors)
        for at in np.flatnonzero(~filled.all(axis=1)).tolist()
    ]


def _gap_error(time: str, file: str, gap: Gap) -> LocatedError:
    remedy = f"give every {time} from 0 on the same tenors, one row each: {listed(map(str, gap.tenors), 20)}"
    problem = f"path {gap.title} has no rate in {time} {gap.time} for tenors {listed(map(str, gap.lacking))}"
    return LocatedError(code="E318", file=file, column=time, problem=problem, remedy=remedy)


def _other_errors(others: list[pd.DataFrame], time: str, file: str) -> list[LocatedError]:
    """Rates at times or tenors that are not expected."""

    def told(found: tuple[Any, ...]) -> LocatedError:
        row, title, when, tenor, span = found
        problem = f"path {title} has a rate in {time} {when} for tenor {tenor}, which is not used"
        remedy = f"keep {time} {span} and the tenors of the yield curve"
        return LocatedError(code="E318", file=file, row=int(row), column=time, problem=problem, remedy=remedy)

    return first_errors(_rows(others, ["row", "path", time, "tenor_months", "span"]), told)


def _rows(frames: list[pd.DataFrame], names: list[str]) -> list[tuple[Any, ...]]:
    return list(pd.concat(frames)[names].itertuples(index=False, name=None)) if frames else []


def _off_start(rows: pd.DataFrame, curve: pd.DataFrame) -> pd.DataFrame:
    """The rates of month 0 that are not the starting curve's."""
    start = rows[rows["month"] == 0].merge(curve[["tenor_months", "rate"]], on="tenor_months", suffixes=("", "_start"))
    return start[(start["rate"] - start["rate_start"]).abs() > START_TO]


def _start_errors(starts: list[pd.DataFrame], file: str) -> list[LocatedError]:
    def told(found: tuple[Any, ...]) -> LocatedError:
        row, title, rate, quoted, tenor = found
        return LocatedError(
            code="E450",
            file=file,
            row=int(row),
            column="rate",
            value=plain_text(rate),
            problem=f"path {title} does not start from the yield curve, which has {figure(quoted)} at {tenor} months",
            remedy="month 0 of imported paths must be the starting curve: bring one of the two up to date",
        )

    return first_errors(_rows(starts, ["row", "path", "rate", "rate_start", "tenor_months"]), told)
