"""Terms of securities and call rights that cannot be, and lots without a home."""

from __future__ import annotations

from typing import Any

import pytest

from projector.study.daycounts import months_before
from projector.study.reading import read_study

CASES = [
    ("lots", 2, "security_id", "B9", "E401"),
    ("lots", 2, "segment", "anuities", "E402"),
    ("lots", 2, "book_value", "99000", "E408"),
    ("lots", 2, "tax_basis", "9900000", "E408"),
    ("securities", 4, "maturity_date", "2022-12-31", "E403"),
    ("securities", 4, "maturity_date", "2150-06-30", "E404"),
    ("securities", 2, "issue_date", "2023-01-15", "E407"),
    ("securities", 4, "first_coupon_date", "2021-11-30", "E405"),
    ("securities", 4, "first_coupon_date", "2021-12-30", "E405"),
    ("securities", 4, "first_coupon_date", "2020-06-15", "E405"),
    ("securities", 3, "par_call_date", "2030-06-15", "E406"),
    ("securities", 3, "par_call_date", "2020-06-15", "E406"),
    ("call_rights", 3, "last_date", "2030-06-15", "E412"),
    ("call_rights", 3, "last_date", "2031-06-15", "E412"),
    ("call_rights", 2, "first_date", "2020-06-15", "E413"),
    ("call_rights", 3, "last_date", "2026-06-14", "E411"),
    ("call_rights", 2, "last_date", "2026-06-16", "E414"),
    ("call_rights", 3, "first_date", "2025-06-15", "E414"),
    ("call_rights", 3, "price", "", "E417"),
    ("call_rights", 3, "make_whole_spread_bp", "25", "E417"),
    ("call_rights", 3, "security_id", "B9", "E401"),
    ("call_rights", 2, "style", "european", "E416"),
]
PLACE_OF = {"E414": "first_date", "E416": "last_date"}


@pytest.mark.parametrize(("table", "row", "column", "value", "code"), CASES)
def test_limit_impossible_terms_are_refused_at_their_place(
    small: Any, faults: Any, table: str, row: int, column: str, value: str, code: str
) -> None:
    found = [error for error in faults(small.cell(table, row, column, value)) if error.file != "control_totals.csv"]
    assert {error.code for error in found} == {code}
    where = (f"{table}.csv", 3 if code == "E414" else row, PLACE_OF.get(code, column))
    assert (found[0].file, found[0].row, found[0].column) == where


def test_limit_a_lot_without_security_reads_as_a_sentence(small: Any, faults: Any) -> None:
    assert faults(small.cell("lots", 2, "security_id", "B9"))[0].sentence() == (
        "E401 lots.csv, row 2, column security_id: lot L1 is of a security that is not in the securities table "
        "(found 'B9'); add the security there, or correct the security_id."
    )


def test_limit_a_call_after_maturity_reads_as_a_sentence(small: Any, only_fault: Any) -> None:
    assert only_fault(small.cell("call_rights", 3, "last_date", "2031-06-15")).sentence() == (
        "E412 call_rights.csv, row 3, column last_date: the right does not end before the maturity 2030-06-15 of B1 "
        "(found '2031-06-15'); end it before maturity: at maturity the bond is repaid anyway."
    )


def test_limit_a_matured_bond_reads_as_a_sentence(small: Any, faults: Any) -> None:
    small.cell("securities", 4, "maturity_date", "2022-06-30")
    assert faults(small)[0].sentence() == (
        "E403 securities.csv, row 4, column maturity_date: security B3 matures on or before the valuation date "
        "2022-12-31 (found '2022-06-30'); remove it and its lots, or correct the date."
    )


def test_order_rights_out_of_date_order_are_refused(small: Any, only_fault: Any) -> None:
    small.tables["call_rights"].reverse()
    error = only_fault(small)
    assert (error.code, error.row, error.column) == ("E415", 3, "first_date")


def test_limit_rights_of_other_styles_may_overlap(small: Any) -> None:
    whole = {"style": "make_whole", "first_date": "2020-07-01", "price": "", "make_whole_spread_bp": "25"}
    small.tables["call_rights"].insert(0, {**small.tables["call_rights"][1], **whole})
    study, _ = read_study(small.write())
    assert sorted(study.tables.call_rights["style"]) == ["american", "american", "make_whole"]


def test_limit_a_priced_right_in_the_par_call_window_is_refused(small: Any, only_fault: Any) -> None:
    small.cell("securities", 2, "par_call_date", "2030-01-31")
    error = only_fault(small)
    assert (error.code, error.row, error.column) == ("E418", 3, "last_date")


