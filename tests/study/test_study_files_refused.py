"""Files: what leaves the folder, is no file, cannot be read or is too large, before anything is parsed."""

from __future__ import annotations

import io
import os
import zipfile
from pathlib import Path
from typing import Any

import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from projector.study.errors import StudyRefused, StudyTooLarge
from projector.study.files import Limits, resolve
from projector.study.reading import read_study


def test_limit_a_missing_file_is_named(small: Any, faults: Any) -> None:
    small.replace('"lots.csv"', '"lots_2022.csv"')
    assert [error.sentence() for error in faults(small)] == [
        "E102 lots_2022.csv: this file is not in the study folder; add it or correct its name."
    ]


def test_limit_a_missing_folder_and_a_missing_study_file(tmp_path: Path) -> None:
    for folder, file in ((tmp_path / "none", f"'{tmp_path / 'none'}'"), (tmp_path, "study.toml")):
        with pytest.raises(StudyRefused) as refusal:
            read_study(folder)
        (error,) = refusal.value.errors
        assert (error.code, error.file[:40]) == ("E101", file[:40])


@pytest.mark.parametrize(
    ("name", "code"),
    [
        ("../lots.csv", "E103"),
        ("a/../../lots.csv", "E103"),
        ("/etc/passwd", "E103"),
        ("~/lots.csv", "E103"),
        ("C:/lots.csv", "E103"),
        ("..\\\\lots.csv", "E106"),
        ("lots\\u0000.csv", "E106"),
        ("lots\\n.csv", "E106"),
        ("", "E106"),
        ("lots.xls", "E107"),
        ("lots", "E105"),
        ("lots.csv/x.csv", "E108"),
    ],
)
def test_limit_names_that_are_no_file_of_the_study(small: Any, only_fault: Any, name: str, code: str) -> None:
    folder = small.write()
    (folder / "lots.xls").write_text("x")
    (folder / "lots").mkdir()
    assert only_fault(small.replace('"lots.csv"', f'"{name}"')).code == code


def test_limit_a_path_out_of_the_folder_reads_as_a_sentence(small: Any, only_fault: Any) -> None:
    assert only_fault(small.replace('"lots.csv"', '"../lots.csv"')).sentence() == (
        "E103 study.toml: this name leads out of the study folder (found '../lots.csv'); put the file into the study "
        "folder and name it from there, without / at the start and without ..."
    )


def test_limit_links_stay_inside_the_folder(small: Any, only_fault: Any) -> None:
    folder = small.write()
    outside = folder.parent / "outside.csv"
    outside.write_text((folder / "lots.csv").read_text())
    (folder / "inside_link.csv").symlink_to(folder / "lots.csv")
    (folder / "link.csv").symlink_to(outside)
    small.replace('lots = "lots.csv"', 'lots = "inside_link.csv"')
    read_study(small.write())
    small.replace('"inside_link.csv"', '"link.csv"')
    assert only_fault(small).code == "E104"


def test_limit_loops_of_links_and_dangling_links(tmp_path: Path) -> None:
    (tmp_path / "a.csv").symlink_to(tmp_path / "b.csv")
    (tmp_path / "b.csv").symlink_to(tmp_path / "a.csv")
    (tmp_path / "c.csv").symlink_to(tmp_path / "gone.csv")
    for name, code in (("a.csv", "E108"), ("c.csv", "E102")):
        with pytest.raises(StudyRefused) as refusal:
            resolve(tmp_path, name)
        assert refusal.value.errors[0].code == code


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="this system has no named pipes")
def test_limit_a_pipe_is_refused_without_waiting_for_it(small: Any, only_fault: Any) -> None:
    folder = small.write()
    os.mkfifo(folder / "pipe.csv")
    assert only_fault(small.replace('"lots.csv"', '"pipe.csv"')).code == "E105"


def _too_large(folder: Path, limits: Limits) -> StudyTooLarge:
    with pytest.raises(StudyTooLarge) as refusal:
        read_study(folder, limits)
    assert refusal.value.exit_code == 4
    return refusal.value


def test_limit_a_file_that_is_too_large_shows_the_arithmetic(small: Any) -> None:
    folder = small.write()
    size = (folder / "liability_streams.csv").stat().st_size
    (error,) = _too_large(folder, Limits(file_bytes=size - 1)).errors
    assert error.sentence() == (
        f"E109 liability_streams.csv: bytes in this file: {size:,} against a limit of {size - 1:,}, "
        "1.0 times too many; split or shorten it."
    )


def test_limit_a_table_with_too_many_rows_is_refused(small: Any) -> None:
    (error,) = _too_large(small.write(), Limits(rows=48)).errors
    assert (error.code, error.file) == ("E111", "liability_streams.csv")
    assert error.problem.startswith("rows in this table: 49 against a limit of 48")


