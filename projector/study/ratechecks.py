"""Tables of rates: the starting curve has the tenors it needs, and tables of paths have no gaps."""

from __future__ import annotations

import numpy as np
import pandas as pd

from projector.study.cells import figure, plain_text
from projector.study.errors import LocatedError
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
    errors: list[LocatedError] = []
    for title, rows in table.groupby(path, sort=True):
        tenors = sorted(set(curve["tenor_months"] if kind == "imported" else rows["tenor_months"]))
        errors += _gap_errors(rows, str(title), time, _expected(kind, rows[time], horizon_months), tenors, file)
        if kind == "imported":
            errors += _start_errors(rows, str(title), curve, file)
    return errors


def _expected(kind: str, times: pd.Series, horizon_months: int) -> list[int]:
    """The years or months that a path must have: from 0, without a gap unless shifts skip years."""
    if kind == "shift_table":
        return sorted({0, *times.tolist()})
    return list(range((int(times.max()) if kind == "history" else horizon_months) + 1))


def _gap_errors(
    rows: pd.DataFrame, title: str, time: str, expected: list[int], tenors: list[int], file: str
) -> list[LocatedError]:
    """Every expected time has every tenor, and there is no other."""
    filled = (
        rows.pivot(index=time, columns="tenor_months", values="row").reindex(index=expected, columns=tenors).notna()
    )
    errors = []
    remedy = f"give every {time} from 0 on the same tenors, one row each: {listed(map(str, tenors), 20)}"
    for at in np.flatnonzero(~filled.to_numpy().all(axis=1)).tolist():
        lacking = [str(tenor) for tenor in np.array(tenors)[~filled.to_numpy()[at]].tolist()]
        problem = f"path {title} has no rate in {time} {expected[at]} for tenors {listed(lacking)}"
        errors.append(LocatedError(code="E318", file=file, column=time, problem=problem, remedy=remedy))
    other = rows[~rows[time].isin(expected) | ~rows["tenor_months"].isin(tenors)]
    for row, when, tenor in zip(other["row"], other[time], other["tenor_months"]):
        problem = f"path {title} has a rate in {time} {when} for tenor {tenor}, which is not used"
        remedy = f"keep {time} {spans(expected)} and the tenors of the yield curve"
        errors.append(LocatedError(code="E318", file=file, row=int(row), column=time, problem=problem, remedy=remedy))
    return errors


def _start_errors(rows: pd.DataFrame, title: str, curve: pd.DataFrame, file: str) -> list[LocatedError]:
    start = rows[rows["month"] == 0].merge(curve[["tenor_months", "rate"]], on="tenor_months", suffixes=("", "_start"))
    off = start[(start["rate"] - start["rate_start"]).abs() > START_TO]
    return [
        LocatedError(
            code="E450",
            file=file,
            row=int(row),
            column="rate",
            value=plain_text(rate),
            problem=f"path {title} does not start from the yield curve, which has {figure(quoted)} at {tenor} months",
            remedy="month 0 of imported paths must be the starting curve: bring one of the two up to date",
        )
        for row, rate, quoted, tenor in zip(off["row"], off["rate"], off["rate_start"], off["tenor_months"])
    ]
