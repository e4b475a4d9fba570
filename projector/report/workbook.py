"""The tables of the report as an Excel workbook: one sheet a table, true numbers, the look of the page.

Figures are full values in the unit of the page. Text of the study is written as text: never as a formula, never as
a link. The file carries the study's valuation date as its date of creation, so that the same results give the same
bytes.
"""

from __future__ import annotations

import io
from datetime import datetime
from pathlib import Path
from typing import Any

import xlsxwriter

from projector.report.context.page import Page, page
from projector.report.numbers import MINUS, clean
from projector.report.parts import Cell, Column, Table
from projector.run.results import RunResults

MINUS_FORM = f'"{MINUS}"'
NUMBER_FORMATS = {
    "one": "#,##0.0", "two": "#,##0.00", "four": "#,##0.0000", "whole": "#,##0", "percent_whole": "0",
    "percent": "0.0", "percent_two": "0.00", "general": "0.0E+00", "text": "@",
}  # fmt: skip
FIRST_ROW = 4  # rows above the table: name, basis, notes, an empty one
WIDEST = 60


def write_workbook(results: RunResults, path: Path, run_command: str = "") -> None:
    """The workbook as a file."""
    path.write_bytes(workbook_bytes(results, run_command))


def workbook_bytes(results: RunResults, run_command: str = "") -> bytes:
    """The workbook as bytes, the same for the same results."""
    return tables_to_bytes(page(results, run_command), results)


def tables_to_bytes(context: Page, results: RunResults) -> bytes:
    """The workbook of a context already built."""
    out = io.BytesIO()
    options = {"in_memory": True, "strings_to_formulas": False, "strings_to_urls": False, "strings_to_numbers": False}
    book = xlsxwriter.Workbook(out, options)
    day = results.study.valuation_date
    book.set_properties(
        {"title": "Tables of the reserve adequacy report", "created": datetime(day.year, day.month, day.day)}
    )
    looks = _Looks(book)
    tables = context.tables()
    _front(book, looks, context, tables)
    for table in tables:
        _sheet(book, looks, table)
    book.close()
    return out.getvalue()


class _Looks:
    """Cell formats by style, made once each and in the order they are first used."""

    def __init__(self, book: Any) -> None:
        self.book = book
        self.made: dict[tuple[str, bool, str], Any] = {}

    def of(self, style: str, *, bold: bool = False, look: str = "") -> Any:
        """The format of a style: negatives are bold, coloured and carry the true minus sign."""
        key = (style, bold, look)
        if key not in self.made:
            self.made[key] = self.book.add_format(_format(style, bold, look))
        return self.made[key]


def _format(style: str, bold: bool, colour: str) -> dict[str, Any]:
    look: dict[str, Any] = {"font_name": "Arial", "font_size": 10, "bold": bold, "valign": "top"}
    if style in ("text", "head"):
        look["text_wrap"] = True
    if style in NUMBER_FORMATS:
        form = NUMBER_FORMATS[style]
        sign = MINUS_FORM if colour == "negative" else ""  # what rounds to zero keeps its value and shows no sign
        look["num_format"] = form if style == "text" else f"{form};{sign}{form};{form}"
    if style == "head":
        look |= {"bottom": 1, "bold": True, "valign": "bottom"}
    if colour:
        look["font_color"] = {"quiet": "#5F6770", "negative": "#B0440A"}[colour]
    return look


def _front(book: Any, looks: _Looks, context: Page, tables: list[Table]) -> None:
    sheet = book.add_worksheet("Read me")
    head = context.head
    lines = (
        ("Reserve adequacy report: tables", ""), ("Company", head.company), ("Business", head.business),
        ("Valuation date", head.valued), ("Facts up to", head.information_date), ("Unit of money", head.unit),
        ("Status of data", head.status or "final"), ("Input digest", context.reproduce.input_digest),
        ("Signs", "A surplus is positive when assets exceed liabilities. Figures are full values; the page rounds."),
        ("Addresses", "Sheet 1.1, line 7, column (1) is T1.1.7.1 in the report."),
    )  # fmt: skip
    for row, (name, text) in enumerate(lines):
        sheet.write_string(row, 0, name, looks.of("plain", bold=True))
        sheet.write_string(row, 1, clean(text), looks.of("plain"))
    for row, table in enumerate(tables, start=len(lines) + 1):
        sheet.write_string(row, 0, table.number, looks.of("plain"))
        sheet.write_string(row, 1, clean(table.caption), looks.of("plain"))
    sheet.set_column(0, 0, 18)
    sheet.set_column(1, 1, 100)


def _sheet(book: Any, looks: _Looks, table: Table) -> None:
    sheet = book.add_worksheet(table.number)
    notes = [table.note_on_adding, f"[n/a]: {table.why_missing}." if table.has_missing else "", *table.notes]
    for row, text in enumerate(
        (f"Table {table.number}. {table.caption}", table.basis, " ".join(n for n in notes if n))
    ):
        sheet.write_string(row, 0, clean(text), looks.of("plain", bold=row == 0))
    _header(sheet, looks, table)
    for line, item in enumerate(table.rows, start=1):
        row = FIRST_ROW + line
        sheet.write_number(row, 0, line, looks.of("whole", look="quiet"))
        sheet.write_string(row, 1, clean(item.name), looks.of("text", bold=item.total))
        for place, cell in enumerate(item.cells, start=2):
            _cell(sheet, row, place, cell, looks, item.total)
    sheet.freeze_panes(FIRST_ROW + 1, 2)
    sheet.set_column(0, 0, 6)
    sheet.set_column(1, 1, min(WIDEST, max([12, *(len(row.name) for row in table.rows)])))
    for place, column in enumerate(table.columns, start=2):
        sheet.set_column(place, place, _width(table, place - 2, column))


def _header(sheet: Any, looks: _Looks, table: Table) -> None:
    sheet.write_string(FIRST_ROW, 0, "Line", looks.of("head"))
    sheet.write_string(FIRST_ROW, 1, table.row_head, looks.of("head"))
    for place, column in enumerate(table.columns, start=1):
        unit = f", {column.unit}" if column.unit else ""
        sheet.write_string(FIRST_ROW, place + 1, clean(f"{column.name}{unit} ({place})"), looks.of("head"))


def _cell(sheet: Any, row: int, place: int, cell: Cell, looks: _Looks, bold: bool) -> None:
    look = "negative" if cell.negative else ""
    if isinstance(cell.value, float) and cell.look == "number":
        sheet.write_number(
            row, place, cell.value / cell.scale, looks.of(cell.style, bold=bold or cell.negative, look=look)
        )
    else:
        look = "quiet" if cell.look == "quiet" else ""
        sheet.write_string(row, place, clean(cell.shown), looks.of("text", bold=bold, look=look))


def _width(table: Table, place: int, column: Column) -> int:
    longest = max((len(row.cells[place].shown) for row in table.rows), default=0)
    return min(WIDEST, max(11, longest + 2, len(column.name) // 2 + 2))
