"""Tables as they stand in the file: text cells (numbers of a Parquet file stay numbers), with the line of each row.

Nothing is guessed here: no cell becomes missing because it reads NA, no column gets a type from its values.
"""

from __future__ import annotations

import csv
import io
from dataclasses import dataclass
from functools import partial
from typing import Any

import numpy as np
from numpy.typing import NDArray

from projector.study.errors import LocatedError, StudyRefused, first_errors
from projector.study.files import LIMITS, InputFile, Limits, require_known_suffix, too_large
from projector.study.parquetcells import LARGE_REMEDY, read_parquet
from projector.study.workbook import read_sheet


@dataclass(frozen=True, kw_only=True)
class RawTable:
    """A table before its checks: columns of text (object) or, from Parquet, of finite or other numbers."""

    file: str
    sheet: str | None
    header: tuple[str, ...]
    columns: tuple[NDArray[Any], ...]  # beside the header
    row: NDArray[np.int64]  # the line of the file, header = 1
    floating: frozenset[str] = frozenset()  # columns that were floating-point numbers in the file


def read_raw_table(file: InputFile, table: str, limits: Limits = LIMITS) -> RawTable:
    """The table in a CSV, Parquet or XLSX file.

    table   its name in study.toml: a workbook of several sheets holds it in the sheet of that name
    """
    require_known_suffix(file.name)
    suffix = file.name.lower().rsplit(".", 1)[1]
    if suffix == "csv":
        return _from_lines(file.name, None, *_csv_lines(file, limits))
    if suffix == "xlsx":
        sheet, lines = read_sheet(file, table, limits)
        return _from_lines(file.name, sheet, lines, np.arange(1, len(lines) + 1))
    return _from_parquet(file, limits)


def _csv_text(file: InputFile) -> str:
    try:
        return file.content.decode("utf-8-sig")
    except UnicodeDecodeError as problem:
        row = file.content.count(b"\n", 0, problem.start) + 1
        error = LocatedError(
            code="E108",
            file=file.name,
            row=row,
            problem=f"byte {problem.start + 1} of the file is not UTF-8 text",
            remedy="save the file as CSV in UTF-8",
        )
        raise StudyRefused([error]) from None


def _csv_lines(file: InputFile, limits: Limits) -> tuple[list[list[str]], NDArray[np.int64]]:
    lines: list[list[str]] = []
    numbers: list[int] = []
    reader = csv.reader(io.StringIO(_csv_text(file), newline=""), strict=True)
    cells = 0
    try:
        for line in reader:
            lines.append(line)
            numbers.append(reader.line_num)
            cells += len(line)
            if len(lines) > limits.rows + 1 or len(line) > limits.columns or cells > limits.cells:
                _require_size(file.name, len(lines) - 1, len(line), cells, limits)
    except csv.Error as problem:
        remedy = 'close every quoted cell and double a quote inside it, as in "say ""so"""'
        error = LocatedError(
            code="E108", file=file.name, row=reader.line_num, problem=f"this line is not CSV: {problem}", remedy=remedy
        )
        raise StudyRefused([error]) from None
    return lines, np.array(numbers, dtype=np.int64)


def _require_size(file: str, rows: int, columns: int, cells: int, limits: Limits) -> None:
    for what, found, limit in (
        ("rows in this table", rows, limits.rows),
        ("columns in this table", columns, limits.columns),
        ("cells in this table", cells, limits.cells),
    ):
        if found > limit:
            raise too_large("E111", file, what, found, limit, LARGE_REMEDY)


def _from_lines(file: str, sheet: str | None, lines: list[list[str]], numbers: NDArray[np.int64]) -> RawTable:
    if not lines or not any(lines[0]):
        error = LocatedError(
            code="E301", file=file, sheet=sheet, row=1, problem="there is no header in row 1", remedy=_HEADER
        )
        raise StudyRefused([error])
    header = [name.strip() for name in lines[0]]
    while header and not header[-1]:  # a spreadsheet's empty columns at the right
        header.pop()
    width = len(header)
    kept = [(number, line) for number, line in zip(numbers[1:].tolist(), lines[1:]) if any(line)]
    _require_even(file, sheet, kept, width)
    columns = [np.array([line[at] for _, line in kept], dtype=object) for at in range(width)]
    row = np.array([number for number, _ in kept], dtype=np.int64)
    return RawTable(file=file, sheet=sheet, header=tuple(header), columns=tuple(columns), row=row)


_HEADER = "write the column names into the first row"


def _require_even(file: str, sheet: str | None, kept: list[tuple[int, list[str]]], width: int) -> None:
    """Every row has as many cells as the header; empty cells beyond it are nothing."""
    ragged = [
        (number, line) for number, line in kept if len(line) != width and (len(line) < width or any(line[width:]))
    ]
    if ragged:
        raise StudyRefused(first_errors(ragged, partial(_uneven, file, sheet, width)))


def _uneven(file: str, sheet: str | None, width: int, ragged: tuple[int, list[str]]) -> LocatedError:
    number, line = ragged
    return LocatedError(
        code="E305",
        file=file,
        sheet=sheet,
        row=number,
        problem=f"this row has {len(line)} cells, the header has {width}",
        remedy="give every row as many cells as the header; a text with a comma in it needs quotes",
    )


def _from_parquet(file: InputFile, limits: Limits) -> RawTable:
    header, columns, floating = read_parquet(file, limits, _require_size)
    row = np.arange(2, (len(columns[0]) if columns else 0) + 2, dtype=np.int64)
    return RawTable(file=file.name, sheet=None, header=header, columns=columns, row=row, floating=floating)
