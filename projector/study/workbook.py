"""One sheet of an Excel workbook as text cells, with its bombs refused before it is opened."""

from __future__ import annotations

import io
import re
import zipfile
import zlib
from typing import Any

import python_calamine

from projector.study.cells import plain_text
from projector.study.files import InputFile, Limits, refused, too_large
from projector.study.names import shown

_CHUNK = 1 << 20
_OVERLAP = 64  # bytes kept from one chunk to the next, so that a cell's name is never cut in two
_CELL = re.compile(rb"""\br\s*=\s*["']([A-Za-z]{0,4})([0-9]{1,9})["']""")
_SPLIT = "keep the table alone in a new workbook, or save it as CSV or Parquet"


def read_sheet(file: InputFile, table: str, limits: Limits) -> tuple[str, list[list[str]]]:
    """Name and rows of the table's sheet, from sheet row 1 on.

    The sheet is the one named like the table, or the only one.
    """
    _require_small(file, limits)
    try:
        book = python_calamine.CalamineWorkbook.from_filelike(io.BytesIO(file.content))
        names = list(book.sheet_names)
        sheet = _sheet_of(file.name, names, table)
        rows = book.get_sheet_by_name(sheet).to_python(skip_empty_area=False)
    except (python_calamine.CalamineError, OSError, ValueError) as problem:
        raise _unreadable(file.name, problem) from None
    return sheet, [[plain_text(cell) for cell in row] for row in rows]


def _unreadable(name: str, problem: BaseException) -> Exception:
    reason = shown(problem) or type(problem).__name__
    return refused("E108", name, f"this is not a workbook that can be read: {reason}", "save it again as .xlsx")


def _sheet_of(file: str, names: list[str], table: str) -> str:
    if table in names:
        return table
    if len(names) == 1:
        return names[0]
    problem = f"the workbook has {len(names)} sheets and none is named {table}"
    raise refused("E112", file, problem, f"name the sheet {table}, or keep one sheet in the workbook")


def _require_small(file: InputFile, limits: Limits) -> None:
    """Counts what the archive unpacks to, and how large its sheets say they are, without keeping any of it."""
    try:
        with zipfile.ZipFile(io.BytesIO(file.content)) as archive:
            members = archive.infolist()
            if "xl/workbook.xml" not in {member.filename for member in members}:
                raise refused("E108", file.name, "this is not an .xlsx workbook", "save it again as .xlsx")
            _require_unpacked(file, sum(member.file_size for member in members), limits)
            unpacked = 0
            for member in members:
                unpacked += _member_bytes(file, archive, member, limits, unpacked)
    except (
        zipfile.BadZipFile,
        zlib.error,
        NotImplementedError,
        RuntimeError,
        OSError,
        EOFError,
        ValueError,
    ) as problem:
        raise _unreadable(file.name, problem) from None


def _require_unpacked(file: InputFile, unpacked: int, limits: Limits) -> None:
    if unpacked > limits.unpacked_bytes:
        raise too_large("E110", file.name, "bytes unpacked", unpacked, limits.unpacked_bytes, _SPLIT)
    by_ratio = max(limits.unpacked_ratio * len(file.content), 16 * _CHUNK)
    if unpacked > by_ratio:
        what = f"bytes unpacked from {len(file.content):,} bytes on disk"
        raise too_large("E110", file.name, what, unpacked, by_ratio, _SPLIT)


def _member_bytes(file: InputFile, archive: zipfile.ZipFile, member: Any, limits: Limits, before: int) -> int:
    """Bytes the member really unpacks to; a header may lie. Sheets are read for the cell furthest out."""
    size, kept, last_row, last_column = 0, b"", 0, 0
    is_sheet = member.filename.startswith("xl/worksheets/")
    with archive.open(member) as source:
        while chunk := source.read(_CHUNK):
            size += len(chunk)
            _require_unpacked(file, before + size, limits)
            if is_sheet:
                for letters, digits in _CELL.findall(kept + chunk):
                    last_row, last_column = max(last_row, int(digits)), max(last_column, column_number(letters))
                kept = chunk[-_OVERLAP:]
    if last_column > limits.columns:
        raise too_large("E111", file.name, "columns used in a sheet", last_column, limits.columns, _SPLIT)
    if last_row * max(last_column, 1) > limits.sheet_cells:
        what = f"cells between the first and the last of a sheet ({last_row:,} rows x {last_column:,} columns)"
        raise too_large("E111", file.name, what, last_row * max(last_column, 1), limits.sheet_cells, _SPLIT)
    return size


def column_number(letters: bytes) -> int:
    """The number of a spreadsheet column: A is 1, Z is 26, AA is 27."""
    number = 0
    for letter in letters.upper():
        number = number * 26 + letter - 64
    return number
