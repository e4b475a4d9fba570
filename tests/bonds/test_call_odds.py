"""Odds of a call: they add to one, they re-price the value, and other roads lead to the same figures."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import brentq
from scipy.stats import norm
from valuation_bonds import HUMPED, MIXED, Terms, every, reading, solver

from projector.bonds.call_odds import CallOdds, call_odds, value_from_weights
from projector.bonds.exercise.model import ShortRateModel
from projector.bonds.exercise.path_kernels import Dates
from projector.bonds.exercise.step_operator import GRID_FINE
from projector.bonds.sensitivities import values_on_curves
from projector.bonds.solving import Jobs, MonthSolver
from projector.rates.key_rates import shifted_discounts, written_out


def curve(shift: float = 0.0) -> np.ndarray:
    return shifted_discounts(*written_out(HUMPED, reading()), np.full((1, 1), shift), 366)


def odds_of(s: MonthSolver, shift: float = 0.0) -> CallOdds:
    return call_odds(s, np.arange(len(s.bonds.ids)), curve(shift)[:, 0])


def with_spread(s: MonthSolver, spread: float, shift: float) -> np.ndarray:
    """Discounts [1, month] at a level spread."""
    months = np.arange(s.bonds.last_month + 1)
    return (curve(shift)[: months.size, 0] * np.exp(-spread * months / 12.0))[None, :]


@pytest.mark.parametrize("shift", [-0.03, -0.01, 0.0, 0.02])
@pytest.mark.parametrize(("reversion", "sigma"), [(0.03, 0.01), (0.0, 0.006), (0.15, 0.02), (-0.01, 0.008)])
def test_order_odds_and_never_add_to_one(shift: float, reversion: float, sigma: float) -> None:
    found = odds_of(solver(*MIXED, reversion=reversion, sigma=sigma), shift)
    np.testing.assert_allclose(found.odds.sum(axis=1) + found.never, 1.0, rtol=0.0, atol=1e-6)
    assert found.odds.min() > -1e-9
    assert found.never.min() > -1e-9
    assert found.never[-1] == 1.0
    live = np.isfinite(solver(*MIXED).bonds.clean_price)
    assert (found.odds[~live] == 0.0).all()


@pytest.mark.parametrize("shift", [-0.03, -0.01, 0.0, 0.02])
@pytest.mark.parametrize(("reversion", "sigma"), [(0.03, 0.01), (0.0, 0.006), (0.15, 0.02)])
def test_order_weights_of_payments_reprice_both_sides(shift: float, reversion: float, sigma: float) -> None:
    """The holder's value at the valuation spread, the issuer's cost at the refunding spread and the bars."""
    s = solver(*MIXED, reversion=reversion, sigma=sigma)
    b, units = s.bonds, np.arange(len(MIXED))
    found = odds_of(s, shift)
    held = value_from_weights(found, b.flow, b.dirty_price, with_spread(s, 0.012, shift))
    np.testing.assert_allclose(held, values_on_curves(s, units, curve(shift))[:, 0], rtol=0.0, atol=3e-4)
    owed = value_from_weights(found, b.flow, b.dirty_price + 0.5, with_spread(s, 0.01, shift))
    for u in units[:-1]:
        jobs = Jobs(s.groups(0, units[u : u + 1])[0][0], units[u : u + 1], np.zeros(1, np.int64))
        assert owed[u] == pytest.approx(s.solve(jobs, curve(shift), GRID_FINE, both=True)[0][0], abs=3e-4)


def test_known_one_right_has_the_odds_of_the_closed_form() -> None:
    """Jamshidian, J. of Finance 44(1), 1989: one critical state, normal under either measure (cited from memory)."""
    s = solver(Terms(120, 6, 5.2, 6, {60: 100.0}))
    model, b, d = ShortRateModel(0.03, 0.01), s.bonds, with_spread(s, 0.01, 0.0)[0]
    months = np.flatnonzero(b.flow[0, 61:]) + 61

    def going_on(x: float) -> float:
        ahead = (months - 60) / 12.0
        parts = [model.convexity(5.0, t) * np.exp(-model.g(t) * x) for t in ahead]
        return float((b.flow[0, months] * d[months] / d[60] * parts).sum()) - 100.5

    line, deviation = brentq(going_on, -0.3, 0.3, xtol=1e-15), np.sqrt(model.variance(5.0))
    found = odds_of(s)
    assert found.odds[0, 60] == pytest.approx(norm.cdf(line / deviation), abs=1e-7)
    assert found.called[0, 60] == pytest.approx(norm.cdf((line - model.mean(5.0)) / deviation), abs=1e-7)


def dense_odds(s: MonthSolver, a: float, sigma: float) -> np.ndarray:
    """Odds of one security whose months are whole steps, on thousands of states and without a kernel.

    Backward by a plain trapezoid sum with the least of bar and cost, forward by the same with the mass beyond the line
    cut off inside its cell. Its own error falls with the square of the cell.
    """
    b, model = s.bonds, ShortRateModel(a, sigma)
    step, end = int(b.step[0]), int(b.maturity[0])
    months = np.arange(step, end + 1, step)
    d = with_spread(s, 0.01, 0.0)[0]
    dt, g = step / 12.0, model.g(step / 12.0)
    x = np.linspace(-0.16, 0.16, 1601)
    dx = x[1] - x[0]
    decay, v = np.exp(-a * dt), model.variance(dt)

    def transition(mean: np.ndarray) -> np.ndarray:
        w = np.exp(-0.5 * (x[None, :] - mean[:, None]) ** 2 / v)
        return w / w.sum(axis=1, keepdims=True)  # what would leave the range stays at its edge

    lines = {}
    value = np.full(x.size, 0.0)
    for k in range(months.size - 2, -1, -1):
        m, n = months[k], months[k + 1]
        value = transition(decay * x + model.mean(dt)) @ (value + b.flow[0, n]) * np.exp(-g * x)
        value *= d[n] / d[m] * model.convexity(m / 12.0, dt)
        bar = b.dirty_price[0, m] + s.model.cost
        if np.isfinite(bar):
            lines[m] = float(np.interp(-bar, -value, x))
            value = np.minimum(value, bar)
    odds = np.zeros(end + 1)
    y = model.variance(months[0] / 12.0)
    mass = np.exp(-0.5 * x**2 / y) * dx / np.sqrt(2.0 * np.pi * y)
    cash = transition(decay * x)
    for k, m in enumerate(months[:-1]):
        if m in lines:
            whole = np.clip((x - lines[m]) / dx + 0.5, 0.0, 1.0)
            left = (x[1:] - lines[m]) / dx
            i = int(np.flatnonzero((left > 0.0) & (left <= 1.0))[0])
            whole[i], whole[i + 1] = 0.5 * left[i] ** 2, 0.5 + left[i] - 0.5 * left[i] ** 2
            kept = mass * whole
            odds[m], mass = mass.sum() - kept.sum(), kept
        mass = mass @ cash if k < months.size - 2 else mass
    return odds


@pytest.mark.parametrize(
    "terms",
    [Terms(120, 6, 5.5, 6, every(12, 120, 6)), Terms(96, 12, 6.0, 12, every(24, 96, 12, 103.0, 1.0)),
     Terms(18, 1, 5.0, 6, every(1, 18, 1)), Terms(60, 3, 5.0, 3, {12: 101.0, 15: 101.0, 30: 100.0})],
)  # fmt: skip
def test_known_odds_by_plain_integration_on_thousands_of_states(terms: Terms) -> None:
    """An independent twin: no shared table, kernel or correction."""
    s = solver(terms)
    found, plain = odds_of(s), dense_odds(s, 0.03, 0.01)
    np.testing.assert_allclose(found.odds[0], plain, rtol=0.0, atol=2e-5)
    assert plain.max() > 0.01


def test_limit_without_volatility_the_cheapest_date_is_certain() -> None:
    s = solver(Terms(120, 6, 9.0, 6, every(24, 120, 6)), Terms(120, 6, 1.0, 6, every(24, 120, 6)), sigma=0.0)
    found = odds_of(s)
    assert found.odds[0, 24] == 1.0
    assert found.never.tolist() == [0.0, 1.0]
    held = value_from_weights(found, s.bonds.flow, s.bonds.dirty_price, with_spread(s, 0.012, 0.0))
    jobs = Jobs(Dates(0, 6, 6, 0, 0), np.arange(2), np.zeros(2, np.int64))
    np.testing.assert_allclose(held, s.solve(jobs, curve(), GRID_FINE, both=True)[1], rtol=1e-13)


def test_limit_a_price_out_of_reach_is_never_paid_and_a_price_of_a_gift_at_once() -> None:
    found = odds_of(
        solver(
            Terms(120, 6, 5.0, 6, every(12, 120, 6, 500.0)),
            Terms(120, 6, 5.0, 6, dict.fromkeys(range(12, 120, 6), 10.0)),
        )
    )
    assert found.never[0] == pytest.approx(1.0, abs=1e-9)
    assert found.odds[1, 12] == pytest.approx(1.0, abs=1e-9)


def test_order_lower_rates_and_lower_prices_make_a_call_likelier() -> None:
    s = solver(*MIXED)
    never = [odds_of(s, shift).never for shift in (-0.02, -0.01, 0.0, 0.01)]
    assert (np.diff(np.array(never)[:, :-1], axis=0) > -1e-9).all()
    dear, cheap = (odds_of(solver(Terms(120, 6, 5.0, 6, every(12, 120, 6, k)))).never[0] for k in (103.0, 100.0))
    assert dear > 0.0
    assert cheap > 0.0
