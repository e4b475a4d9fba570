"""The issuer's refunding yield, and the one at which it is indifferent."""

from __future__ import annotations

import itertools
import math
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from projector.questions.explain import Life
from projector.questions.refunding import refunding_yield, shift_where_equal
from projector.rates.curve import par_yield


def curve(rate: float, months: int = 400) -> np.ndarray:
    """A flat half-yearly compounded curve by months."""
    return (1.0 + rate / 2.0) ** (-np.arange(months + 1) / 6.0)


def test_known_a_flat_curve_s_par_yield_is_its_rate() -> None:
    # Hull, chapter on interest rates: on a flat curve every par yield is the rate itself
    for months in (6, 12, 60, 360):
        assert refunding_yield(curve(0.05), 0.0, months) == pytest.approx(0.05, abs=1e-14)


def test_known_a_spread_is_compounded_on_top() -> None:
    spread = 2.0 * math.log(1.03 / 1.025)  # a flat 5 % becomes a flat 6 %
    assert refunding_yield(curve(0.05), spread, 120) == pytest.approx(0.06, abs=1e-14)


def test_known_whole_half_years_give_the_par_yield_of_the_curve() -> None:
    discount = np.exp(-0.03 * np.arange(361) / 12.0 - 1e-7 * np.arange(361) ** 2)
    for months in (6, 18, 240):
        assert refunding_yield(discount, 0.0, months) == pytest.approx(
            par_yield(discount[:, None], months)[0], rel=1e-13
        )


@pytest.mark.parametrize("months", [1, 2, 5, 7, 13, 59, 233])
def test_limit_a_bond_at_the_refunding_yield_is_worth_par(months: int) -> None:
    discount, spread = curve(0.04), 0.011
    rate = refunding_yield(discount, spread, months)
    worth, last = 0.0, 0
    for t in range(1, months + 1):
        if (months - t) % 6 == 0:
            worth += rate * (t - last) / 12.0 * discount[t] * math.exp(-spread * t / 12.0)
            last = t
    worth += discount[months] * math.exp(-spread * months / 12.0)
    assert worth == pytest.approx(1.0, abs=1e-13)


def test_known_the_search_finds_the_root_of_a_straight_line_on_either_side() -> None:
    for root in (-0.2, -0.0031, 0.0, 0.00001, 0.07):
        found = shift_where_equal(lambda x, root=root: 500.0 * (root - x), 500.0 * root)
        assert found == pytest.approx(root, abs=1e-7)


def test_limit_a_search_without_a_root_says_so() -> None:
    assert shift_where_equal(lambda x: 1.0, 1.0) is None
    assert shift_where_equal(lambda x: -1.0, -1.0) is None
    assert shift_where_equal(lambda x: math.nan if x < -0.01 else -1.0, -1.0) is None


def question(hand: Any, block: Any, path: int, month: int = 12) -> Any:
    unit = hand.prepared.bonds.ids.index("B1")
    return Life(hand.prepared, block, unit, path, False).question(month)


@pytest.mark.parametrize("path", [0, 1])
def test_known_with_one_right_the_critical_yield_is_the_bond_s_yield_at_the_bar(
    hand: Any, hand_block: Any, path: int
) -> None:
    """Going on costs the plain bond, so the issuer is indifferent at its yield to maturity for price plus cost.

    Fabozzi, Fixed Income Mathematics, on refunding without a later right (cited from memory): 4 a half-year for nine
    years and 100, at 100.5.
    """
    low, high = 0.0, 0.2
    for _ in range(200):
        mid = 0.5 * (low + high)
        worth = sum(4.0 * (1 + mid / 2) ** -k for k in range(1, 19)) + 100.0 * (1 + mid / 2) ** -18
        low, high = (mid, high) if worth > 100.5 else (low, mid)
    assert question(hand, hand_block, path).critical_yield() == pytest.approx(low, abs=2e-7)
    # on flat curves of 6 % and 3 % the issuer's spread makes 9 % and 5.97 %
    flat = (0.06, 0.03)[path]
    assert question(hand, hand_block, path).yield_at(0.0) == pytest.approx(
        2.0 * ((1 + flat / 2) * 1.045 / 1.03 - 1.0), abs=1e-12
    )


def test_order_a_dearer_call_needs_a_lower_yield(hand: Any, hand_block: Any) -> None:
    base = question(hand, hand_block, 0)
    model = base.solver.model
    found = [
        replace(base, solver=replace(base.solver, model=replace(model, cost=cost))).critical_yield()
        for cost in (0.0, 0.5, 2.0)
    ]
    assert found[0] > found[1] > found[2]


def test_order_going_on_costs_less_as_yields_rise(hand: Any, hand_block: Any) -> None:
    gaps = [question(hand, hand_block, 0).gap(shift) for shift in (-0.02, -0.01, 0.0, 0.01, 0.02)]
    assert all(a > b for a, b in itertools.pairwise(gaps))


def test_limit_a_curve_that_cannot_be_discounted_has_no_gap(hand: Any, hand_block: Any) -> None:
    steep = replace(question(hand, hand_block, 0), yields=np.array([0.06, 0.06, 0.9]))
    assert math.isnan(steep.gap(0.5))
