"""Bad cells, headers and rows of one table: each is refused with its code, file, row and column."""

from __future__ import annotations

from typing import Any

import pytest

SENTENCES = [
    (
        ("securities", 2, "coupon_rate", "5"),
        "E309 securities.csv, row 2, column coupon_rate: coupon_rate is out of range (found '5'); "
        "allowed is 0 to 0.2 (1/year), did you mean 0.05, which is 5 %.",
    ),
    (
        ("securities", 4, "clean_price", "1.02"),
        "E309 securities.csv, row 4, column clean_price: clean_price is out of range (found '1.02'); "
        "allowed is 20 to 200 (per 100 of par), did you mean 102.",
    ),
    (
        ("lots", 3, "par", "-500000"),
        "E309 lots.csv, row 3, column par: par is out of range (found '-500000'); "
        "allowed is more than 0 and at most 10,000,000,000 (currency).",
    ),
    (
        ("securities", 2, "maturity_date", "2030-02-31"),
        "E311 securities.csv, row 2, column maturity_date: maturity_date is a day that does not exist "
        "(found '2030-02-31'); write a real calendar day as YYYY-MM-DD, 1900 to 2500.",
    ),
    (
        ("securities", 3, "rating", "BBB-+"),
        "E312 securities.csv, row 3, column rating: rating is unknown (found 'BBB-+'); did you mean BBB-? Allowed are "
        "AAA, AA+, AA, AA-, A+, A, A-, BBB+, BBB, BBB-, BB+, BB, BB-, B+, B, B-, CCC+, CCC, CCC-, CC, C, D.",
    ),
    (
        ("securities", 2, "day_count", "act/act.icma"),
        "E312 securities.csv, row 2, column day_count: day_count is unknown (found 'act/act.icma'); did you mean "
        "ACT/ACT.ICMA? Allowed are 30/360, 30E/360, 30E/360.ISDA, ACT/ACT.ISDA, ACT/ACT.ICMA, ACT/365.FIXED, "
        "ACT/360, ACT/365L.",
    ),
    (
        ("yield_curve", 3, "rate", "4.73%"),
        "E307 yield_curve.csv, row 3, column rate: rate is not a number (found '4.73%'); write a decimal number "
        "such as 0.0525, with a point, without a % sign or thousands separators.",
    ),
]


@pytest.mark.parametrize(("change", "sentence"), SENTENCES)
def test_limit_a_bad_cell_is_refused_in_a_whole_sentence(
    small: Any, only_fault: Any, change: tuple[str, int, str, str], sentence: str
) -> None:
    assert only_fault(small.cell(*change)).sentence() == sentence


CELLS = [
    ("lots", 4, "book_value", "NaN", "E308"),
    ("lots", 4, "book_value", "inf", "E308"),
    ("liability_streams", 9, "amount", "1e400", "E308"),
    ("liability_streams", 9, "amount", "", "E306"),
    ("liability_streams", 9, "amount", "NA", "E307"),
    ("liability_streams", 9, "amount", "1_000", "E307"),
    ("liability_streams", 9, "amount", "0x10", "E307"),
    ("liability_streams", 9, "amount", "٣", "E307"),
    ("liability_streams", 9, "amount", "-1", "E309"),
    ("liability_streams", 9, "month", "2.5", "E310"),
    ("liability_streams", 9, "month", "601", "E309"),
    ("liability_streams", 9, "item", "premuim", "E312"),
    ("liability_streams", 9, "block", "pay\x07out", "E313"),
    ("securities", 2, "issuer", "x" * 201, "E313"),
    ("securities", 2, "issuer", " Issuer", "E313"),
    ("securities", 2, "asset_class", "Corporate", "E313"),
    ("securities", 2, "security_id", "", "E306"),
    ("securities", 2, "issue_date", "15/06/2020", "E311"),
    ("securities", 2, "issue_date", "20-06-15", "E311"),
    ("securities", 2, "maturity_date", "2600-06-15", "E311"),
    ("securities", 2, "end_of_month", "maybe", "E312"),
    ("securities", 2, "coupon_frequency", "3", "E312"),
    ("call_rights", 2, "style", "asian", "E312"),
    ("call_rights", 2, "price", "1.025", "E309"),
    ("yield_curve", 2, "tenor_months", "0", "E309"),
    ("yield_curve", 2, "rate", "4.4", "E309"),
]