def test_limit_a_study_file_that_is_too_large_is_refused(small: Any) -> None:
    assert _too_large(small.write(), Limits(study_bytes=100)).errors[0].code == "E109"


def _workbook(rows: list[dict[str, Any]], sheets: tuple[str, ...] = ("Sheet1",)) -> bytes:
    target = io.BytesIO()
    with pd.ExcelWriter(target, engine="xlsxwriter") as writer:
        for sheet in sheets:
            pd.DataFrame(rows).to_excel(writer, sheet_name=sheet, index=False)
    return target.getvalue()


def _as_workbook(small: Any, content: bytes) -> Any:
    folder = small.write()
    (folder / "lots.xlsx").write_bytes(content)
    return small.replace('"lots.csv"', '"lots.xlsx"')


def test_limit_errors_of_a_workbook_have_the_sheet_and_its_row(small: Any, faults: Any) -> None:
    rows = [{**row, "par": float(row["par"])} for row in small.tables["lots"]]
    rows[1]["par"], rows[3]["segment"] = "half", "life"
    (error,) = faults(_as_workbook(small, _workbook(rows)))
    assert (error.code, error.file, error.sheet, error.row, error.column) == ("E307", "lots.xlsx", "Sheet1", 3, "par")
    rows[1]["par"] = 500_000
    errors = [error for error in faults(_as_workbook(small_again(small), _workbook(rows))) if error.code == "E402"]
    assert errors[0].sentence().startswith("E402 lots.xlsx, sheet Sheet1, row 5, column segment: ")


def small_again(small: Any) -> Any:
    """The same study with its lots named as CSV again."""
    return small.replace('"lots.xlsx"', '"lots.csv"')


def test_limit_several_sheets_need_one_of_the_tables_name(small: Any, only_fault: Any) -> None:
    content = _workbook(small.tables["lots"], ("first", "second"))
    assert only_fault(_as_workbook(small, content)).code == "E112"


def _bomb(member: str, content: bytes) -> bytes:
    target = io.BytesIO()
    with zipfile.ZipFile(target, "w", zipfile.ZIP_DEFLATED) as archive:
        archive.writestr("xl/workbook.xml", "<workbook/>")
        archive.writestr(member, content)
    return target.getvalue()


def test_limit_a_workbook_that_unpacks_to_too_much_is_refused(small: Any) -> None:
    _as_workbook(small, _bomb("xl/media/zeros.bin", b"\0" * 50_000_000))
    (error,) = _too_large(small.write(), Limits()).errors
    assert (error.code, error.file) == ("E110", "lots.xlsx")
    assert "50,000,011 against a limit of 16,777,216" in error.problem


def test_limit_a_sheet_that_claims_all_cells_is_refused_before_it_is_opened(small: Any) -> None:
    for cell, code in ((b"XFD1048576", "E111"), (b"CV1048576", "E111")):
        sheet = b'<sheetData><row r="1"><c r="A1"/></row><row r="9"><c t="n" r="' + cell + b'"/></row></sheetData>'
        _as_workbook(small, _bomb("xl/worksheets/sheet1.xml", sheet))
        (error,) = _too_large(small.write(), Limits()).errors
        assert (error.code, error.file) == (code, "lots.xlsx")
        small_again(small)


@pytest.mark.parametrize("content", [b"", b"PK\x03\x04 not a workbook", b"lot_id,par\n", _bomb("xl/a.xml", b"<a/>")])
def test_limit_what_is_no_workbook_is_refused(small: Any, only_fault: Any, content: bytes) -> None:
    error = only_fault(_as_workbook(small, content))
    assert (error.code, error.file) == ("E108", "lots.xlsx")


def _parquet(small: Any, content: bytes) -> Any:
    folder = small.write()
    (folder / "lots.parquet").write_bytes(content)
    return small.replace('"lots.csv"', '"lots.parquet"')


def test_limit_what_is_no_parquet_file_is_refused(small: Any, only_fault: Any) -> None:
    good = io.BytesIO()
    pd.DataFrame(small.tables["lots"]).to_parquet(good)
    for content in (b"", b"PAR1", good.getvalue()[:-20], b"PAR1" + b"\0" * 100 + b"PAR1"):
        error = only_fault(_parquet(small, content))
        assert (error.code, error.file) == ("E108", "lots.parquet")
        small.replace('"lots.parquet"', '"lots.csv"')


def test_limit_numbers_of_a_parquet_file_are_judged_with_their_row(small: Any, faults: Any) -> None:
    frame = pd.DataFrame(small.tables["lots"]).astype({"par": float, "book_value": float, "tax_basis": float})
    frame.loc[0, "par"], frame.loc[1, "book_value"], frame.loc[3, "tax_basis"] = float("inf"), -5.0, 0.0
    content = io.BytesIO()
    frame.to_parquet(content)
    found = [
        (error.code, error.row, error.column, error.value) for error in faults(_parquet(small, content.getvalue()))
    ]
    assert found == [("E308", 2, "par", "inf"), ("E309", 3, "book_value", "-5"), ("E309", 5, "tax_basis", "0")]


