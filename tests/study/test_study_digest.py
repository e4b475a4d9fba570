"""The input digest: what is the same study has the same digest in every format and order, and nothing else has."""

from __future__ import annotations

import random
from pathlib import Path
from typing import Any

import pandas as pd
import pytest

from projector.study.reading import read_study


def _digest(folder: Path) -> str:
    return read_study(folder)[0].input_digest


def _typed(small: Any, rows: list[dict[str, Any]]) -> pd.DataFrame:
    import small_study

    return small_study.typed_frame(rows)


@pytest.mark.parametrize("suffix", ["parquet", "xlsx"])
def test_order_the_file_format_does_not_enter(small: Any, suffix: str) -> None:
    expected = _digest(small.write())
    for name, rows in small.tables.items():
        frame, path = _typed(small, rows), small.folder / f"{name}.{suffix}"
        frame.to_parquet(path) if suffix == "parquet" else frame.to_excel(path, index=False, engine="xlsxwriter")
        small.replace(f'"{name}.csv"', f'"{name}.{suffix}"')
    assert _digest(small.write()) == expected


def test_order_one_workbook_with_a_sheet_for_each_table(small: Any) -> None:
    expected = _digest(small.write())
    with pd.ExcelWriter(small.folder / "book.xlsx", engine="xlsxwriter") as book:
        for name, rows in small.tables.items():
            _typed(small, rows).to_excel(book, sheet_name=name, index=False)
            small.replace(f'"{name}.csv"', '"book.xlsx"')
    study, _ = read_study(small.write())
    assert study.input_digest == expected
    assert [file.name for file in study.files] == ["study.toml", "book.xlsx"]


def test_order_texts_in_parquet_give_the_same_digest(small: Any) -> None:
    expected = _digest(small.write())
    pd.DataFrame(small.tables["securities"]).to_parquet(small.folder / "texts.parquet")
    assert _digest(small.replace('"securities.csv"', '"texts.parquet"').write()) == expected


def test_order_of_rows_and_columns_does_not_enter(small: Any) -> None:
    expected = _digest(small.write())
    chance = random.Random(7)
    for name, rows in small.tables.items():
        if name != "call_rights":  # these must stand in the order of their dates
            chance.shuffle(rows)
        small.tables[name] = [dict(reversed(row.items())) for row in rows]
    assert _digest(small.write()) == expected


def test_order_comments_line_ends_and_spelling_of_numbers_do_not_enter(small: Any) -> None:
    expected = _digest(small.write())
    small.replace("# comments do not count", "# another comment").replace("cash = 1_000.5", "cash = 1000.50")
    small.replace("concession_bp = 10", "concession_bp = 10.0").cell("lots", 2, "par", "1e6")
    folder = small.write()
    for path in folder.iterdir():
        path.write_bytes(b"\xef\xbb\xbf" + path.read_bytes().replace(b"\r\n", b"\n").replace(b"\n", b"\r\n"))
    assert _digest(folder) == expected


def test_order_names_of_files_and_unread_columns_do_not_enter(small: Any) -> None:
    expected = _digest(small.write())
    (small.folder / "sub").mkdir()
    (small.folder / "lots.csv").rename(small.folder / "sub" / "holdings.csv")
    small.tables.pop("lots")
    for row in small.tables["securities"]:
        row["put_date"] = "none"
    assert _digest(small.replace('"lots.csv"', '"sub/holdings.csv"').write()) == expected


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ('name = "Small study"', 'name = "Another study"'),
        ('notes = ["Invented data."]', 'notes = ["Invented data.", "More."]'),
        ("mean_reversion = 0.03", "mean_reversion = 0.030000000000000002"),
        ('within_year = "linear"', 'within_year = "year_end_steps"'),
        ("[texts]", '[numerics]\ninterpolation = "monotone"\n[texts]'),
    ],
)
def test_limit_a_changed_choice_or_text_changes_the_digest(small: Any, old: str, new: str) -> None:
    expected = _digest(small.write())
    assert _digest(small.replace(old, new).write()) != expected


def test_limit_a_changed_cell_changes_the_digest(small: Any) -> None:
    seen = {_digest(small.write())}
    for change in (
        ("securities", 2, "issuer", "Issuer Inc."),
        ("securities", 2, "clean_price", "101.26"),
        ("securities", 4, "end_of_month", "false"),
        ("lots", 5, "tax_basis", "100000.01"),
        ("call_rights", 3, "last_date", "2030-05-30"),
        ("liability_streams", 9, "amount", "70000.1250001"),
        ("yield_curve", 2, "tenor_months", "6"),
    ):
        before = small.tables[change[0]][change[1] - 2][change[2]]
        if change[0] == "securities" and change[2] == "end_of_month":
            small.cell("securities", 4, "first_coupon_date", "")
        seen.add(_digest(small.cell(*change).write()))
        small.cell(*change[:3], before)
    assert len(seen) == 8


def test_pinned_file_digests_are_those_of_the_bytes(small: Any) -> None:
    import hashlib

    study, _ = read_study(small.write())
    assert len(study.files) == 9
    for file in study.files:
        content = (small.folder / file.name).read_bytes()
        assert (file.sha256, file.bytes) == (hashlib.sha256(content).hexdigest(), len(content))


def test_pinned_types_of_the_tables(small: Any) -> None:
    study, warnings = read_study(small.write())
    assert warnings == ()
    securities = study.tables.securities
    assert str(securities["maturity_date"].dtype) == "datetime64[s]"
    assert securities["end_of_month"].tolist() == [False, False, True]
    assert securities["par_call_date"].isna().tolist() == [True, False, True]
    assert securities["row"].tolist() == [2, 3, 4]
    assert study.tables.lots.attrs["file"] == "lots.csv"
    assert study.numerics.defaulted == ("interpolation", "block_paths")
    assert study.call_model.origin.as_of == "2022-12-30"