def test_limit_a_make_whole_right_has_a_spread_and_no_price(small: Any, faults: Any) -> None:
    small.cell("call_rights", 2, "style", "make_whole")
    assert {(error.code, error.column) for error in faults(small)} == {
        ("E417", "price"),
        ("E417", "make_whole_spread_bp"),
    }


def test_order_a_rising_call_price_is_a_warning(small: Any) -> None:
    _, warnings = read_study(small.cell("call_rights", 3, "price", "103").write())
    assert warnings == ("call_rights.csv, row 3: the call price of B1 rises to 103; call prices usually fall.",)


def test_order_rights_wholly_past_are_counted(small: Any) -> None:
    small.cell("call_rights", 2, "first_date", "2021-01-31").cell("call_rights", 2, "last_date", "2022-12-31")
    _, warnings = read_study(small.write())
    assert warnings == ("call_rights.csv: 1 call right ends on or before the valuation date and has no effect.",)


def test_limit_ratings_without_spread_or_cost_are_refused(small: Any, faults: Any) -> None:
    small.cell("securities", 4, "rating", "AA")
    found = [(error.code, error.file, error.value) for error in faults(small)]
    assert found == [("E420", "class_spreads.csv", "AA"), ("E421", "default_costs.csv", "AA")]


def test_limit_the_curve_needs_its_anchor_tenors(small: Any, faults: Any) -> None:
    small.cell("yield_curve", 2, "tenor_months", "24").cell("yield_curve", 4, "tenor_months", "84")
    assert [error.problem for error in faults(small)] == [
        "the yield curve has no tenor of 120 months",
        "the yield curve has no tenor of one of 3 or 6 months",
    ]


def test_known_month_ends_counted_back_from_maturity() -> None:
    from datetime import date

    assert months_before(date(2030, 6, 30), 4, month_end=True) == date(2030, 2, 28)
    assert months_before(date(2030, 6, 30), 6, month_end=True) == date(2029, 12, 31)
    assert months_before(date(2030, 6, 30), 6, month_end=False) == date(2029, 12, 30)
    assert months_before(date(2030, 1, 31), 23, month_end=False) == date(2028, 2, 29)


UNUSED = [
    ("american", "2026-06-01", "2026-06-29", False),
    ("american", "2026-06-01", "2026-06-30", True),
    ("american", "2026-06-30", "2026-06-30", True),
    ("american", "2025-12-31", "2026-01-02", True),
    ("american", "2026-07-01", "2026-07-01", False),
    ("american", "2022-07-01", "2022-07-30", True),  # wholly past: a warning
    ("bermudan", "2026-06-16", "2026-12-14", False),
    ("bermudan", "2026-06-15", "2026-06-15", True),
    ("bermudan", "2026-06-16", "2026-12-15", True),
    ("bermudan", "2026-03-01", "2026-06-14", False),
    ("bermudan", "2022-07-01", "2022-07-30", True),
    ("european", "2026-06-17", "2026-06-17", True),
]


@pytest.mark.parametrize(("style", "first", "last", "taken"), UNUSED)
def test_limit_a_right_that_can_never_be_used_is_refused(
    small: Any, only_fault: Any, style: str, first: str, last: str, taken: bool
) -> None:
    small.tables["call_rights"] = [{**small.tables["call_rights"][0], "style": style}]
    small.cell("call_rights", 2, "first_date", first).cell("call_rights", 2, "last_date", last)
    if taken:
        read_study(small.write())
        return
    error = only_fault(small)
    assert (error.code, error.row, error.column, error.value) == ("E419", 2, "last_date", last)
    used = "an american right is used at month ends" if style == "american" else "a bermudan right is used on coupon"
    assert error.problem.startswith(f"this right can never be used: {used}")
    assert error.sentence().endswith(
        f"and none lies between {first} and {last} (found '{last}'); widen the dates or make it european."
    )


def test_limit_a_bermudan_right_on_a_zero_coupon_bond_is_refused(small: Any, only_fault: Any) -> None:
    small.cell("securities", 2, "coupon_rate", "0").cell("securities", 2, "coupon_frequency", "0")
    small.cell("call_rights", 2, "style", "bermudan")
    error = only_fault(small)
    assert (error.code, error.row, error.column, error.value) == ("E419", 2, "style", "bermudan")
    assert error.problem.endswith("and B1 is a zero coupon bond")
