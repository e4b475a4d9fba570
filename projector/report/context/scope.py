"""Section 3: what is in, and whether it ties to the ledger."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

from projector.report import cells
from projector.report.context.reading import Reading, total
from projector.report.numbers import count_of, fixed
from projector.report.parts import Cell, Column, Row, Table, rows_with_total, told
from projector.run.results import ALL_SEGMENTS

ITEMS = {
    "lots_count": "Lots", "par": "Par", "book_value": "Statement value of bonds", "cash": "Cash",
    "reserve_statutory": "Statutory reserve", "starting_assets": "Starting assets",
}  # fmt: skip
CONTROL = ("ledger", "read", "difference")
OPENING = (
    ("statement_start", "Statement value"), ("accrued", "Accrued interest"), ("cash", "Cash"),
    ("assets", "Starting assets"), ("reserve", "Reserves tested"), ("statement_surplus", "Statement surplus"),
)  # fmt: skip


@dataclass(frozen=True, kw_only=True)
class Scope:
    """Section 3."""

    control: Table = field(metadata=told("table 3.1"))
    opening: Table = field(metadata=told("table 3.2"))
    defects: Table = field(metadata=told("table 3.3"))
    defects_text: str = field(metadata=told("how many special cases were found"))
    warnings: tuple[str, ...] = field(metadata=told("warnings of the check, in its words"))
    notes: tuple[str, ...] = field(metadata=told("notes of the study, in its words"))
    materiality: str = field(metadata=told("materiality level in the study's words; empty when not stated"))


def scope(reading: Reading) -> Scope:
    """Section 3 from the results."""
    return Scope(
        control=_control(reading), opening=_opening(reading), defects=_defects(reading), defects_text=defects(reading),
        warnings=reading.results.warnings, notes=reading.study.texts.notes,
        materiality=reading.study.texts.materiality.strip(),
    )  # fmt: skip


def defects(reading: Reading) -> str:
    """How many special cases were found, in words."""
    found = int((reading.results.special_cases["count"] > 0).sum()) if len(reading.results.special_cases) else 0
    kinds = count_of(found, "kind of special case", "kinds of special case")
    warned = count_of(len(reading.results.warnings), "warning")
    return f"Found in the data: {kinds} and {warned}."


def _control(reading: Reading) -> Table:
    rows = []
    for row in reading.results.control.to_dict("records"):
        item, segment = str(row["item"]), str(row["segment"])
        make = cells.count if item == "lots_count" else cells.cents
        key = f"{item}/{segment}"
        rows.append(Row(
            name=f"{ITEMS.get(item, item)}, {reading.segment(segment)}", own_words=True,
            cells=tuple(make(row[column], f"control.{column}/{key}", "M-31") for column in CONTROL),
        ))  # fmt: skip
    currency = reading.study.currency
    return Table(
        number="3.1", caption="Control totals",
        basis=f"{currency} with hundredths; counts whole. Read = sum over the tables of the study, less ledger = "
              "difference. A difference of money above 0.005 stops the run.",
        row_head="Item", rows=tuple(rows),
        columns=(Column(name="Ledger", unit=currency), Column(name="Read", unit=currency),
                 Column(name="Difference", unit=currency)),
    )  # fmt: skip


def _opening(reading: Reading) -> Table:
    rows = [_opening_row(reading, name, {k: float(v) for k, v in _numbers(reading.opening[name]).items()})
            for name in reading.segments]  # fmt: skip
    if len(reading.segments) > 1:
        sums = {
            column: total(_numbers(reading.opening[name])[column] for name in reading.segments) for column, _ in OPENING
        }
        rows = list(rows_with_total(rows, _opening_row(reading, ALL_SEGMENTS, sums)))
    return Table(
        number="3.2", caption="Starting assets against reserves tested, by segment",
        basis=f"{reading.money.unit} at the valuation date. Starting assets = statement value + accrued interest + "
              "cash (M-31); surplus by M-1. Interest maintenance and asset valuation reserves are nil in this "
              "version.",
        row_head="Segment", columns=tuple(Column(name=head, adds=True) for _, head in OPENING), rows=tuple(rows),
    )  # fmt: skip


def _numbers(row: dict[str, Any]) -> dict[str, float]:
    numbers = {column: float(row[column]) for column, _ in OPENING if column != "assets"}
    numbers["assets"] = total((row["statement_start"], row["accrued"], row["cash"]))
    return numbers


def _opening_row(reading: Reading, name: str, numbers: dict[str, float]) -> Row:
    formulas = {"statement_start": "M-14", "accrued": "M-17", "assets": "M-31", "statement_surplus": "M-1"}
    made: tuple[Cell, ...] = tuple(
        reading.cell(numbers[column], f"balance.{column}/{name}/month 0", formulas.get(column, ""))
        for column, _ in OPENING
    )
    everything = name == ALL_SEGMENTS
    return Row(
        name="Total" if everything else reading.segment(name), own_words=not everything, total=everything, cells=made
    )


def _defects(reading: Reading) -> Table:
    rows = []
    for row in reading.results.special_cases.to_dict("records"):
        key = f"special_cases/{row['case']}"
        rows.append(Row(name=str(row["case"]), cells=(
            cells.count(row["count"], f"{key}/count"), reading.cell(row["par"], f"{key}/par", "M-31"),
            cells.said(str(row["names"]), f"{key}/names"), cells.word(str(row["treatment"]), f"{key}/treatment"),
        )))  # fmt: skip
    if not rows:
        quiet = cells.quiet("none", "special_cases/none")
        zero = cells.count(0, "special_cases/none/count"), reading.cell(0.0, "special_cases/none/par")
        rows = [Row(name="No case found", cells=(*zero, quiet, quiet))]
    return Table(
        number="3.3", caption="Special cases and how each was treated",
        basis=f"Par in {reading.money.unit} at the valuation date; at most {fixed(20)} securities are named.",
        row_head="Case", rows=tuple(rows),
        columns=(Column(name="Securities"), Column(name="Par"), Column(name="Which", words=True),
                 Column(name="Treatment", words=True)),
    )  # fmt: skip
