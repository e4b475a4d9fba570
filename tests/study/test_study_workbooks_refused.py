"""Workbooks: cells that read as empty but are not, and sheets that ask for more memory than they have cells."""

from __future__ import annotations

import io
import zipfile

import pytest

from projector.study.errors import StudyRefused, StudyTooLarge
from projector.study.files import InputFile, Limits
from projector.study.sheetscan import column_letters, column_number
from projector.study.workbook import read_sheet

_HEAD = (
    '<row r="1"><c r="A1" t="inlineStr"><is><t>lot_id</t></is></c><c r="B1" t="inlineStr"><is><t>par</t></is></c></row>'
)
_RELATION = "http://schemas.openxmlformats.org/officeDocument/2006/relationships"
_WORKBOOK = (
    f'<workbook xmlns="http://schemas.openxmlformats.org/spreadsheetml/2006/main" xmlns:r="{_RELATION}"><sheets>'
    '<sheet name="lots" sheetId="1" r:id="rId1"/><sheet name="notes" sheetId="2" r:id="rId2"/></sheets></workbook>'
)
_RELATIONS = (
    '<Relationships xmlns="http://schemas.openxmlformats.org/package/2006/relationships">'
    f'<Relationship Id="rId1" Type="{_RELATION}/worksheet" Target="{{part}}"/>'
    f'<Relationship Id="rId2" Type="{_RELATION}/worksheet" Target="worksheets/sheet2.xml"/>'
    f'<Relationship Id="rId3" Type="{_RELATION}/sharedStrings" Target="sharedStrings.xml"/></Relationships>'
)


_ROOT = (
    '<Relationships xmlns="http://schemas.openxmlformats.org/package/2006/relationships">'
    f'<Relationship Id="rId1" Type="{_RELATION}/officeDocument" Target="xl/workbook.xml"/></Relationships>'
)


def _workbook(rows: str, *, other: str = "", strings: str = "", part: str = "worksheets/sheet1.xml") -> InputFile:
    """A workbook with the rows in the sheet lots, another sheet, and shared strings."""
    target = io.BytesIO()
    with zipfile.ZipFile(target, "w", zipfile.ZIP_DEFLATED) as archive:
        archive.writestr("_rels/.rels", _ROOT)
        archive.writestr("xl/workbook.xml", _WORKBOOK)
        archive.writestr("xl/_rels/workbook.xml.rels", _RELATIONS.format(part=part))
        for name, body in ((f"xl/{part}", rows), ("xl/worksheets/sheet2.xml", other)):
            archive.writestr(name, f"<worksheet><sheetData>{body}</sheetData><x>7</x></worksheet>")
        archive.writestr("xl/sharedStrings.xml", f"<sst>{strings}</sst>")
    return InputFile(name="lots.xlsx", content=target.getvalue())


def _faults(file: InputFile) -> list[tuple[str, int | None, str | None]]:
    with pytest.raises(StudyRefused) as refusal:
        read_sheet(file, "lots", Limits())
    return [(error.code, error.row, error.column) for error in refusal.value.errors]


def test_limit_an_error_cell_reads_as_a_sentence() -> None:
    file = _workbook(_HEAD + '<row r="2"><c r="A2"><v>1</v></c><c r="B2" t="e"><f>C9</f><v>#REF!</v></c></row>')
    with pytest.raises(StudyRefused) as refusal:
        read_sheet(file, "lots", Limits())
    assert str(refusal.value) == (
        "E320 lots.xlsx, sheet lots, row 2, column par: the cell holds the spreadsheet error #REF!; "
        "correct the formula or what it refers to, or write the value itself."
    )


@pytest.mark.parametrize("value", ["", "<v/>", "<v></v>", "<v> </v>"])
def test_limit_a_formula_without_stored_value_is_refused(value: str) -> None:
    file = _workbook(f'{_HEAD}<row r="2"><c r="A2"><v>1</v></c><c r="B2"><f>A2</f>{value}</c></row>')
    with pytest.raises(StudyRefused) as refusal:
        read_sheet(file, "lots", Limits())
    assert str(refusal.value) == (
        "E321 lots.xlsx, sheet lots, row 2, column par: the formula has no stored value; "
        "open and save it in the spreadsheet program."
    )


