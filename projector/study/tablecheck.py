"""One table: its header, each cell, its key. A bad cell never hides another; every fault has its row and column.

Each distinct text of a column is parsed once and the result laid out over the rows, so that the work grows with
what is different, not with what is repeated.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from projector.study.cells import PARSERS, Fault, in_range, number_codes, number_fault, plain_text
from projector.study.columns import Column, RefusedColumn, Table
from projector.study.errors import SHOWN_AT_MOST, LocatedError, first_errors
from projector.study.names import listed, nearest, shown
from projector.study.rawtables import RawTable

BLANKS: dict[str, Any] = {"number": np.nan, "whole": 0, "date": None, "flag": False}  # others: ""
_BRACED = re.compile(r"\{(\w+)\}")
_NO_NUMBER = ("nan", "inf", "-inf")
_HARMLESS = ("", "0", "0.0", "none", "no", "false")


@dataclass(frozen=True)
class Checked:
    """A typed table in the file's order, the faults found, and which rows have a sound value by column."""

    frame: pd.DataFrame
    errors: list[LocatedError]
    sound: dict[str, NDArray[np.bool_]]


def empty_table(table: Table) -> pd.DataFrame:
    """The typed table without rows."""
    none = np.array([], dtype=object)
    return pd.DataFrame({c.name: _typed(c, none) for c in table.columns} | {"row": np.array([], dtype=np.int64)})


def check_table(raw: RawTable, table: Table) -> Checked:
    """The table with typed columns, and every fault that can be seen in it alone.

    The frame is fit for use only when `errors` is empty; the masks in `sound` let checks across columns go on
    with the rows that are.
    """
    errors = _header_errors(raw, table)
    if raw.row.size == 0 and not table.may_be_empty:
        remedy = "fill it in: the run needs at least one row"
        errors.append(
            LocatedError(code="E304", file=raw.file, sheet=raw.sheet, problem="the table is empty", remedy=remedy)
        )
    data: dict[str, Any] = {}
    sound: dict[str, NDArray[np.bool_]] = {}
    for column in table.columns:
        if column.name in raw.header:
            cells = raw.columns[raw.header.index(column.name)]
            data[column.name], sound[column.name], found = _check_column(raw, column, cells)
            errors += found
        else:
            data[column.name] = _typed(column, np.array([_blank(column)] * raw.row.size, dtype=object))
            sound[column.name] = np.full(raw.row.size, not column.present)
    for refused in table.refused:
        if refused.name in raw.header:
            errors += _refused_errors(raw, refused, raw.columns[raw.header.index(refused.name)])
    frame = pd.DataFrame({**data, "row": raw.row})
    errors += _duplicate_errors(raw, table, frame, sound)
    return Checked(frame=frame, errors=errors, sound=sound)


def sorted_by_key(frame: pd.DataFrame, table: Table) -> pd.DataFrame:
    """The table in its canonical order, which no longer knows the order of the file."""
    order = np.lexsort([_codes(frame[name]) for name in reversed(table.key)])
    return frame.take(order).reset_index(drop=True)


def row_errors(
    frame: pd.DataFrame,
    mask: Any,
    *,
    code: str,
    file: str,
    column: str,
    problem: str,
    remedy: str | Callable[[dict[str, Any]], str],
) -> list[LocatedError]:
    """Located errors for the rows of the mask, with the value of `column` as found; twenty, the rest are counted.

    In `problem` and `remedy` the names of columns in braces stand for the row's values.
    """
    chosen = np.asarray(mask, dtype=bool)
    if not chosen.any():  # the usual case, and rows to dictionaries are dear
        return []
    shown_rows = frame[chosen & (np.cumsum(chosen) <= SHOWN_AT_MOST)]
    return first_errors(
        _records(shown_rows),
        lambda values: LocatedError(
            code=code,
            file=file,
            row=int(values["row"]),
            column=column,
            value=cell_as_read(values[column]),
            problem=_filled_in(problem, values),
            remedy=remedy(values) if callable(remedy) else _filled_in(remedy, values),
        ),
        int(chosen.sum()) - len(shown_rows),
    )


def _records(frame: pd.DataFrame) -> list[dict[str, Any]]:
    return [{str(name): value for name, value in values.items()} for values in frame.to_dict("records")]


def _filled_in(sentence: str, values: dict[str, Any]) -> str:
    """The sentence with {column} replaced by the row's value; any other brace stays, it may be the user's."""
    return _BRACED.sub(lambda name: cell_as_read(values[name[1]]) if name[1] in values else name[0], sentence)