@pytest.mark.parametrize(("table", "row", "column", "value", "code"), CELLS)
def test_limit_a_bad_cell_is_refused_at_its_place(
    small: Any, only_fault: Any, table: str, row: int, column: str, value: str, code: str
) -> None:
    error = only_fault(small.cell(table, row, column, value))
    assert (error.code, error.file, error.row, error.column) == (code, f"{table}.csv", row, column)
    assert error.value == value


def test_limit_one_bad_cell_never_hides_another(small: Any, faults: Any) -> None:
    small.cell("securities", 2, "coupon_rate", "five").cell("securities", 3, "coupon_rate", "5.25")
    small.cell("securities", 3, "rating", "Z9").cell("lots", 5, "par", "inf").cell("yield_curve", 2, "rate", "")
    found = {(error.file, error.row, error.column, error.code) for error in faults(small)}
    assert found == {
        ("securities.csv", 2, "coupon_rate", "E307"),
        ("securities.csv", 3, "coupon_rate", "E309"),
        ("securities.csv", 3, "rating", "E312"),
        ("lots.csv", 5, "par", "E308"),
        ("yield_curve.csv", 2, "rate", "E306"),
    }


def test_limit_an_identifier_that_reads_NA_is_kept(small: Any) -> None:
    from projector.study.reading import read_study

    small.cell("securities", 2, "issuer", "NA").cell("securities", 2, "sector", "null")
    study, _ = read_study(small.write())
    securities = study.tables.securities
    assert (securities["issuer"].iloc[0], securities["sector"].iloc[0]) == ("NA", "null")


def _rename(study: Any, table: str, old: str, new: str) -> None:
    study.tables[table] = [
        {new if name == old else name: value for name, value in row.items()} for row in study.tables[table]
    ]


def test_limit_a_missing_column_is_named(small: Any, only_fault: Any) -> None:
    for row in small.tables["lots"]:
        del row["tax_basis"]
    assert only_fault(small).sentence() == (
        "E301 lots.csv, row 1, column tax_basis: the column tax_basis is missing; "
        "add the column, or correct its name in the first row."
    )


def test_limit_an_unknown_column_says_what_was_meant(small: Any, faults: Any) -> None:
    _rename(small, "securities", "coupon_rate", "cupon_rate")
    unknown, missing = faults(small)
    assert unknown.sentence() == (
        "E302 securities.csv, row 1, column cupon_rate: the column is unknown; "
        "did you mean coupon_rate? Correct the name or remove the column."
    )
    assert (missing.code, missing.column) == ("E301", "coupon_rate")


def test_limit_semicolons_between_cells_are_recognised(small: Any, faults: Any) -> None:
    folder = small.write()
    small.written_by_hand.add("lots")
    text = (folder / "lots.csv").read_text()
    (folder / "lots.csv").write_text(text.replace(",", ";"))
    assert "separate the cells by commas" in faults(small)[-1].remedy


def test_limit_a_column_that_stands_twice_is_refused(small: Any, only_fault: Any) -> None:
    folder = small.write()
    small.written_by_hand.add("yield_curve")
    (folder / "yield_curve.csv").write_text("tenor_months,rate,rate\n3,0.04,0.04\n12,0.04,0.04\n120,0.04,0.04\n")
    error = only_fault(small)
    assert (error.code, error.row, error.column) == ("E303", 1, "rate")


def test_limit_an_empty_table_is_refused(small: Any, faults: Any) -> None:
    folder = small.write()
    small.written_by_hand.add("lots")
    (folder / "lots.csv").write_text("lot_id,security_id,segment,par,book_value,tax_basis\n")
    assert [error.sentence() for error in faults(small)] == [
        "E304 lots.csv: the table is empty; fill it in: the run needs at least one row."
    ]


