"""Section 9, tables by scenario: surplus, gaps and returns, cash; the aggregate first, then each segment."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

from projector.report import cells
from projector.report.context.reading import Reading
from projector.report.parts import Cell, Column, Row, Table
from projector.run.results import ALL_SEGMENTS


@dataclass(frozen=True)
class Measure:
    """One column of a table of measures: which figure, by which formula, made how."""

    column: str
    head: str
    formula: str
    make: str  # money, rate, year, count, month, status, met
    unit: str = ""


SURPLUS = (
    Measure("pv_ending_earned_rate", "PV, net earned rate", "M-3", "money"),
    Measure("pv_ending_one_month_treasury", "PV, one-month Treasury", "M-4", "money"),
    Measure("ending_statement_surplus", "Ending statement", "M-1", "money"),
    Measure("ending_market_surplus", "Ending market", "M-2", "money"),
    Measure("lowest_statement_surplus", "Lowest statement", "M-5", "money"),
    Measure("lowest_statement_year", "In year", "M-5", "year"),
    Measure("lowest_market_surplus", "Lowest market", "M-5", "money"),
    Measure("lowest_market_year", "In year", "M-5", "year"),
    Measure("criterion_value", "Criterion value", "M-6", "money"),
    Measure("criterion_met", "Criterion", "", "met"),
)
GAPS = (
    Measure("npv_gap", "NPV gap", "M-7", "money"),
    Measure("npv_close_out_assets", "of which left, assets", "M-7", "money"),
    Measure("npv_close_out_liabilities", "of which left, liabilities", "M-7", "money"),
    Measure("irr_assets", "IRR of assets", "M-8", "status", "%"),
    Measure("irr_assets_on_statement_value", "On statement value", "M-8", "rate", "%"),
    Measure("cost_rate", "Cost rate", "M-9", "status", "%"),
    Measure("irr_gap", "IRR gap", "M-10", "rate", "points"),
    Measure("horizon_return", "Horizon return", "M-11", "rate", "%"),
)
CASH = (
    Measure("years_negative", "Year ends below zero", "M-5", "count"),
    Measure("peak_borrowing", "Largest borrowing", "M-29", "money"),
    Measure("par_sold", "Par sold", "M-31", "money"),
    Measure("sale_gain", "Gain on sales", "M-31", "money"),
    Measure("months_with_borrowing", "Months borrowing", "M-29", "count"),
    Measure("first_shortfall_month", "First shortfall", "", "month"),
    Measure("largest_shortfall", "Largest shortfall", "M-29", "money"),
)
STATUS = {"none": "no root", "several": "several roots"}


def tables(reading: Reading) -> tuple[tuple[Table, Table, Table], tuple[Table, ...]]:
    """Tables 9.1, 9.5, 9.6, and those of the segments that are too long for the text, for the appendix."""
    pairs = [(scenario, segment) for segment in reading.segment_order for scenario in reading.scenarios]
    whole = [(scenario, ALL_SEGMENTS) for scenario in reading.scenarios]
    if not reading.segments_apart:
        return _three(reading, ("9.1", "9.5", "9.6"), pairs), ()
    of_segments = _three(reading, ("A.4", "A.5", "A.6"), pairs[len(whole) :])
    return _three(reading, ("9.1", "9.5", "9.6"), whole), of_segments


def _three(reading: Reading, numbers: tuple[str, str, str], pairs: list[tuple[str, str]]) -> tuple[Table, Table, Table]:
    unit = reading.money.unit
    return (
        _table(reading, numbers[0], "Surplus by scenario and segment", SURPLUS, pairs,
               f"{unit}, before tax. PV = ending statement surplus discounted; lows are undiscounted, at a year end, "
               "year 1 and later.",
               "market values are not calculated for the line", 10),
        _table(reading, numbers[1], "Gaps and returns by scenario and segment", GAPS, pairs,
               f"{unit}; rates annual effective in %, IRR gap in percentage points. Run-off of the starting holdings, "
               "no sale and no purchase, except the horizon return. What is left at the horizon is in the gap (M-7).",
               "there is a gap only where each side has one root", 8),
        _table(reading, numbers[2], "Cash, sales and shortfall by scenario and segment", CASH, pairs,
               f"{unit}; a gain is proceeds less statement value, positive = gain. Largest = at a month end.",
               "the results hold no such figure for the line", 8),
    )  # fmt: skip


def _table(
    reading: Reading, number: str, caption: str, measures: tuple[Measure, ...], pairs: list[tuple[str, str]],
    basis: str, why: str, most: int,
) -> Table:  # fmt: skip
    several = len(reading.segments) > 1
    rows = []
    for scenario, segment in pairs:
        name = reading.scenario(scenario)
        if several and segment != ALL_SEGMENTS:
            name = f"{scenario}, {reading.segment(segment)}"
        row = reading.measures(scenario, segment)
        made = tuple(_cell(reading, m, row, f"measures.{m.column}/{segment}/{scenario}") for m in measures)
        rows.append(Row(name=name, own_words=True, cells=made))
    columns = tuple(Column(name=m.head, unit=m.unit, words=m.make in ("met", "month")) for m in measures)
    head = "Scenario, segment" if several else "Scenario"
    return Table(
        number=number, caption=caption, basis=basis, row_head=head, columns=columns, rows=tuple(rows), why_missing=why,
        most_columns=most,
    )  # fmt: skip


def _cell(reading: Reading, measure: Measure, row: dict[str, Any], key: str) -> Cell:
    value = row[measure.column]
    if measure.make == "status":
        status = str(row[f"{measure.column}_status"])
        return (
            cells.word(STATUS[status], key)
            if status in STATUS
            else cells.yearly_rate(float(value), key, measure.formula)
        )
    simple: dict[str, Callable[[], Cell]] = {
        "money": lambda: reading.cell(float(value), key, measure.formula),
        "rate": lambda: cells.yearly_rate(float(value), key, measure.formula),
        "year": lambda: cells.year(value, key, measure.formula) if value == value else cells.quiet("none", key),
        "count": lambda: cells.count(value, key, measure.formula),
        "month": lambda: cells.word(reading.month(value), key) if value >= 0 else cells.quiet("none", key),
        "met": lambda: cells.word("met" if value else "not met", key),
    }
    return simple[measure.make]()
