"""Parts of a workbook read as they lie in the archive: what they would ask for, and cells that hold no value.

The reader of sheets gives an error cell and a formula without stored value as an empty cell, and lays a sheet out
from its first cell to its last whatever lies between. Both are seen here, before it opens the file.
"""

from __future__ import annotations

import re
from array import array
from collections.abc import Iterable
from dataclasses import dataclass, field
from functools import lru_cache
from typing import Any
from xml.parsers import expat

from projector.study.errors import SHOWN_AT_MOST
from projector.study.files import Limits, too_large

STRING_AT_MOST = 32_767  # characters in one cell, the spreadsheet program's own limit
SPLIT = "keep the table alone in a new workbook, or save it as CSV or Parquet"
_CELL_NAME = re.compile(r"([A-Za-z]{1,4})([0-9]{1,9})")
_ROW_NAME = re.compile(r"[0-9]{1,9}")


class NotAWorkbook(ValueError):
    """A part of the archive is not what a workbook has there."""


@dataclass(frozen=True)
class HollowCell:
    """A cell that reads as empty but is not: row and column from 1, and the spreadsheet error it shows, if any."""

    row: int
    column: int
    error: str | None


@dataclass
class Hollow:
    """Hollow cells of one sheet by code: the first twenty, and the count of all."""

    first: dict[str, list[HollowCell]] = field(default_factory=dict)
    count: dict[str, int] = field(default_factory=dict)

    def add(self, code: str, cell: HollowCell) -> None:
        """Counts a cell and keeps it when it is one of the first."""
        self.count[code] = self.count.get(code, 0) + 1
        if self.count[code] <= SHOWN_AT_MOST:
            self.first.setdefault(code, []).append(cell)


class PartScan:
    """A part of the archive, fed in pieces to a parser that keeps nothing. Entities are refused: they can grow."""

    def __init__(self) -> None:
        self.parser = expat.ParserCreate()
        self.parser.StartElementHandler = self.start
        self.parser.StartDoctypeDeclHandler = self._doctype

    def start(self, name: str, attributes: dict[str, str]) -> None:
        """An element begins."""

    def feed(self, piece: bytes, *, last: bool = False) -> None:
        """The next piece of the part."""
        try:
            self.parser.Parse(piece, last)
        except expat.ExpatError as problem:
            raise NotAWorkbook(f"a part of it is not XML: {problem}") from None

    def _doctype(self, *_: Any) -> None:
        raise NotAWorkbook("a part of it declares a document type")


class StringsScan(PartScan):
    """The shared strings: the length of each; one longer than a cell may be is refused."""

    def __init__(self, file: str) -> None:
        super().__init__()
        self.file = file
        self.lengths = array("L")
        self.parser.CharacterDataHandler = self._text

    def start(self, name: str, attributes: dict[str, str]) -> None:
        if _local(name) == "si":
            self.lengths.append(0)

    def _text(self, text: str) -> None:
        if self.lengths:
            self.lengths[-1] += len(text)
            if self.lengths[-1] > STRING_AT_MOST:
                what = f"characters in text {len(self.lengths):,} of the workbook"
                raise too_large("E110", self.file, what, self.lengths[-1], STRING_AT_MOST, SPLIT)