def cell_as_read(value: Any) -> str:
    """A typed value as the user wrote it: a day without time, a whole number without point, empty for nothing."""
    if value is None or value is pd.NaT or (isinstance(value, float) and np.isnan(value)):
        return ""
    return plain_text(value.item() if isinstance(value, np.generic) else value)


def _header_errors(raw: RawTable, table: Table) -> list[LocatedError]:
    known = [column.name for column in table.columns] + [refused.name for refused in table.refused]
    missing = [column.name for column in table.columns if column.present and column.name not in raw.header]
    errors: list[LocatedError] = []
    for name in raw.header:
        if name not in known and name:
            errors.append(_unknown_column(raw, name, known, missing))
    for name in sorted({name for name in raw.header if raw.header.count(name) > 1 or not name}):
        problem = f"the column {shown(name)} stands {raw.header.count(name)} times" if name else "a column has no name"
        errors.append(_at_header(raw, "E303", shown(name) or None, problem, "keep one column of each name"))
    remedy = "add the column, or correct its name in the first row"
    if len(raw.header) == 1 and any(mark in raw.header[0] for mark in ";\t|"):
        remedy = "separate the cells by commas: this file seems to use another mark"
    errors += [_at_header(raw, "E301", name, f"the column {name} is missing", remedy) for name in missing]
    return errors


def _at_header(raw: RawTable, code: str, column: str | None, problem: str, remedy: str) -> LocatedError:
    return LocatedError(code=code, file=raw.file, sheet=raw.sheet, row=1, column=column, problem=problem, remedy=remedy)


def _unknown_column(raw: RawTable, name: str, known: Iterable[str], missing: list[str]) -> LocatedError:
    close = nearest(name, missing) or nearest(name, known)
    remedy = f"did you mean {close}?" if close else f"remove it; the columns are {listed(known, 30)}"
    remedy = f"did you mean {close}? Correct the name or remove the column" if close else remedy
    return _at_header(raw, "E302", shown(name), "the column is unknown", remedy)


def _blank(column: Column) -> Any:
    return BLANKS.get(column.kind, "")


@dataclass(frozen=True)
class _Column:
    """A column as parsed: values, the places of the bad cells, the code of each, and what is wrong at a place."""

    values: NDArray[Any]
    bad: NDArray[np.int64]
    codes: NDArray[Any]  # beside `bad`
    fault: Callable[[int], Fault]


def _check_column(
    raw: RawTable, column: Column, cells: NDArray[Any]
) -> tuple[Any, NDArray[np.bool_], list[LocatedError]]:
    """Typed values, which of them are sound, and the faults."""
    if cells.dtype != object and column.kind in ("number", "whole"):
        parsed = _judged(column, cells.astype(np.float64))
    else:
        texts = (
            cells if cells.dtype == object else np.array([plain_text(cell) for cell in cells.tolist()], dtype=object)
        )
        parsed = _parsed(column, texts, floating=column.name in raw.floating)
    sound = np.ones(len(cells), dtype=bool)
    sound[parsed.bad] = False
    return _typed(column, parsed.values), sound, _column_errors(raw, column, cells, parsed)


def _column_errors(raw: RawTable, column: Column, cells: NDArray[Any], parsed: _Column) -> list[LocatedError]:
    """The first faults of each code in the order of the rows; the rest are counted."""
    errors: list[LocatedError] = []
    for code in sorted(set(parsed.codes.tolist())):
        places = parsed.bad[parsed.codes == code].tolist()
        errors += first_errors(places, lambda at: _cell_error(raw, column, at, cells[at], parsed.fault(at)))
    return sorted(errors, key=lambda error: error.row or 0)


def _judged(column: Column, numbers: NDArray[np.float64]) -> _Column:
    """Numbers of a Parquet file, judged all at once; only the bad ones that are shown are looked at alone."""
    bad = np.flatnonzero(~in_range(numbers, column))

    def fault(at: int) -> Fault:
        found = number_fault(float(numbers[at]), column)
        assert found is not None  # `bad` are the numbers out of range
        return found

    values = np.where(np.isfinite(numbers), numbers, 0.0)
    return _Column(values, bad, number_codes(numbers[bad], column), fault)


def _parsed(column: Column, texts: NDArray[Any], *, floating: bool) -> _Column:
    """Texts, each distinct one parsed once.

    floating  the texts were floating-point numbers: where they were none, the text they became is no text
    """
    places, distinct = pd.factorize(texts)
    results = [
        Fault("E308", f"{column.name} is not a finite number", f"write the {column.meaning}")
        if floating and text in _NO_NUMBER
        else _value(column, text)
        for text in distinct
    ]
    codes = np.array([result.code if isinstance(result, Fault) else "" for result in results], dtype=object)
    values = np.empty(len(results), dtype=object)
    values[:] = [_blank(column) if isinstance(result, Fault) else result for result in results]
    bad = np.flatnonzero((codes != "")[places]) if (codes != "").any() else np.zeros(0, dtype=np.int64)
    return _Column(values[places], bad, codes[places[bad]], lambda at: results[places[at]])


