"""Effective duration, convexity and key-rate durations: limits in closed form, a general library's tree, sums."""

from __future__ import annotations

import numpy as np
import pytest
import QuantLib as ql
from valuation_bonds import HUMPED, MIXED, TENORS, Terms, every, reading, solver

from projector.bonds.exercise.step_operator import GRID_FINER
from projector.bonds.sensitivities import (
    KEY_SHIFT,
    SHIFT,
    RateSensitivity,
    central_convexity,
    central_duration,
    rate_sensitivity,
    straight_on_curves,
    values_on_curves,
)
from projector.bonds.solving import MonthSolver
from projector.rates.curve import CurveReading
from projector.rates.key_rates import KEY_MONTHS, key_rate_shifts, shifted_discounts, written_out


def curves(yields: np.ndarray, how: CurveReading, last: int = 366) -> np.ndarray:
    out, dense = written_out(yields, how)
    return shifted_discounts(out, dense, key_rate_shifts(dense.tenor_months, SHIFT, KEY_SHIFT), last)


def measured(s: MonthSolver, yields: np.ndarray = HUMPED, how: CurveReading | None = None) -> RateSensitivity:
    return rate_sensitivity(s, np.arange(len(s.bonds.ids)), curves(yields, how or reading()))


def test_limit_on_a_zero_curve_a_zero_coupon_bond_hangs_on_its_own_key_alone() -> None:
    """Value (1 + y/2)^(-2T) e^(-sT), so each figure is known to the last digit; no other key moves it."""
    lives = [m for m in KEY_MONTHS if m >= 6 and m in TENORS]
    found = measured(solver(*(Terms(m, 12, 0.0, 12) for m in lives)), HUMPED, reading(par=False))
    for u, months in enumerate(lives):
        y, key = float(HUMPED[TENORS.index(months)]), KEY_MONTHS.index(months)

        def two_sided(shift: float, y: float = y, months: int = months) -> float:
            up, down = ((1.0 + 0.5 * (y + s)) ** (-months / 6.0) for s in (shift, -shift))
            return (down - up) / (2.0 * shift * (1.0 + 0.5 * y) ** (-months / 6.0))

        assert found.duration[u] == pytest.approx(two_sided(SHIFT), rel=1e-9)
        assert found.key_rate[u, key] == pytest.approx(two_sided(KEY_SHIFT), rel=1e-9)
        assert two_sided(KEY_SHIFT) == pytest.approx(months / 12.0 / (1.0 + 0.5 * y), rel=2e-4)
        assert np.abs(np.delete(found.key_rate[u], key)).max() < 1e-9


def test_known_straight_bond_on_a_flat_curve_has_the_textbook_duration_and_convexity() -> None:
    """QuantLib BondFunctions: modified duration and convexity of a 10-year 6 % bond at 5 % half-yearly."""
    flat = np.full_like(HUMPED, 0.05)
    found = measured(solver(Terms(120, 6, 6.0, 6), refunding=0.0, valuation=0.0), flat)
    start, end = ql.Date(15, 1, 2025), ql.Date(15, 1, 2035)
    ql.Settings.instance().evaluationDate = start
    dates = ql.Schedule(start, end, ql.Period(6, ql.Months), ql.NullCalendar(), ql.Unadjusted, ql.Unadjusted,
                        ql.DateGeneration.Backward, False)  # fmt: skip
    count = ql.Thirty360(ql.Thirty360.BondBasis)
    bond = ql.FixedRateBond(0, 100.0, dates, [0.06], count)
    rate = ql.InterestRate(0.05, count, ql.Compounded, ql.Semiannual)
    assert found.value[0] == pytest.approx(ql.BondFunctions.cleanPrice(bond, rate, start), abs=1e-9)
    duration = ql.BondFunctions.duration(bond, rate, ql.Duration.Modified, start)
    assert found.duration[0] == pytest.approx(duration, rel=2e-4)
    assert found.convexity[0] == pytest.approx(ql.BondFunctions.convexity(bond, rate, start), rel=2e-4)
    assert found.key_rate[0].sum() == pytest.approx(duration, rel=2e-4)