class SheetScan(PartScan):
    """One sheet: how far its cells reach, how much text they repeat, and which of them are hollow.

    A row without a number is the one after the row before it, a cell without a name the one after the cell before it:
    so the reader counts, too.
    """

    def __init__(self, file: str, limits: Limits, lengths: array[int]) -> None:
        super().__init__()
        self.file, self.limits, self.lengths = file, limits, lengths
        self.hollow = Hollow()
        self.row = self.column = 0  # where the scan stands
        self.last_row = self.last_column = self.cells = self.text = 0
        self.place, self.kind = (0, 0), ""  # of the cell that is open
        self.is_open = self.has_formula = False
        self.value: list[str] | None = None

    def start(self, name: str, attributes: dict[str, str]) -> None:
        if ":" in name:
            name = _local(name)
        if name == "c":
            self.close()
            self._open(attributes)
        elif name == "row":
            self.close()
            self._next_row(attributes.get("r"))
        elif not self.is_open or self.kind == "inlineStr":
            return
        elif name == "f":
            self.has_formula = True
        elif name != "v":  # the sheet goes on after its cells
            self.close()
        else:
            self.value = []
            if self.has_formula or self.kind in ("e", "s"):
                self.parser.CharacterDataHandler = self.value.append

    def feed(self, piece: bytes, *, last: bool = False) -> None:
        super().feed(piece, last=last)
        if last:
            self.close()

    def close(self) -> None:
        """The open cell ends: judged by what was seen of it."""
        if not self.is_open:
            return
        self.parser.CharacterDataHandler = None
        text = "".join(self.value or ()).strip()
        if self.kind == "e":
            self.hollow.add("E320", HollowCell(*self.place, text or "unknown"))
        elif self.has_formula and not text and (self.value is None or self.kind != "str"):
            self.hollow.add("E321", HollowCell(*self.place, None))
        elif self.kind == "s" and text.isdecimal() and len(text) < 10 and int(text) < len(self.lengths):
            self.text += self.lengths[int(text)]
            if self.text > self.limits.unpacked_bytes:
                self._require("E110", "characters in the cells of a sheet", self.text, self.limits.unpacked_bytes)
        self.kind, self.is_open, self.has_formula, self.value = "", False, False, None

    def _next_row(self, named: str | None) -> None:
        if named is not None and not _ROW_NAME.fullmatch(named):
            raise NotAWorkbook("a row of a sheet has no number")
        self.row, self.column = self.row + 1 if named is None else int(named), 0
        self._reach(self.row, 1)

    def _open(self, attributes: dict[str, str]) -> None:
        named = attributes.get("r")
        row, self.column = max(self.row, 1), self.column + 1
        if named is not None:
            parts = _CELL_NAME.fullmatch(named)
            if parts is None:
                raise NotAWorkbook("a cell of a sheet has a name that is none")
            row, self.column = int(parts[2]), column_number(parts[1])
        self.place, self.kind = (row, self.column), attributes.get("t", "")
        self.cells, self.is_open = self.cells + 1, True
        self._reach(row, self.column)

    def _reach(self, row: int, column: int) -> None:
        """The sheet reaches to this cell at least; refused as soon as that is too far."""
        if self.cells > self.limits.sheet_cells:
            self._require("E111", "cells in a sheet", self.cells, self.limits.sheet_cells)
        if row > self.last_row or column > self.last_column:
            self.last_row, self.last_column = max(row, self.last_row), max(column, self.last_column)
            self._require("E111", "columns used in a sheet", self.last_column, self.limits.columns)
            area = f"{self.last_row:,} rows x {self.last_column:,} columns"
            what = f"cells between the first and the last of a sheet ({area})"
            self._require("E111", what, self.last_row * self.last_column, self.limits.sheet_cells)

    def _require(self, code: str, what: str, found: int, limit: int) -> None:
        if found > limit:
            raise too_large(code, self.file, what, found, limit, SPLIT)


class AttributesScan(PartScan):
    """The attributes of one kind of element: the sheets of a workbook, or what it relates to."""

    def __init__(self, element: str) -> None:
        super().__init__()
        self.element = element
        self.found: list[dict[str, str]] = []

    def start(self, name: str, attributes: dict[str, str]) -> None:
        if _local(name) == self.element:
            self.found.append({_local(key): value for key, value in attributes.items()})


def attributes_of(element: str, pieces: Iterable[bytes]) -> list[dict[str, str]]:
    """The attributes of each such element in a part, without prefixes; none where there is no part."""
    scan, any_piece = AttributesScan(element), False
    for piece in pieces:
        scan.feed(piece)
        any_piece = True
    if any_piece:
        scan.feed(b"", last=True)
    return scan.found


def part_name(target: str, folder: str = "xl/") -> str:
    """The member a relation points to, in lower case: from the root of the archive, or from the workbook's folder."""
    whole = target.lower().replace("\\", "/")
    return whole[1:] if whole.startswith("/") else whole if whole.startswith(folder) else folder + whole


def _local(name: str) -> str:
    return name.rpartition(":")[2]


@lru_cache(maxsize=4096)
def column_number(letters: str) -> int:
    """The number of a spreadsheet column: A is 1, Z is 26, AA is 27."""
    number = 0
    for letter in letters.upper():
        number = number * 26 + ord(letter) - 64
    return number


def column_letters(number: int) -> str:
    """The letters of a spreadsheet column: 1 is A, 27 is AA."""
    letters = ""
    while number > 0:
        number, rest = divmod(number - 1, 26)
        letters = chr(65 + rest) + letters
    return letters
