"""Surplus and what it is worth: worked examples of the pure functions."""

from __future__ import annotations

import numpy as np
import pytest

from projector.measures.surplus import (
    earned_rate_discount,
    lowest,
    market_surplus,
    one_month_discount,
    present_value,
    statement_surplus,
    years_negative,
)

BALANCES = {
    "statement_start": 1000.0, "statement_bought": 200.0, "accrued": 15.0, "recoveries": 3.0, "cash": 40.0,
    "borrowing": 25.0, "shortfall": 7.0, "reserve": 1100.0,
}  # fmt: skip


def one_cell(**changes: float) -> dict[str, np.ndarray]:
    """Balances of one month, segment and path."""
    return {name: np.full((1, 1, 1), value) for name, value in (BALANCES | changes).items()}


def test_known_statement_surplus_adds_assets_and_deducts_debts_and_reserve() -> None:
    assert statement_surplus(one_cell())[0, 0, 0] == 1000 + 200 + 15 + 3 + 40 - 25 - 7 - 1100


@pytest.mark.parametrize(
    ("name", "sign"),
    [("statement_start", 1), ("statement_bought", 1), ("accrued", 1), ("recoveries", 1), ("cash", 1),
     ("borrowing", -1), ("shortfall", -1), ("reserve", -1)],
)  # fmt: skip
def test_order_each_balance_moves_statement_surplus_by_itself(name: str, sign: int) -> None:
    change = statement_surplus(one_cell(**{name: BALANCES[name] + 1.0})) - statement_surplus(one_cell())
    assert change[0, 0, 0] == sign


def test_known_market_surplus_takes_market_values_with_accrued_in_them() -> None:
    found = market_surplus(np.array([[1250.0]]), one_cell(), np.array([[1080.0]]), 0)
    assert found[0, 0] == 1250 + 3 + 40 - 25 - 7 - 1080


@pytest.mark.parametrize(("rate", "expected"), [(0.042, -21.96), (0.042 * 0.79, -26.03)])
def test_known_fifty_short_in_twenty_years_at_a_level_earned_rate(rate: float, expected: float) -> None:
    """-50 / 1.042^20, and after 21 % tax on the rate: worked by hand."""
    found = -50.0 * earned_rate_discount(np.full((20, 1), rate))[0]
    assert round(float(found), 2) == expected
    assert found == pytest.approx(-50.0 / (1.0 + rate) ** 20, rel=1e-14)


def test_known_earned_rates_differ_by_year_and_path() -> None:
    found = earned_rate_discount(np.array([[0.05, 0.0], [0.10, -0.02]]))
    np.testing.assert_allclose(found, [1.0 / 1.05 / 1.10, 1.0 / 0.98], rtol=1e-15)


def test_limit_no_years_discount_nothing() -> None:
    np.testing.assert_array_equal(earned_rate_discount(np.zeros((0, 3))), np.ones(3))


def test_known_lowest_names_the_first_of_equals() -> None:
    value, at = lowest(np.array([[5.0, 1.0], [-2.0, 1.0], [-2.0, 7.0]]))
    assert value.tolist() == [-2.0, 1.0]
    assert at.tolist() == [1, 0]


def test_known_years_negative_counts_below_zero_only() -> None:
    assert years_negative(np.array([[0.0, -1e-12], [-3.0, 4.0], [-0.5, -4.0]])).tolist() == [2, 2]


def test_known_one_month_discounts_use_each_month_s_own_rate() -> None:
    rates = np.array([[np.nan, np.nan], [0.01, 0.0], [0.02, -0.001]])  # row 0 is not used
    found = one_month_discount(rates, 0.012)
    np.testing.assert_array_equal(found[0], 1.0)
    np.testing.assert_allclose(found[1], [1 / 1.011, 1 / 1.001], rtol=1e-15)
    np.testing.assert_allclose(found[2], [1 / 1.011 / 1.021, 1 / 1.001 / 1.0], rtol=1e-15)


def test_limit_at_no_rate_a_present_value_is_the_sum() -> None:
    flows = np.array([[1.0], [2.0], [-4.5]])
    assert present_value(flows, one_month_discount(np.zeros((3, 1)), 0.0)).tolist() == [-1.5]


def test_known_present_value_of_a_level_stream() -> None:
    """An annuity-immediate of 1 for 12 months at 1 % a month is (1 - 1.01^-12) / 0.01 = 11.2551."""
    flows = np.ones((13, 1))
    flows[0] = 0.0
    found = present_value(flows, one_month_discount(np.full((13, 1), 0.01), 0.0))[0]
    assert round(float(found), 4) == 11.2551


def test_order_a_path_s_figures_do_not_depend_on_its_neighbours() -> None:
    rng = np.random.default_rng(1)
    rates, flows = rng.uniform(0, 0.01, (25, 9)), rng.normal(size=(25, 9))
    whole = present_value(flows, one_month_discount(rates, 0.001))
    for p in range(9):
        alone = present_value(flows[:, p : p + 1], one_month_discount(rates[:, p : p + 1], 0.001))
        assert alone[0] == whole[p]
