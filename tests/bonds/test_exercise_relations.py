"""What must be true of callable values whatever the numbers: orderings and limits, on seeded random securities.

V is the issuer's cost unless said. It is the least, over the issuer's stopping rules, of the value of what he pays, so
a larger choice or a cheaper way lowers it.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from projector.bonds.exercise.pricing import Problem, operator_for, solve
from projector.bonds.exercise.step_operator import GRID_FINE, GRID_FINER, GRID_HALF_YEAR, GRID_MONTHLY

MODEL = (0.03, 0.01)
NOISE = 2e-4  # two solves on the fine grid


def bonds(seed: int, count: int = 24, periods: int = 40) -> Problem:
    """Half-year bonds on random curves with Bermudan rights of declining price, no cost, equal spreads."""
    rng = np.random.default_rng(seed)
    steps = rng.integers(4, periods + 1, count)
    ratio, flow = np.ones((periods + 1, count)), np.zeros((periods + 1, count))
    price = np.full((periods + 1, count), np.inf)
    for i, n in enumerate(steps):
        t = 0.5 * np.arange(n + 1)
        level = rng.uniform(0.01, 0.06)
        discount = np.exp(-(level + rng.uniform(-0.01, 0.015) * (1.0 - np.exp(-t / 7.0))) * t)
        ratio[:n, i] = discount[1:] / discount[:-1]
        flow[1 : n + 1, i] = 50.0 * (level + rng.uniform(-0.015, 0.025))
        flow[n, i] += 100.0
        first = int(rng.integers(1, n))
        price[first:n, i] = 100.0 + rng.choice([0.0, 2.5]) * np.maximum(1.0 - np.arange(n - first) / 12.0, 0.0)
    return Problem(steps, ratio, ratio, flow, price, price)


def cost_and_value(problem: Problem, sigma: float = MODEL[1], grid=GRID_FINE, a: float = MODEL[0]):
    return solve(operator_for(a, sigma, 6, 6, problem.flow.shape[0] - 1, grid), problem)


def straight(problem: Problem) -> np.ndarray:
    discount = np.cumprod(problem.ratio[:-1], axis=0)
    alive = np.arange(1, problem.flow.shape[0])[:, None] <= problem.steps[None, :]
    return (np.where(alive, problem.flow[1:], 0.0) * discount).sum(axis=0)


def with_price(problem: Problem, price: np.ndarray, cost: float = 0.0) -> Problem:
    return replace(problem, price=price, bar=price + cost)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_order_higher_volatility_never_raises_a_callable_bond(seed):
    problem = bonds(seed)
    values = [cost_and_value(problem, sigma)[0] for sigma in (0.004, 0.008, 0.012, 0.016)]
    assert (np.diff(values, axis=0) <= NOISE).all()


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_order_one_more_call_date_never_raises_the_value(seed):
    problem = bonds(seed)
    base = cost_and_value(problem)[0]
    price = problem.price.copy()
    for i, n in enumerate(problem.steps):
        first = int(np.flatnonzero(np.isfinite(price[:, i]))[0])
        if first > 1:
            price[first - 1, i] = price[first, i]
        assert first < n
    assert (cost_and_value(with_price(problem, price))[0] <= base + NOISE).all()


def test_limit_removing_every_call_gives_the_straight_value():
    problem = bonds(4)
    none = with_price(problem, np.full_like(problem.price, np.inf))
    assert cost_and_value(none)[0] == pytest.approx(straight(problem), rel=1e-13)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_order_callable_is_below_straight_and_below_every_policy_fixed_in_advance(seed):
    problem = bonds(seed)
    value = cost_and_value(problem)[0]
    assert (value <= straight(problem) + NOISE).all()
    discount = np.cumprod(problem.ratio[:-1], axis=0)
    paid = np.cumsum(problem.flow[1:] * discount, axis=0)
    always = np.where(np.isfinite(problem.price[1:]), paid + problem.price[1:] * discount, np.inf).min(axis=0)
    assert (value <= always + NOISE).all()


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_order_a_lower_call_price_never_raises_the_value(seed):
    problem = bonds(seed)
    assert (cost_and_value(with_price(problem, problem.price - 1.0))[0] <= cost_and_value(problem)[0] + NOISE).all()


def test_limit_a_call_price_out_of_reach_gives_the_straight_value_exactly():
    problem = bonds(5)
    far = with_price(problem, np.where(np.isfinite(problem.price), 1000.0, np.inf))
    for values in cost_and_value(far):
        assert values == pytest.approx(straight(problem), rel=1e-13)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_order_callable_next_period_is_worth_no_more_than_price_and_coupon_discounted(seed):
    problem = bonds(seed)
    price = problem.price.copy()
    price[1] = 100.0
    value = cost_and_value(with_price(problem, price))[0]
    assert (value <= (100.0 + problem.flow[1]) * problem.ratio[0] + NOISE).all()
    assert (np.minimum(value, 100.0) <= 100.0).all()  # callable today at 100: never more than 100


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_order_higher_rates_and_wider_spreads_lower_every_value(seed):
    problem = bonds(seed)
    higher = problem.ratio * np.exp(-0.002 * 0.5)
    up = replace(problem, ratio=higher, holder_ratio=higher)
    assert (cost_and_value(up)[0] <= cost_and_value(problem)[0] + NOISE).all()
    wider = replace(problem, holder_ratio=problem.ratio * np.exp(-0.005 * 0.5))
    assert (cost_and_value(wider)[1] <= cost_and_value(problem)[1] + NOISE).all()


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_order_a_higher_coupon_never_lowers_the_value(seed):
    problem = bonds(seed)
    richer = replace(problem, flow=problem.flow + 0.25 * (problem.flow > 0.0))
    assert (cost_and_value(richer)[0] >= cost_and_value(problem)[0] - NOISE).all()


def test_limit_a_zero_coupon_bond_callable_at_par_is_never_called_while_rates_are_positive():
    problem = bonds(6)
    flow = np.zeros_like(problem.flow)
    flow[problem.steps, np.arange(problem.steps.size)] = 100.0
    at_par = with_price(replace(problem, flow=flow), np.where(np.isfinite(problem.price), 100.0, np.inf))
    alive = np.arange(problem.flow.shape[0])[:, None] < problem.steps[None, :]
    lowest = np.where(alive, -np.log(problem.ratio) / 0.5, np.inf).min(axis=0)
    high = lowest > 0.025  # where a normal rate below zero is out of reach
    assert high.sum() >= 5
    value = cost_and_value(at_par, sigma=0.0015)[0]
    assert value[high] == pytest.approx(straight(at_par)[high], abs=1e-5)


def test_limit_scaling_by_two_doubles_every_value_bit_for_bit():
    problem = replace(bonds(7), bar=bonds(7).price + 0.5)
    double = replace(problem, flow=2.0 * problem.flow, price=2.0 * problem.price, bar=2.0 * problem.bar)
    for one, two in zip(cost_and_value(problem), cost_and_value(double)):
        assert (2.0 * one).tobytes() == two.tobytes()


@pytest.mark.parametrize("sigma", [1e-3, 1e-4, 1e-6])
def test_limit_without_volatility_the_cheapest_date_on_the_forward_curve_is_taken(sigma):
    problem = bonds(8)
    discount = np.cumprod(problem.ratio[:-1], axis=0)
    alive = np.arange(1, problem.flow.shape[0])[:, None] <= problem.steps[None, :]
    paid = np.cumsum(np.where(alive, problem.flow[1:], 0.0) * discount, axis=0)
    stop = np.where(np.isfinite(problem.price[1:]), paid + problem.price[1:] * discount, np.inf)
    least = np.minimum(stop.min(axis=0), paid[-1])
    value = cost_and_value(problem, sigma)[0]
    assert (value <= least + 1e-9).all()
    assert value == pytest.approx(least, abs=1500.0 * sigma)  # the time value left is of the order of sigma


@pytest.mark.parametrize(("grid", "bound"), [(GRID_MONTHLY, 0.01), (GRID_HALF_YEAR, 0.002), (GRID_FINE, 0.0003)])
@pytest.mark.parametrize("seed", [11, 12, 13])
def test_order_each_grid_keeps_its_promise_on_ninety_six_bonds(grid, bound, seed):
    problem = bonds(seed, 96, 60)
    reference = cost_and_value(problem, grid=GRID_FINER)[0]
    value = cost_and_value(problem, grid=grid)[0]
    assert np.abs(value - reference).max() <= bound
    assert (straight(problem) - value >= -bound).all()  # the option's value


@pytest.mark.parametrize(
    ("extra", "bound"), [(0.0, 0.002), (0.005, 0.004), (0.01, 0.006), (-0.01, 0.01), (0.03, 0.015)]
)
def test_order_the_holder_s_value_errs_by_the_difference_of_spreads(extra, bound):
    """Half-year grid; bounds about twice what was measured, by holder's spread less issuer's."""
    problem = bonds(14, 96, 60)
    apart = replace(problem, holder_ratio=problem.ratio * np.exp(-extra * 0.5), bar=problem.price + 0.5)
    gap = np.abs(cost_and_value(apart, grid=GRID_HALF_YEAR)[1] - cost_and_value(apart, grid=GRID_FINER)[1])
    assert gap.max() <= bound


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_order_a_cost_paid_to_others_never_hurts_the_holder(seed):
    problem = bonds(seed)
    without = cost_and_value(problem)[1]
    for cost in (0.5, 1.0, 2.0):
        assert (cost_and_value(replace(problem, bar=problem.price + cost))[1] >= without - NOISE).all()


@pytest.mark.parametrize(
    ("cost", "issuer", "holder"), [(0.0, 92.7285, 92.7285), (0.5, 92.9672, 92.7305), (2.0, 93.6611, 92.7570)]
)
def test_pinned_thirty_year_five_per_cent_at_par_on_a_flat_curve(cost, issuer, holder):
    """Own figures: flat 4.5 % continuous, half-year coupons, callable at par from half a year, a 3 %, sigma 1 %."""
    n = 60
    ratio = np.full((n + 1, 1), np.exp(-0.045 * 0.5))
    flow, price = np.full((n + 1, 1), 2.5), np.full((n + 1, 1), 100.0)
    flow[n] += 100.0
    price[[0, n]] = np.inf
    found = cost_and_value(Problem(np.array([n]), ratio, ratio, flow, price, price + cost), grid=GRID_FINER)
    assert (found[0][0], found[1][0]) == pytest.approx((issuer, holder), abs=6e-5)


@pytest.mark.parametrize("a", [1e-9, 1e-6, 1e-4])
def test_limit_small_mean_reversion_is_continuous_at_zero(a):
    problem = bonds(9)
    assert cost_and_value(problem, a=a)[0] == pytest.approx(cost_and_value(problem, a=0.0)[0], abs=100.0 * a + 1e-6)


def test_limit_negative_rates_and_fifty_years_give_sound_values():
    n = 100
    for rate in (-0.01, -0.005, 0.0, 0.15):
        ratio = np.full((n + 1, 1), np.exp(-rate * 0.5))
        flow, price = np.full((n + 1, 1), 1.0), np.full((n + 1, 1), 100.0)
        flow[n] += 100.0
        price[[0, n]] = np.inf
        problem = Problem(np.array([n]), ratio, ratio, flow, price, price)
        coarse, fine = cost_and_value(problem, grid=GRID_HALF_YEAR)[0], cost_and_value(problem, grid=GRID_FINER)[0]
        assert coarse == pytest.approx(fine, abs=0.002)
        assert fine[0] <= straight(problem)[0] + 1e-9