def test_limit_no_call_rights_at_all_are_fine(small: Any) -> None:
    from projector.study.reading import read_study

    folder = small.write()
    header = (folder / "call_rights.csv").read_text().splitlines()[0]
    (folder / "call_rights.csv").write_text(header + "\n")
    study, warnings = read_study(folder)
    assert len(study.tables.call_rights) == 0
    assert warnings == ()


def test_limit_a_ragged_row_is_located(small: Any, faults: Any) -> None:
    folder = small.write()
    small.written_by_hand.add("yield_curve")
    (folder / "yield_curve.csv").write_text("tenor_months,rate\n3,0.04\n12\n24,0,04\n120,0.04,,\n")
    found = [(error.code, error.row, error.problem) for error in faults(small)]
    assert found == [
        ("E305", 3, "this row has 1 cells, the header has 2"),
        ("E305", 4, "this row has 3 cells, the header has 2"),
    ]


def test_limit_a_duplicate_lot_is_refused(small: Any, only_fault: Any) -> None:
    assert only_fault(small.cell("lots", 5, "lot_id", "L2")).sentence() == (
        "E314 lots.csv, row 5, column lot_id: lot_id L2 stands in row 3 already (found 'L2'); "
        "keep one row for each lot_id."
    )


def test_limit_one_security_twice_with_the_same_terms(small: Any, only_fault: Any) -> None:
    small.tables["securities"].append(dict(small.tables["securities"][0]))
    error = only_fault(small)
    assert (error.code, error.row, error.column, error.value) == ("E314", 5, "security_id", "B1")


def test_limit_one_security_twice_with_different_terms(small: Any, only_fault: Any) -> None:
    twin = {**small.tables["securities"][0], "coupon_rate": "0.06", "rating": "BBB"}
    small.tables["securities"].append(twin)
    assert only_fault(small).sentence() == (
        "E315 securities.csv, row 5, column security_id: security_id B1 stands in row 2 already, with another rating, "
        "coupon_rate (found 'B1'); keep the row with the right terms, or give the other security its own security_id."
    )


def test_limit_price_and_spread_are_one_of_two(small: Any, faults: Any) -> None:
    small.cell("securities", 2, "spread_bp", "100").cell("securities", 4, "clean_price", "")
    found = [(error.code, error.row, error.column) for error in faults(small)]
    assert found == [("E316", 2, "spread_bp"), ("E316", 4, "clean_price")]


def test_limit_coupon_and_frequency_agree(small: Any, faults: Any) -> None:
    small.cell("securities", 2, "coupon_frequency", "0").cell("securities", 3, "coupon_rate", "0")
    found = [(error.code, error.row, error.column) for error in faults(small)]
    assert found == [("E317", 3, "coupon_frequency"), ("E317", 2, "coupon_frequency")]


@pytest.mark.parametrize(
    ("table", "column", "value", "code"),
    [
        ("securities", "put_date", "2027-06-15", "E502"),
        ("securities", "sinking_fund", "yes", "E503"),
        ("securities", "step_up", "0.0025", "E504"),
        ("securities", "coupon_type", "floating", "E505"),
        ("securities", "floating_index", "SOFR", "E506"),
        ("securities", "announced_call_date", "2023-03-01", "E507"),
    ],
)
def test_limit_what_cannot_be_honoured_is_refused_by_name(
    small: Any, only_fault: Any, table: str, column: str, value: str, code: str
) -> None:
    for row in small.tables[table]:
        row[column] = ""
    small.tables[table][0][column] = "none"
    small.tables[table][1][column] = value
    error = only_fault(small)
    assert (error.code, error.file, error.row, error.column) == (code, f"{table}.csv", 3, column)
    assert error.value == value
    assert "not honoured by this version" in error.problem or "write them in the table" in error.remedy


def test_limit_the_first_twenty_are_shown_and_the_rest_counted(small: Any) -> None:
    from projector.study.errors import StudyRefused
    from projector.study.reading import read_study

    for row in small.tables["liability_streams"]:
        row["amount"] = "x"
    with pytest.raises(StudyRefused) as refusal:
        read_study(small.write())
    lines = str(refusal.value).splitlines()
    assert len(lines) == 21
    assert lines[-1] == "E307 liability_streams.csv, column amount: 29 more of the same."
