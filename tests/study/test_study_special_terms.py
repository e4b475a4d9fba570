"""Terms of the optional tables that cannot be: each refused by name, with file, row and column; and those that can."""

from __future__ import annotations

from typing import Any

import pytest

from projector.study.reading import read_study
from projector.study.specialterms import notice_months

PUT = {
    "security_id": "B1", "first_date": "2026-06-15", "last_date": "2026-06-15", "style": "european", "price": "99",
    "notice_days": "0",
}  # fmt: skip
SINK = {"security_id": "B1", "payment_date": "2024-06-15", "share_of_par": "0.2", "may_double": "false"}
STEP = {"security_id": "B1", "start_date": "2024-12-15", "coupon_rate": "0.055"}
CALLED = {"security_id": "B1", "payment_date": "2023-06-01", "price": "101"}
TABLES = {"put_rights": PUT, "sinking_payments": SINK, "coupon_steps": STEP, "announced_calls": CALLED}


def with_table(small: Any, name: str, *rows: dict[str, str]) -> Any:
    """The small study with one optional table."""
    small.tables[name] = list(rows)
    return small.replace('control_totals = "control_totals.csv"',
                         f'control_totals = "control_totals.csv"\n{name} = "{name}.csv"')  # fmt: skip


@pytest.mark.parametrize("name", TABLES)
def test_limit_a_sound_row_of_each_table_is_read(small: Any, name: str) -> None:
    study, _ = read_study(with_table(small, name, TABLES[name]).write())
    assert len(getattr(study.tables, name)) == 1
    assert all(len(getattr(study.tables, other)) == 0 for other in TABLES if other != name)


def test_order_an_optional_table_changes_the_digest_and_its_absence_does_not(small: Any) -> None:
    plain = read_study(small.write())[0].input_digest
    digests = {plain}
    for name, row in TABLES.items():
        one = type(small)(small.folder.parent / name)
        digests.add(read_study(with_table(one, name, row).write())[0].input_digest)
    assert len(digests) == 5


@pytest.mark.parametrize(
    ("name", "change", "code", "column", "says"),
    [
        ("put_rights", {"security_id": "B9"}, "E401", "security_id", "not in the securities table"),
        ("put_rights", {"last_date": "2026-06-01", "style": "american"}, "E422", "last_date", "ends before"),
        ("put_rights", {"last_date": "2030-06-15", "style": "american"}, "E422", "last_date", "before the maturity"),
        ("put_rights", {"last_date": "2026-12-15"}, "E422", "last_date", "has one day"),
        ("put_rights", {"price": "100.5"}, "E423", "price", "above a call price"),
        ("put_rights", {"notice_days": "91"}, "E309", "notice_days", "0"),
        ("put_rights", {"style": "make_whole"}, "E312", "style", "style"),
        ("sinking_payments", {"payment_date": "2022-06-15"}, "E424", "payment_date", "not after the valuation"),
        ("sinking_payments", {"payment_date": "2030-06-15"}, "E424", "payment_date", "not before the maturity"),
        ("sinking_payments", {"payment_date": "2024-06-16"}, "E424", "payment_date", "not on a coupon date"),
        ("sinking_payments", {"share_of_par": "1"}, "E424", "share_of_par", "nothing for maturity"),
        ("sinking_payments", {"share_of_par": "0"}, "E309", "share_of_par", "0"),
        ("coupon_steps", {"start_date": "2020-06-15"}, "E425", "start_date", "not after issue"),
        ("coupon_steps", {"start_date": "2024-11-15"}, "E425", "start_date", "not on a coupon date"),
        ("coupon_steps", {"coupon_rate": "5"}, "E309", "coupon_rate", "0.2"),
        ("announced_calls", {"payment_date": "2022-12-31"}, "E426", "payment_date", "not after the valuation"),
        ("announced_calls", {"payment_date": "2030-06-15"}, "E426", "payment_date", "before maturity"),
    ],
)  # fmt: skip
def test_limit_a_term_that_cannot_be_is_refused_where_it_stands(
    small: Any, only_fault: Any, name: str, change: dict[str, str], code: str, column: str, says: str
) -> None:
    error = only_fault(with_table(small, name, TABLES[name] | change))
    assert (error.code, error.file, error.row, error.column) == (code, f"{name}.csv", 2, column)
    assert says in error.sentence()


def test_limit_notice_of_different_months_on_one_security_is_refused(small: Any, only_fault: Any) -> None:
    error = only_fault(small.cell("call_rights", 3, "notice_days", "60"))
    assert (error.code, error.file, error.row, error.column) == ("E427", "call_rights.csv", 3, "notice_days")


def test_limit_days_that_are_the_same_months_of_notice_go_together(small: Any) -> None:
    study, _ = read_study(small.cell("call_rights", 3, "notice_days", "10").write())
    assert sorted(study.tables.call_rights["notice_days"]) == [0, 10]


def test_limit_doubling_beside_a_month_of_notice_is_refused_by_name(small: Any, only_fault: Any) -> None:
    for row in (2, 3):
        small.cell("call_rights", row, "notice_days", "30")
    error = only_fault(with_table(small, "sinking_payments", SINK | {"may_double": "true"}))
    assert (error.code, error.file, error.column) == ("E501", "sinking_payments.csv", "may_double")


def test_limit_notice_must_be_stated(small: Any, only_fault: Any) -> None:
    for row in small.tables["call_rights"]:
        del row["notice_days"]
    assert only_fault(small).code == "E301"


def test_known_notice_in_months_is_the_nearest_whole_number() -> None:
    """365.25 / 12 = 30.4 days a month; the middle between two months goes to the later."""
    days = {0: 0, 5: 0, 15: 0, 16: 1, 30: 1, 45: 1, 46: 2, 60: 2, 75: 2, 77: 3, 90: 3}
    assert {d: notice_months(d) for d in days} == days
