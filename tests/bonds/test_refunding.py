"""The yield at which an issuer is indifferent to calling at its next right."""

from __future__ import annotations

import numpy as np
import pytest
from valuation_bonds import HUMPED, TENORS, Terms, every, reading, solver

from projector.bonds.refunding import CostAtNextRight, Refunding, new_bond_yield, refunding_yields
from projector.bonds.solving import MonthSolver
from projector.rates.curve import CurveReading
from projector.rates.key_rates import written_out


def yields_of(s: MonthSolver) -> Refunding:
    return refunding_yields(s, np.arange(len(s.bonds.ids)), *written_out(HUMPED, reading()))


def test_known_one_right_at_par_without_cost_is_worth_using_below_the_coupon() -> None:
    """What is called and what replaces it then pay the same coupons, so the line is the coupon itself, on any curve."""
    s = solver(Terms(240, 6, 5.0, 6, {60: 100.0}), Terms(30, 6, 3.5, 6, {6: 100.0}), cost=0.0)
    np.testing.assert_allclose(yields_of(s).critical, [0.05, 0.035], rtol=0.0, atol=1e-8)


def test_order_later_rights_cost_and_premium_each_ask_for_a_lower_yield() -> None:
    one = Terms(120, 6, 5.0, 6, {12: 100.0})
    more, dearer = Terms(120, 6, 5.0, 6, every(12, 120, 6)), Terms(120, 6, 5.0, 6, {12: 103.0})
    plain = yields_of(solver(one, more, dearer, cost=0.0)).critical
    assert plain[1] < plain[0] - 0.001
    assert plain[2] < plain[0] - 0.001
    assert (yields_of(solver(one, more, dearer, cost=1.0)).critical < plain - 0.0005).all()


def test_order_the_decision_turns_at_the_critical_yield() -> None:
    s = solver(Terms(120, 6, 5.0, 6, every(12, 120, 6)), Terms(100, 1, 5.0, 6, every(3, 100, 1)))
    cost, units = CostAtNextRight(s, *written_out(HUMPED, reading())), np.arange(2)
    critical = yields_of(s).critical
    low, high = np.full(2, -0.1), np.full(2, 0.1)
    for _ in range(50):  # the shift at which the issuer's own yield is the critical one
        mid = 0.5 * (low + high)
        below = cost.new_bond_yields(units, mid) < critical
        low, high = np.where(below, mid, low), np.where(below, high, mid)
    assert (cost(units, mid - 1e-5) > 0.0).all()
    assert (cost(units, mid + 1e-5) < 0.0).all()


def test_limit_without_a_right_there_is_no_such_yield() -> None:
    found = yields_of(solver(Terms(60, 6, 5.0, 6), Terms(60, 6, 5.0, 6, {12: 100.0})))
    assert np.isnan(found.present).tolist() == [True, False]
    assert np.isnan(found.critical).tolist() == [True, False]


def test_limit_a_price_that_no_rate_reaches_has_no_critical_yield() -> None:
    found = yields_of(solver(Terms(18, 6, 5.0, 6, {6: 140.0})))
    assert np.isnan(found.critical[0])
    assert found.present[0] > 0.0


@pytest.mark.parametrize("months", [1, 3, 6, 7, 11, 60, 119, 360])
def test_limit_a_new_bond_at_its_yield_is_worth_par(months: int) -> None:
    discount = np.exp(-0.047 * np.arange(361) / 12.0) * np.exp(-1e-6 * np.arange(361.0) ** 1.5)
    coupon = new_bond_yield(discount, months)
    value, at = 100.0 * discount[months], months
    while at > 0:
        value += 100.0 * coupon * min(at, 6) / 12.0 * discount[at]
        at -= 6
    assert value == pytest.approx(100.0, abs=1e-11)


def test_known_on_a_flat_curve_the_new_bond_pays_the_flat_yield() -> None:
    """31 CFR 356, Appendix B: at a level half-yearly yield a bond with that coupon is worth par."""
    discount = 1.03 ** (-np.arange(361) / 6.0)
    assert new_bond_yield(discount, 240) == pytest.approx(0.06, abs=1e-13)


def test_limit_a_shift_that_leaves_no_curve_is_passed_over() -> None:
    """3 % to ten years, 5 % at thirty: 10 points higher the last par bonds leave no discount."""
    steep = np.array([0.03] * 9 + [0.037, 0.05])
    dense, how = written_out(steep, CurveReading(TENORS, par_basis=True, linear=True))
    s = solver(Terms(120, 6, 5.0, 6, every(12, 120, 6)))
    both = CostAtNextRight(s, dense, how).discounts(np.array([-0.02, 0.10]), 120)
    assert np.isfinite(both[:, 0]).all()
    assert np.isnan(both[:, 1]).all()
    assert 0.02 < refunding_yields(s, np.arange(1), dense, how).critical[0] < 0.05
