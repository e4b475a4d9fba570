"""The one set of formatters."""

from datetime import date, datetime

import pandas as pd
import pytest

from projector.report import numbers
from projector.report.numbers import Money


@pytest.mark.parametrize(
    ("value", "decimals", "shown"),
    [(2733.5, 1, "2,733.5"), (-13.684, 1, "−13.7"), (-0.04, 1, "0.0"), (-0.0, 0, "0"), (0.25, 1, "0.2"),
     (0.35, 2, "0.35"),      (-1234.5, 0, "−1,234"), (1e9, 0, "1,000,000,000")],
)  # fmt: skip
def test_known_figures_print_with_the_true_minus_and_never_minus_zero(value, decimals, shown):
    assert numbers.fixed(value, decimals) == shown


@pytest.mark.parametrize("bad", [float("nan"), float("inf"), -float("inf")])
def test_limit_a_figure_that_is_not_finite_is_refused(bad):
    with pytest.raises(ValueError, match="not finite"):
        numbers.fixed(bad)


def test_known_changes_carry_a_sign_and_zero_carries_none():
    assert [numbers.signed(v, 1) for v in (1.24, -1.24, 0.01, -0.01)] == ["+1.2", "−1.2", "0.0", "0.0"]


def test_known_shares_and_rates():
    assert numbers.percent(0.106) == "10.6%"
    assert numbers.percent(-0.0001, 1) == "0.0%"
    assert numbers.share(1, 0) == "none"
    assert numbers.share(1, 3, 0) == "33%"


def test_order_the_inverse_reads_what_was_printed():
    for value in (0.0, -12345.678, 9.95, 1e6):
        assert float(numbers.as_number(numbers.fixed(value, 1))) == pytest.approx(value, abs=0.05)


def test_known_money_is_millions_and_thousands_for_a_small_study():
    assert numbers.money_for("USD", 50e6).unit == "$ million"
    assert numbers.money_for("USD", 49.9e6).unit == "$ thousand"
    assert numbers.money_for("CHF", 1e9).unit == "CHF million"
    assert numbers.money_for("CHF", 1e9).phrase(13.9e6) == "CHF 13.9 million"


def test_known_money_in_words():
    money = Money("$", 1e6, "million")
    assert money.phrase(13_900_000.0) == "$13.9 million"
    assert money.phrase(-13_684_217.0) == "−$13.7 million"
    assert money.phrase(-40_000.0) == "$0.0 million"
    assert not money.is_negative(-40_000.0)
    assert money.is_zero(49_999.0)


def test_known_dates_and_months():
    assert numbers.date_words(date(2025, 12, 31)) == "December 31, 2025"
    assert [numbers.month_label(date(2025, 12, 31), m) for m in (0, 1, 12, 14)] == [
        "2025-12",
        "2026-01",
        "2026-12",
        "2027-02",
    ]
    assert numbers.years_between(date(2025, 12, 31), date(2027, 6, 30)) == 1.5


@pytest.mark.parametrize("empty", [None, float("nan"), pd.NaT, ""])
def test_limit_an_empty_date_is_nothing(empty):
    assert numbers.as_date(empty) is None


@pytest.mark.parametrize("day", [date(2030, 6, 30), datetime(2030, 6, 30), pd.Timestamp("2030-06-30"), "2030-06-30"])
def test_known_dates_are_read_from_whatever_a_frame_holds(day):
    assert numbers.as_date(day) == date(2030, 6, 30)


def test_known_plurals_and_lists():
    assert [numbers.count_of(n, "path") for n in (0, 1, 2, 1000)] == ["no paths", "1 path", "2 paths", "1,000 paths"]
    assert numbers.count_of(2, "identity", "identities") == "2 identities"
    assert [numbers.listed(list("ABCDE")[:n]) for n in range(6)] == [
        "none", "A", "A and B", "A, B and C", "A, B, C and 1 more", "A, B, C and 2 more"]  # fmt: skip


def test_known_a_text_of_the_study_ends_a_sentence_with_one_full_stop():
    assert [numbers.closed(text) for text in ("None", "None.", "None!")] == ["None.", "None.", "None!"]


def test_limit_control_letters_and_direction_marks_of_a_study_are_replaced():
    assert numbers.clean("a\x00b\u202ec") == "a\ufffdb\ufffdc"
    assert numbers.clean("שלום, Zoë\u00a0& Söhne\n") == "שלום, Zoë\u00a0& Söhne\n"
