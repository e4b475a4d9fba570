"""One sheet of an Excel workbook as text cells, with its bombs refused before it is opened."""

from __future__ import annotations

import io
import zipfile
import zlib
from array import array
from collections.abc import Iterator
from dataclasses import dataclass, field
from functools import partial
from typing import Any

import python_calamine

from projector.study.cells import plain_text
from projector.study.errors import LocatedError, StudyRefused, first_errors
from projector.study.files import InputFile, Limits, refused, too_large
from projector.study.names import shown
from projector.study.sheetscan import (
    SPLIT,
    Hollow,
    HollowCell,
    NotAWorkbook,
    PartScan,
    SheetScan,
    StringsScan,
    attributes_of,
    column_letters,
    part_name,
)

_CHUNK = 1 << 20
_WORKBOOK, _STRINGS, _RELATION = "xl/workbook.xml", "xl/sharedstrings.xml", "Relationship"
_ROOT, _RELATIONS = "_rels/.rels", "xl/_rels/workbook.xml.rels"
_SHEETS = "xl/worksheets/"


@dataclass
class Archive:
    """What the look into the archive gave: where sheets lie, and the hollow cells of each part by its name."""

    parts: dict[str, str] = field(default_factory=dict)
    hollow: dict[str, Hollow] = field(default_factory=dict)

    def hollow_of(self, sheet: str) -> list[Hollow]:
        """The hollow cells of a sheet; of all sheets when its part is not known."""
        part = self.parts.get(sheet)
        return [self.hollow[part]] if part in self.hollow else list(self.hollow.values())


def read_sheet(file: InputFile, table: str, limits: Limits) -> tuple[str, list[list[str]]]:
    """Name and rows of the table's sheet, from sheet row 1 on.

    The sheet is the one named like the table, or the only one. A cell that shows an error, or a formula without a
    stored value, is refused: read as empty it would be a term that the security does not have.
    """
    archive = _looked_into(file, limits)
    try:
        book = python_calamine.CalamineWorkbook.from_filelike(io.BytesIO(file.content))
        names = list(book.sheet_names)
        sheet = _sheet_of(file.name, names, table)
        rows = book.get_sheet_by_name(sheet).to_python(skip_empty_area=False)
    except (python_calamine.CalamineError, OSError, ValueError) as problem:
        raise _unreadable(file.name, problem) from None
    lines = [[plain_text(cell) for cell in row] for row in rows]
    _require_solid(file.name, sheet, lines[0] if lines else [], archive.hollow_of(sheet))
    return sheet, lines


def _require_solid(file: str, sheet: str, header: list[str], found: list[Hollow]) -> None:
    errors = []
    for hollow in found:
        for code, cells in sorted(hollow.first.items()):
            make = partial(_hollow_error, file, sheet, header, code)
            errors += first_errors(cells, make, hollow.count[code] - len(cells))
    if errors:
        raise StudyRefused(errors)


def _hollow_error(file: str, sheet: str, header: list[str], code: str, cell: HollowCell) -> LocatedError:
    name = header[cell.column - 1].strip() if cell.row > 1 and cell.column <= len(header) else ""
    if code == "E320":
        problem = f"the cell holds the spreadsheet error {shown(cell.error)}"
        remedy = "correct the formula or what it refers to, or write the value itself"
    else:
        problem = "the formula has no stored value"
        remedy = "open and save it in the spreadsheet program"
    column = shown(name) or column_letters(cell.column)
    return LocatedError(code=code, file=file, sheet=sheet, row=cell.row, column=column, problem=problem, remedy=remedy)


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


def _looked_into(file: InputFile, limits: Limits) -> Archive:
    """Counts what the archive unpacks to, and how large its sheets are, without keeping any of it."""
    try:
        with zipfile.ZipFile(io.BytesIO(file.content)) as archive:
            members = archive.infolist()
            if _WORKBOOK not in {member.filename for member in members}:
                raise refused("E108", file.name, "this is not an .xlsx workbook", "save it again as .xlsx")
            _require_unpacked(file, sum(member.file_size for member in members), limits)
            _require_unpacked(file, sum(_unpacked(file, archive, limits)), limits)
            return _scanned(file, archive, limits)
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


def _unpacked(file: InputFile, archive: zipfile.ZipFile, limits: Limits) -> Iterator[int]:
    """Bytes each member really unpacks to: a header may lie."""
    before = 0
    for member in archive.infolist():
        size = 0
        for piece in _pieces(archive, member):
            size += len(piece)
            _require_unpacked(file, before + size, limits)
        before += size
        yield size


def _require_unpacked(file: InputFile, unpacked: int, limits: Limits) -> None:
    if unpacked > limits.unpacked_bytes:
        raise too_large("E110", file.name, "bytes unpacked", unpacked, limits.unpacked_bytes, SPLIT)
    by_ratio = max(limits.unpacked_ratio * len(file.content), 16 * _CHUNK)
    if unpacked > by_ratio:
        what = f"bytes unpacked from {len(file.content):,} bytes on disk"
        raise too_large("E110", file.name, what, unpacked, by_ratio, SPLIT)


def _pieces(archive: zipfile.ZipFile, member: Any) -> Iterator[bytes]:
    with archive.open(member) as source:
        while piece := source.read(_CHUNK):
            yield piece


def _scanned(file: InputFile, archive: zipfile.ZipFile, limits: Limits) -> Archive:
    """The parts that the reader of sheets will open, looked through: the texts first, which the sheets repeat."""
    named: dict[str, list[Any]] = {}
    for member in archive.infolist():
        named.setdefault(member.filename.lower().replace("\\", "/"), []).append(member)

    def listed(name: str, element: str) -> list[dict[str, str]]:
        return attributes_of(element, (piece for member in named.get(name, []) for piece in _pieces(archive, member)))

    for relation in listed(_ROOT, _RELATION):
        if _is_of(relation, "officeDocument") and part_name(relation.get("Target", ""), "") != _WORKBOOK:
            raise NotAWorkbook(f"its workbook is not {_WORKBOOK}")
    relations = listed(_RELATIONS, _RELATION)
    targets = {relation.get("Id", ""): part_name(relation.get("Target", "")) for relation in relations}
    texts = {part_name(relation.get("Target", "")) for relation in relations if _is_of(relation, "sharedStrings")}
    lengths = array("L")
    for member in _members(named, texts | {_STRINGS}):
        strings = StringsScan(file.name)
        _feed(strings, archive, member)
        lengths = max(lengths, strings.lengths, key=len)
    sheets = {sheet.get("name", ""): targets.get(sheet.get("id", ""), "") for sheet in listed(_WORKBOOK, "sheet")}
    found = Archive(parts=sheets)
    inside = {name for name in named if name.startswith(_SHEETS) and name.endswith(".xml")}
    for member in _members(named, inside | set(sheets.values())):
        scan = SheetScan(file.name, limits, lengths)
        _feed(scan, archive, member)
        found.hollow[member.filename.lower().replace("\\", "/")] = scan.hollow
    return found


def _is_of(relation: dict[str, str], kind: str) -> bool:
    return relation.get("Type", "").endswith(f"/{kind}")


def _members(named: dict[str, list[Any]], names: set[str]) -> list[Any]:
    return [member for name in sorted(names) for member in named.get(name, [])]


def _feed(scan: PartScan, archive: zipfile.ZipFile, member: Any) -> None:
    for piece in _pieces(archive, member):
        scan.feed(piece)
    scan.feed(b"", last=True)