def test_limit_rows_of_a_parquet_file_are_counted_before_they_are_read(small: Any) -> None:
    content = io.BytesIO()
    pd.DataFrame(small.tables["lots"]).to_parquet(content)
    assert pq.ParquetFile(io.BytesIO(content.getvalue())).metadata.num_rows == 4
    _parquet(small, content.getvalue())
    errors = _too_large(small.write(), Limits(rows=3)).errors
    assert "lots.parquet" in {error.file for error in errors}


def test_limit_csv_that_is_not_utf8_or_not_csv_is_located(small: Any, only_fault: Any) -> None:
    folder = small.write()
    small.written_by_hand.add("yield_curve")
    for content, row in ((b"tenor_months,rate\n3,0.04\n12,\xff\n", 3), (b'tenor_months,rate\n3,"0.04\n', 3)):
        (folder / "yield_curve.csv").write_bytes(content)
        error = only_fault(small)
        assert (error.code, error.file) == ("E108", "yield_curve.csv")
        assert error.row in (row, row - 1)


def _arrow(small: Any, **columns: Any) -> Any:
    """The lots as a Parquet file with columns replaced."""
    table = pa.table(pd.DataFrame(small.tables["lots"]).astype({"par": float, "book_value": float}).to_dict("list"))
    for name, values in columns.items():
        table = table.set_column(table.column_names.index(name), name, values)
    content = io.BytesIO()
    pq.write_table(table, content)
    return _parquet(small, content.getvalue())


def test_limit_a_parquet_time_outside_the_calendar_is_located(small: Any, only_fault: Any) -> None:
    frame = pd.DataFrame(small.tables["securities"])
    for kind, far in ((pa.timestamp("s"), 10**12), (pa.timestamp("us"), -(10**18)), (pa.date32(), 10**7)):
        day = 20_254 if pa.types.is_date(kind) else 20_254 * 86_400 * (10**6 if kind.unit == "us" else 1)
        table = pa.table(frame.to_dict("list"))
        place = table.column_names.index("maturity_date")
        table = table.set_column(place, "maturity_date", pa.array([day, day, far], kind))
        pq.write_table(table, small.write() / "securities.parquet")
        error = only_fault(small.replace('"securities.csv"', '"securities.parquet"'))
        assert (error.code, error.row, error.column) == ("E311", 4, "maturity_date")
        small.replace('"securities.parquet"', '"securities.csv"')


def test_limit_bytes_of_a_parquet_file_are_text_or_refused(small: Any, only_fault: Any) -> None:
    names = [b"L1", b"L2", "L\u00e93".encode(), b"L4"]
    for values in (
        pa.array(names),
        pa.array(names, pa.large_binary()),
        pa.array(names).dictionary_encode(),
        pa.array([b"A1", b"A2", b"A3", b"A4"], pa.binary(2)),
    ):
        study, _ = read_study(_arrow(small, lot_id=values).write())
        assert sorted(study.tables.lots["lot_id"])[0] in ("L1", "A1")
        small.replace('"lots.parquet"', '"lots.csv"')
    error = only_fault(_arrow(small, lot_id=pa.array([b"L1", b"L2", b"\xff", b"L4"])))
    assert error.sentence() == (
        "E322 lots.parquet, column lot_id: the column holds bytes that are not UTF-8 text; "
        "write it as a column of texts, numbers, dates or flags."
    )


@pytest.mark.parametrize(
    ("values", "kind"),
    [
        ([[1], [2], [3], [4]], pa.list_(pa.int64())),
        ([{"a": 1}] * 4, pa.struct([("a", pa.int64())])),
        ([1, 2, 3, 4], pa.duration("s")),
        ([1, 2, 3, 4], pa.time32("s")),
    ],
)
def test_limit_parquet_columns_that_are_no_cells_are_refused(
    small: Any, only_fault: Any, values: list[Any], kind: Any
) -> None:
    error = only_fault(_arrow(small, lot_id=pa.array(values, kind)))
    assert (error.code, error.file, error.column) == ("E322", "lots.parquet", "lot_id")
    assert error.problem.startswith("the column is of the type ")


def test_limit_a_number_that_is_none_is_no_name_either(small: Any, faults: Any) -> None:
    for values in ([1.0, 2.0, float("nan"), float("inf")], [1.0, None, float("nan"), float("inf")]):
        found = faults(_arrow(small, lot_id=pa.array(values)))
        assert [(error.code, error.row) for error in found if error.code == "E308"] == [("E308", 4), ("E308", 5)]
        small.replace('"lots.parquet"', '"lots.csv"')