def _value(column: Column, text: str) -> Any:
    if text.strip(" "):
        return PARSERS[column.kind](text, column)
    if column.filled:
        return Fault("E306", f"{column.name} is empty", f"write the {column.meaning} ({column.unit})")
    return _blank(column)


def _typed(column: Column, values: NDArray[Any]) -> Any:
    if column.kind == "number":
        return values.astype(np.float64) + 0.0  # no negative zero
    if column.kind == "whole":
        return values.astype(np.float64).astype(np.int64)
    if column.kind == "flag":
        return values.astype(bool)
    if column.kind == "date":
        return values.astype("datetime64[D]").astype("datetime64[s]")
    return values


def _cell_error(raw: RawTable, column: Column, at: int, cell: Any, fault: Fault) -> LocatedError:
    return LocatedError(
        code=fault.code,
        file=raw.file,
        sheet=raw.sheet,
        row=int(raw.row[at]),
        column=column.name,
        value=cell if isinstance(cell, str) else plain_text(cell.item()),
        problem=fault.problem,
        remedy=fault.advice(),
    )


def _refused_errors(raw: RawTable, refused: RefusedColumn, cells: NDArray[Any]) -> list[LocatedError]:
    """Cells that ask for what this version cannot do."""
    problem = f"{refused.what} not honoured by this version"
    remedy = "leave the cell empty only where the terms do not have it; otherwise this security cannot be modelled"
    if refused.elsewhere:
        problem = f"{refused.what} not read"
        remedy = f"leave the column out and write them in the table {refused.elsewhere}"
    harmless = _HARMLESS + refused.harmless
    texts = [cell if isinstance(cell, str) else plain_text(cell) for cell in cells.tolist()]
    asking = [at for at, text in enumerate(texts) if text.strip(" ").lower() not in harmless]
    column, fault = Column(name=refused.name, kind="text", unit="-", meaning=""), Fault(refused.code, problem, remedy)
    return first_errors(asking, lambda at: _cell_error(raw, column, at, texts[at], fault))


def _codes(values: pd.Series) -> NDArray[np.int64]:
    return np.asarray(pd.factorize(values, sort=True)[0], dtype=np.int64)


def _duplicate_errors(
    raw: RawTable, table: Table, frame: pd.DataFrame, sound: dict[str, NDArray[np.bool_]]
) -> list[LocatedError]:
    """Every row whose key stands in an earlier row; a security's other terms decide which error it is."""
    key = list(table.key)
    keyed = frame[np.logical_and.reduce([sound[name] for name in key])]
    if not keyed.duplicated(key).any():
        return []
    place = pd.Series(np.arange(len(frame)), index=frame.index)
    first = keyed.assign(place=place).groupby(key, sort=False, dropna=False)["place"].transform("first")
    later = keyed.index[keyed.duplicated(key)].to_numpy()
    earlier = first.loc[later].to_numpy()
    other = np.zeros(len(later), dtype=bool)
    for cells in raw.columns if table.name == "securities" else ():
        other |= cells[later] != cells[earlier]

    def told(pair: tuple[int, int]) -> LocatedError:
        names = ", ".join(f"{name} {cell_as_read(frame[name].iloc[pair[0]])}" for name in key)
        differing = [name for name, cells in zip(raw.header, raw.columns) if cells[pair[0]] != cells[pair[1]]]
        return _duplicate(raw, table, names, pair[0], int(frame["row"].iloc[pair[1]]), differing)

    pairs = [list(zip(later[kind].tolist(), earlier[kind].tolist())) for kind in (~other, other)]
    return sorted((error for same in pairs for error in first_errors(same, told)), key=lambda error: error.row or 0)


def _duplicate(raw: RawTable, table: Table, names: str, at: int, earlier: int, differing: list[str]) -> LocatedError:
    code, remedy = table.duplicate_code, f"keep one row for each {' and '.join(table.key)}"
    problem = f"{names} stands in row {earlier} already"
    if table.name == "securities":
        remedy = "keep one row for each security and let the lots share it"
        if differing:
            code, problem = "E315", f"{problem}, with another {listed(differing)}"
            remedy = "keep the row with the right terms, or give the other security its own security_id"
    column = table.key[-1] if len(table.key) > 1 else table.key[0]
    cell = raw.columns[raw.header.index(column)][at]
    return _cell_error(raw, table.column(column), at, cell, Fault(code, problem, remedy))
