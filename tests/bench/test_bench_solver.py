"""The pricing function against a general library's tree, in one run: ratios, errors by grid. Asserts no times."""

from __future__ import annotations

import time
from collections.abc import Callable

import numpy as np
import pytest
import QuantLib as ql

from projector.bonds.exercise.pricing import Problem, operator_for, solve
from projector.bonds.exercise.step_operator import GRID_FINE, GRID_HALF_YEAR, GRID_MONTHLY, Grid

pytestmark = pytest.mark.bench

FINE = Grid(0.12, 8.0, 8.0)


def best(work: Callable[[], object], repeats: int) -> float:
    """Shortest seconds of one call."""
    work()
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        work()
        times.append(time.perf_counter() - start)
    return min(times)


def thirty_years(lanes: int) -> Problem:
    """30-year 5 % semiannual bonds callable at par on every coupon date, on flat curves around 4.5 %."""
    n, rates = 60, 0.045 + np.linspace(-0.005, 0.005, lanes) * (lanes > 1)
    discount = np.exp(-rates[None, :] * (np.arange(n + 1) * 0.5)[:, None])
    ratio = np.ones((n + 1, lanes))
    ratio[:n] = discount[1:] / discount[:-1]
    flow = np.full((n + 1, lanes), 2.5)
    flow[n] += 100.0
    price = np.full((n + 1, lanes), np.inf)
    price[1:n] = 100.0
    return Problem(np.full(lanes, n), ratio, ratio, flow, price, price)


def tree_price(steps: int) -> tuple[Callable[[], float], float]:
    """The same bond by a trinomial Hull-White tree of a general pricing library."""
    today = ql.Date(30, 12, 2022)
    ql.Settings.instance().evaluationDate = today
    count = ql.Thirty360(ql.Thirty360.BondBasis)
    curve = ql.YieldTermStructureHandle(ql.FlatForward(today, 0.045, count))
    schedule = ql.Schedule(today, ql.Date(30, 12, 2052), ql.Period(6, ql.Months), ql.NullCalendar(), ql.Unadjusted,
                           ql.Unadjusted, ql.DateGeneration.Backward, False)  # fmt: skip
    calls = ql.CallabilitySchedule()
    for day in list(schedule)[1:-1]:
        calls.append(ql.Callability(ql.BondPrice(100.0, ql.BondPrice.Clean), ql.Callability.Call, day))
    bond = ql.CallableFixedRateBond(0, 100.0, schedule, [0.05], count, ql.Unadjusted, 100.0, today, calls)
    bond.setPricingEngine(ql.TreeCallableFixedRateBondEngine(ql.HullWhite(curve, 0.03, 0.01), steps))

    def price() -> float:
        bond.recalculate()
        return float(bond.NPV())

    return price, price()


def test_bench_one_value_and_sixteen_against_the_tree() -> None:
    """Seconds a value: tree at 240 steps, one at a time, sixteen curves at a time, in the same run."""
    saved = ql.Settings.instance().evaluationDate
    try:
        price, value = tree_price(240)
        tree = best(price, 7)
    finally:
        ql.Settings.instance().evaluationDate = saved
    one, sixteen = thirty_years(1), thirty_years(16)
    reference = solve(operator_for(0.03, 0.01, 6, 6, 60, FINE), one)[0][0]
    print(f"\ntree, 240 steps: {1e3 * tree:.2f} ms, error {value - reference:+.4f} per 100")
    for grid in (GRID_MONTHLY, GRID_HALF_YEAR):
        op = operator_for(0.03, 0.01, 6, 6, 60, grid)
        single = best(lambda op=op: solve(op, one, False), 300)
        batch = best(lambda op=op: solve(op, sixteen, False), 300) / 16.0
        error = solve(op, one, False)[0][0] - reference
        print(
            f"kappa {grid.kappa}: one {1e6 * single:.1f} us ({tree / single:,.0f} times faster), sixteen at a time"
            f" {1e6 * batch:.1f} us ({tree / batch:,.0f} times), error {error:+.5f}"
        )
    assert abs(value - reference) < 0.06


def random_set(seed: int, count: int = 96) -> list[tuple[float, float, Problem, Problem]]:
    """Random semiannual callable bonds: model parameters, problem at equal spreads and with +100 bp for holders."""
    rng = np.random.default_rng(seed)
    out = []
    for _ in range(count):
        n = int(rng.integers(4, 61))
        t = np.arange(n + 1) * 0.5
        level, slope = rng.uniform(0.02, 0.06), rng.uniform(-0.01, 0.02)
        zero = level + slope * (1.0 - np.exp(-t / 8.0))
        discount = np.exp(-zero * t)
        ratio = np.ones((n + 1, 1))
        ratio[:n, 0] = discount[1:] / discount[:-1]
        coupon = 100.0 * (level + rng.uniform(-0.015, 0.025)) / 2.0
        flow = np.full((n + 1, 1), coupon)
        flow[n] += 100.0
        price = np.full((n + 1, 1), np.inf)
        first = int(rng.integers(1, max(2, n - 1)))
        price[first:n, 0] = 100.0 + rng.choice([0.0, coupon]) * np.maximum(1.0 - np.arange(n - first) / 20.0, 0.0)
        bar = price + rng.choice([0.0, 0.5, 1.0])
        steps = np.array([n])
        equal = Problem(steps, ratio, ratio, flow, price, bar)
        wider = Problem(steps, ratio, ratio * np.exp(-0.01 * 0.5), flow, price, bar)
        out.append((float(rng.choice([0.0, 0.01, 0.03, 0.1])), float(rng.uniform(0.005, 0.015)), equal, wider))
    return out


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_bench_errors_of_the_production_grids(seed: int) -> None:
    """Worst errors on 96 random bonds: issuer's value, and the holder's at equal and at +100 bp spreads."""
    cases = random_set(seed)
    promised = {1.0: 0.01, 0.8: 0.002, 0.5: 0.0003}
    print(f"\nseed {seed}: kappa, worst issuer, worst holder at equal spreads, worst holder at +100 bp")
    for grid in (GRID_MONTHLY, GRID_HALF_YEAR, GRID_FINE):
        worst = np.zeros(3)
        for a, sigma, equal, wider in cases:
            values = []
            for g in (FINE, grid):
                op = operator_for(a, sigma, 6, 6, int(equal.steps[0]), g)
                issuer, holder = solve(op, equal)
                values.append((issuer[0], holder[0], solve(op, wider)[1][0]))
            worst = np.maximum(worst, np.abs(np.subtract(values[1], values[0])))
        print(f"  {grid.kappa:<4} {worst[0]:.6f} {worst[1]:.6f} {worst[2]:.6f}")
        assert worst[0] <= promised[grid.kappa]