def test_limit_hollow_cells_beside_the_header_have_the_letters_of_their_column() -> None:
    rows = '<row r="3"><c r="AB3" t="e"><v>#N/A</v></c></row><row><c><f>A1</f></c></row>'
    assert _faults(_workbook(_HEAD + rows)) == [("E320", 3, "AB"), ("E321", 4, "lot_id")]


def test_order_formulas_with_a_value_and_errors_of_other_sheets_are_read() -> None:
    rows = '<row r="2"><c r="A2" t="str"><f>B9</f><v></v></c><c r="B2"><f>1+1</f><v>2</v></c></row>'
    error = '<row r="1"><c r="A1" t="e"><v>#REF!</v></c></row>'
    _, lines = read_sheet(_workbook(_HEAD + rows, other=error), "lots", Limits())
    assert lines == [["lot_id", "par"], ["", "2"]]
    assert _faults(_workbook(_HEAD + error.replace("1", "5"), part="elsewhere/lots.xml")) == [("E320", 5, "lot_id")]


def test_limit_many_error_cells_are_counted() -> None:
    rows = "".join(f'<row r="{at}"><c r="A{at}" t="e"><v>#N/A</v></c></row>' for at in range(2, 5002))
    with pytest.raises(StudyRefused) as refusal:
        read_sheet(_workbook(_HEAD + rows), "lots", Limits())
    assert len(refusal.value.errors) == 20
    assert str(refusal.value).endswith("E320 lots.xlsx, column lot_id: 4980 more of the same.")


def _too_large(file: InputFile, code: str, limits: Limits) -> None:
    with pytest.raises(StudyTooLarge) as refusal:
        read_sheet(file, "lots", limits)
    assert [error.code for error in refusal.value.errors] == [code]


def test_limit_rows_and_cells_without_a_name_are_counted_too() -> None:
    limits = Limits(unpacked_ratio=1000)
    _too_large(_workbook("<row>" + "<c/>" * 201 + "</row>"), "E111", limits)
    wide = "<row>" + "<c/>" * 199 + "<c><v>1</v></c></row>" + "<row/>" * 200_000 + "<row><c><v>1</v></c></row>"
    _too_large(_workbook(wide), "E111", limits)
    _too_large(_workbook(wide, part="elsewhere/lots.xml"), "E111", limits)
    _too_large(_workbook("<row r='1'>" + '<c r="A1"/>' * 30 + "</row>"), "E111", Limits(sheet_cells=29))


def test_limit_a_text_no_cell_could_hold_is_refused() -> None:
    _too_large(_workbook(_HEAD, strings=f"<si><t>{'x' * 32_768}</t></si>"), "E110", Limits())


def test_limit_a_long_text_that_many_cells_repeat_is_refused() -> None:
    strings = f"<si><t>{'x' * 32_000}</t></si>"
    rows = "".join(f'<row r="{at}"><c r="A{at}" t="s"><v>0</v></c></row>' for at in range(2, 50))
    _too_large(_workbook(_HEAD + rows, strings=strings), "E110", Limits(unpacked_bytes=1_000_000))
    assert len(read_sheet(_workbook(_HEAD + rows, strings=strings), "lots", Limits())[1]) == 49


@pytest.mark.parametrize("rows", ['<row r="x"/>', '<row r="1"><c r="1A"/></row>', "<row>"])
def test_limit_a_sheet_that_cannot_be_followed_is_refused(rows: str) -> None:
    assert _faults(_workbook(rows)) == [("E108", None, None)]


def test_known_letters_of_columns() -> None:
    assert [column_letters(number) for number in (1, 26, 27, 702, 703)] == ["A", "Z", "AA", "ZZ", "AAA"]
    assert [column_number(letters) for letters in ("A", "z", "AA", "ZZ", "AAA")] == [1, 26, 27, 702, 703]