def tree_bond(steps: int) -> tuple[float, float, float]:
    """Price at a spread of 120 bp, effective duration and convexity of QuantLib's callable bond on a tree.

    20 years, 6 % half-yearly, callable at 100 on coupon dates from year 3; flat 5 %; Hull-White 0.03, 0.01. Its bumps
    are of the continuously compounded spread: both figures are for that, not for bond-equivalent yields.
    """
    today = ql.Date(15, 1, 2025)
    ql.Settings.instance().evaluationDate = today
    count = ql.Thirty360(ql.Thirty360.BondBasis)
    dates = ql.Schedule(today, ql.Date(15, 1, 2045), ql.Period(6, ql.Months), ql.NullCalendar(), ql.Unadjusted,
                        ql.Unadjusted, ql.DateGeneration.Backward, False)  # fmt: skip
    calls = ql.CallabilitySchedule()
    for day in list(dates)[6:-1]:
        calls.append(ql.Callability(ql.BondPrice(100.0, ql.BondPrice.Clean), ql.Callability.Call, day))
    bond = ql.CallableFixedRateBond(0, 100.0, dates, [0.06], count, ql.Unadjusted, 100.0, today, calls)
    curve = ql.YieldTermStructureHandle(ql.FlatForward(today, 0.05, count, ql.Compounded, ql.Semiannual))
    bond.setPricingEngine(ql.TreeCallableFixedRateBondEngine(ql.HullWhite(curve, 0.03, 0.01), steps))
    arguments = (0.012, curve, count, ql.Continuous, ql.NoFrequency)
    price = bond.cleanPriceOAS(*arguments)
    return price, bond.effectiveDuration(*arguments, 0.0025), bond.effectiveConvexity(*arguments, 0.0025)


@pytest.mark.long
def test_known_effective_duration_by_a_general_librarys_tree() -> None:
    """A bond-equivalent shift dy moves the continuous rate z = 2 ln(1 + y/2) by dz = dy / (1 + y/2), less dy^2 / 4.

    The tree's own convexity swings by 15 around this from one number of steps to the next.
    """
    price, duration, convexity = tree_bond(960)
    s = solver(Terms(240, 6, 6.0, 6, every(36, 240, 6)), refunding=0.012, valuation=0.012, cost=0.0)
    found = measured(s, np.full_like(HUMPED, 0.05))
    slope = 1.0 / 1.025
    assert found.value[0] == pytest.approx(price, abs=0.01)
    assert found.duration[0] == pytest.approx(duration * slope, abs=0.01)
    assert found.convexity[0] == pytest.approx((convexity + 0.5 * duration) * slope**2, abs=5.0)


def test_order_twelve_key_rate_durations_add_to_the_effective_duration() -> None:
    """Within third-order terms: 0.1 % at equal shifts, 0.03 years against the wider parallel one (a bond whose one
    right is three months off is the worst).
    """
    s = solver(*MIXED)
    found = measured(s)
    total = found.key_rate.sum(axis=1)
    np.testing.assert_allclose(total, found.duration, rtol=0.0, atol=0.03)
    assert np.abs(found.key_rate).max() > 1.0
    yields, dense = written_out(HUMPED, reading())
    narrow = shifted_discounts(yields, dense, key_rate_shifts(dense.tenor_months, KEY_SHIFT, KEY_SHIFT), 366)
    equal = rate_sensitivity(s, np.arange(len(MIXED)), narrow, KEY_SHIFT, KEY_SHIFT)
    np.testing.assert_allclose(total, equal.duration, rtol=1e-3)


def test_order_a_finer_grid_moves_no_duration() -> None:
    s, at = solver(*MIXED), curves(HUMPED, reading())
    units = np.arange(len(MIXED))
    coarse, fine = (values_on_curves(s, units, at, *grid) for grid in ((), (GRID_FINER,)))
    for measure, within in ((central_duration, 0.0005), (central_convexity, 0.5)):
        one, other = (measure(v[:, 1], v[:, 2], v[:, 0], SHIFT) for v in (coarse, fine))
        np.testing.assert_allclose(one, other, rtol=0.0, atol=within)


def test_order_a_curve_beside_others_gives_the_value_it_gives_alone() -> None:
    s, at = solver(*MIXED), curves(HUMPED, reading())
    units = np.arange(len(MIXED))
    together = values_on_curves(s, units, at)
    for column in (0, 2, 14):
        alone = values_on_curves(s, units, np.ascontiguousarray(at[:, [column]]))[:, 0]
        assert (alone == together[:, column]).all()


def test_limit_rights_out_of_reach_leave_the_straight_value() -> None:
    s = solver(Terms(120, 6, 5.0, 6, every(12, 120, 6, 1000.0)), Terms(120, 6, 5.0, 6))
    at, units = curves(HUMPED, reading()), np.arange(2)
    np.testing.assert_allclose(values_on_curves(s, units, at), straight_on_curves(s, units, at), rtol=1e-12)


def test_limit_a_bond_sure_to_be_called_has_the_duration_of_the_date_of_the_call() -> None:
    """A 15 % bond callable in a year only: two coupons and 100 in a year."""
    s = solver(Terms(240, 6, 15.0, 6, {12: 100.0}), Terms(12, 6, 15.0, 6))
    found = measured(s)
    assert found.value[0] == pytest.approx(found.value[1], abs=1e-6)
    assert found.duration[0] == pytest.approx(found.duration[1], abs=1e-6)
