"""The workbook: true numbers, the page's tables, text that is only text."""

import io

import pytest
from python_calamine import CalamineWorkbook
from synthetic_results import Options, build

from projector.report.workbook import tables_to_bytes, workbook_bytes, write_workbook


@pytest.fixture(scope="module")
def book(context, results):
    return CalamineWorkbook.from_filelike(io.BytesIO(tables_to_bytes(context, results)))


def test_known_one_sheet_for_each_table(book, context):
    assert book.sheet_names == ["Read me", *(table.number for table in context.tables())]


def test_known_figures_are_full_values_in_the_unit_of_the_page(book, results):
    rows = book.get_sheet_by_name("1.1").to_python()
    (line,) = [row for row in rows if row[1] == "S7 Pop down"]
    measures = results.measures.set_index(["scenario", "segment"]).loc[("S7", "all")]
    assert line[0] == 7
    assert line[2] == pytest.approx(measures["pv_ending_earned_rate"] / 1e6, rel=1e-14)
    assert line[7] == "not met"


def test_known_yields_are_in_percent_as_the_header_says(book, results):
    rows = book.get_sheet_by_name("9.5").to_python()
    (line,) = [row for row in rows if row[1] == "S1 Level"]
    assert line[5] == pytest.approx(5.1)


def test_limit_text_of_a_study_is_never_a_formula_or_a_link(tmp_path):
    results = build(Options(months=12, segments=1, scenarios=1))
    results.securities.loc[0, "issuer"] = "=1+1"
    results.securities.loc[1, "issuer"] = "https://example.org"
    write_workbook(results, tmp_path / "tables.xlsx")
    sheet = CalamineWorkbook.from_path(str(tmp_path / "tables.xlsx")).get_sheet_by_name("A.2")
    cells = {cell for row in sheet.to_python() for cell in row}
    assert {"=1+1", "https://example.org"} <= cells


def test_limit_hostile_text_gives_a_readable_workbook():
    results = build(Options(months=12, hostile=True))
    book = CalamineWorkbook.from_filelike(io.BytesIO(workbook_bytes(results)))
    assert "Meridian" in str(book.get_sheet_by_name("Read me").to_python()[1][1])
