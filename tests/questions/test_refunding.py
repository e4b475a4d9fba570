"""The issuer's refunding yield, and the one at which it is indifferent."""

from __future__ import annotations

import itertools
import math
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from projector.bonds.exercise.path_kernels import Dates
from projector.bonds.solving import THIRD_GRID, Jobs
from projector.questions.explain import Life, tell
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
        for start in (0.0, 0.01, -0.15, root):
            found = shift_where_equal(lambda x, root=root: 500.0 * (root - x), start)
            assert found == pytest.approx(root, abs=1e-7)


def test_limit_a_search_without_a_root_says_so() -> None:
    for start in (0.0, 0.02, -0.3):
        assert shift_where_equal(lambda x: 1.0, start) is None
        assert shift_where_equal(lambda x: -1.0, start) is None
        assert shift_where_equal(lambda x: math.nan if x < -0.01 else -1.0, start) is None


def test_limit_a_start_where_no_curve_exists_begins_again_from_zero() -> None:
    assert shift_where_equal(lambda x: math.nan if x > 0.1 else 0.05 - x, 0.2) == pytest.approx(0.05, abs=1e-7)


def critical(asked: Any) -> float:
    """Critical yield of one month by itself."""
    return asked.yield_at(asked.critical_shift())


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
    assert critical(question(hand, hand_block, path)) == pytest.approx(low, abs=2e-7)
    story = tell(hand.prepared, hand_block, hand.prepared.bonds.ids.index("B1"), path)
    assert story.months["critical_yield"].iloc[12] == pytest.approx(low, abs=2e-7)
    # on flat curves of 6 % and 3 % the issuer's spread makes 9 % and 5.97 %
    flat = (0.06, 0.03)[path]
    assert question(hand, hand_block, path).yield_at(0.0) == pytest.approx(
        2.0 * ((1 + flat / 2) * 1.045 / 1.03 - 1.0), abs=1e-12
    )


def test_order_the_spread_is_the_month_s_own(hand: Any, hand_block: Any) -> None:
    base = question(hand, hand_block, 0)
    spreads = base.solver.spreads
    table = np.full_like(spreads.refunding, 0.5)
    table[base.unit, base.month] = 2.0 * math.log(1.04 / 1.03)  # on 6 % makes 8 %; any other cell would make it wild
    moved = replace(base, solver=replace(base.solver, spreads=replace(spreads, refunding=table)))
    assert moved.yield_at(0.0) == pytest.approx(0.08, abs=1e-12)


def test_order_a_dearer_call_needs_a_lower_yield(hand: Any, hand_block: Any) -> None:
    base = question(hand, hand_block, 0)
    model = base.solver.model
    found = [
        critical(replace(base, solver=replace(base.solver, model=replace(model, cost=cost))))
        for cost in (0.0, 0.5, 2.0)
    ]
    assert found[0] > found[1] > found[2]


def test_order_going_on_costs_less_as_yields_rise(hand: Any, hand_block: Any) -> None:
    gaps = [question(hand, hand_block, 0).gap(shift) for shift in (-0.02, -0.01, 0.0, 0.01, 0.02)]
    assert all(a > b for a, b in itertools.pairwise(gaps))


def test_limit_a_curve_that_cannot_be_discounted_has_no_gap(hand: Any, hand_block: Any) -> None:
    steep = replace(question(hand, hand_block, 0), yields=np.array([0.06, 0.06, 0.9]))
    assert math.isnan(steep.gap(0.5))


def test_order_at_the_critical_shift_a_finer_grid_finds_going_on_at_the_bar(busy: Any, busy_block: Any) -> None:
    unit = busy.prepared.bonds.ids.index("B1")
    bonds, solver = busy.prepared.bonds, busy.prepared.solver
    step = int(bonds.step[unit])
    months = [int(m) for m in np.flatnonzero(np.isfinite(bonds.clean_price[unit]))[:20:6]]
    for month in months:
        asked = Life(busy.prepared, busy_block, unit, 0, False).question(month)
        shift = asked.critical_shift()
        assert shift == pytest.approx(asked.critical_shift(0.01), abs=3e-7)  # wherever the search begins
        jobs = Jobs(Dates(month, step, step, 0, 0), np.array([unit]), np.array([0]))
        cost = solver.solve(jobs, asked.discount(shift), THIRD_GRID, False)[0][0]
        assert cost == pytest.approx(bonds.dirty_price[unit, month] + solver.model.cost, abs=0.0005)
    assert len(months) == 4
