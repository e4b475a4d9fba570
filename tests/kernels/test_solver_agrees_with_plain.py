"""The solver's kernel and its plain twin, lane by lane; and what a lane's bits may not depend on."""

from __future__ import annotations

import importlib.util
from pathlib import Path

import mpmath
import numpy as np
import pytest

import projector
from projector.arithmetic.elementary import exp_array, exp_one, log_one
from projector.bonds.exercise.model import ShortRateModel
from projector.bonds.exercise.path_kernels import run_jobs, straight_values, upper_bounds
from projector.bonds.exercise.plain import plain_upper_bound, plain_values
from projector.bonds.exercise.pricing import Problem, operator_arguments, operator_for, solve
from projector.bonds.exercise.step_operator import GRID_FINE, GRID_HALF_YEAR, GRID_MONTHLY

EXERCISE = Path(projector.__file__).parent / "bonds" / "exercise"


def random_problem(rng: np.random.Generator, lanes: int, longest: int, step: float, spread: float) -> Problem:
    """Securities of mixed lives, rights, costs and curves; some European, some with windows, some without a right."""
    top = longest + 1
    steps = rng.integers(3, longest + 1, lanes)
    ratio, flow = np.ones((top, lanes)), np.zeros((top, lanes))
    price, bar = np.full((top, lanes), np.inf), np.full((top, lanes), np.inf)
    for lane, n in enumerate(steps):
        t = np.arange(n + 1) * step
        zero = rng.uniform(0.01, 0.07) + rng.uniform(-0.01, 0.01) * np.exp(-t / 5.0)
        discount = np.exp(-zero * t)
        ratio[:n, lane] = discount[1:] / discount[:-1]
        flow[1 : n + 1, lane] = rng.uniform(1.0, 4.0)
        flow[n, lane] += 100.0
        kind = rng.integers(0, 5)
        first = int(rng.integers(1, n))
        last = first if kind == 1 else (n - 1 if kind != 2 else int(rng.integers(first, n)))
        if kind != 0:
            price[first : last + 1, lane] = 100.0 + rng.uniform(0.0, 3.0) * np.linspace(1.0, 0.0, last - first + 1)
            bar[:, lane] = price[:, lane] + rng.choice([0.0, 0.5, 1.5])
    return Problem(steps, ratio, ratio * np.exp(-spread * step), flow, price, bar)


@pytest.mark.parametrize(
    ("step", "offset", "longest", "grid", "spread"),
    [
        (6, 6, 14, GRID_HALF_YEAR, 0.0),
        (6, 6, 12, GRID_MONTHLY, 0.01),
        (6, 1, 12, GRID_HALF_YEAR, 0.005),
        (6, 4, 10, GRID_HALF_YEAR, -0.004),
        (1, 1, 20, GRID_MONTHLY, 0.01),
        (12, 5, 8, GRID_FINE, 0.002),
        (3, 2, 9, GRID_FINE, 0.0),
    ],
)
@pytest.mark.parametrize(("a", "sigma"), [(0.03, 0.01), (0.0, 0.008), (-0.01, 0.012)])
def test_order_kernel_and_plain_twin_agree(step, offset, longest, grid, spread, a, sigma):
    rng = np.random.default_rng(step * 1000 + offset * 10 + longest)
    problem = random_problem(rng, 6, longest, step / 12.0, spread)
    op = operator_for(a, sigma, step, offset, longest, grid)
    issuer, holder = solve(op, problem)
    for lane in range(6):
        n = int(problem.steps[lane])
        pick = [x[:, lane] for x in (problem.ratio, problem.holder_ratio, problem.flow, problem.price, problem.bar)]
        twin = plain_values(ShortRateModel(a, sigma), step, offset, grid, n, *pick)
        # the kernel stops after two Newton steps at the kink, the twin bisects: 1e-9 of the value is theirs to differ
        assert (issuer[lane], holder[lane]) == pytest.approx(twin, rel=1e-9), lane


def test_order_one_solve_alone_and_sixteen_together_give_the_same_bits():
    problem = random_problem(np.random.default_rng(5), 37, 30, 0.5, 0.01)
    op = operator_for(0.03, 0.01, 6, 6, 30, GRID_HALF_YEAR)
    together = solve(op, problem)
    for lane in range(37):
        alone = Problem(
            problem.steps[[lane]], *(np.ascontiguousarray(x[:, [lane]]) for x in
            (problem.ratio, problem.holder_ratio, problem.flow, problem.price, problem.bar)),
        )  # fmt: skip
        assert solve(op, alone) == (together[0][lane], together[1][lane])


def test_order_neighbours_and_places_never_change_a_lane():
    problem = random_problem(np.random.default_rng(6), 48, 24, 0.5, 0.004)
    op = operator_for(0.03, 0.01, 6, 6, 24, GRID_HALF_YEAR)
    order = np.random.default_rng(7).permutation(48)
    mixed = Problem(
        problem.steps[order], *(x[:, order] for x in
        (problem.ratio, problem.holder_ratio, problem.flow, problem.price, problem.bar)),
    )  # fmt: skip
    for straight, shuffled in zip(solve(op, problem), solve(op, mixed)):
        assert straight[order].tobytes() == shuffled.tobytes()


def test_order_room_in_the_operator_changes_no_bit():
    problem = random_problem(np.random.default_rng(8), 16, 20, 0.5, 0.004)
    short = solve(operator_for(0.03, 0.01, 6, 6, 20, GRID_HALF_YEAR), problem)
    long = solve(operator_for(0.03, 0.01, 6, 6, 300, GRID_HALF_YEAR), problem)
    assert short[0].tobytes() == long[0].tobytes()
    assert short[1].tobytes() == long[1].tobytes()


def path_tables(rng: np.random.Generator, units: int, months: int) -> tuple[np.ndarray, ...]:
    """Flows, dirty prices and maturities on the monthly axis, half-year payments, rights on some payment months."""
    maturity = rng.integers(3, months // 6 + 1, units) * 6
    flow, price = np.zeros((units, months + 1)), np.full((units, months + 1), np.inf)
    for u, m in enumerate(maturity):
        flow[u, 6 : m + 1 : 6] = rng.uniform(1.5, 3.5)
        flow[u, m] += 100.0
        first = int(rng.integers(1, m // 6)) * 6
        price[u, first:m:6] = 100.0 + rng.uniform(0.0, 2.0)
    return maturity, flow, price


def test_order_jobs_on_paths_are_the_solves_of_their_own_arrays():
    rng = np.random.default_rng(11)
    maturity, flow, price = path_tables(rng, 9, 120)
    month, offset, step, cost = 2, 4, 6, 0.5
    tau = np.arange(121)[:, None]
    discount = np.exp(-np.array([0.02, 0.035, 0.05])[None, :] * tau / 12.0)
    unit, path = (a.ravel().astype(np.int64) for a in np.meshgrid(np.arange(9), np.arange(3), indexing="ij"))
    issuer_spread, holder_spread = np.full(27, 0.012), np.full(27, 0.015)
    op = operator_for(0.03, 0.01, step, offset, 20, GRID_HALF_YEAR)
    issuer, holder = np.empty(27), np.empty(27)
    run_jobs(*operator_arguments(op), month, offset, step, unit, path, maturity, flow, price, cost, issuer_spread,
             holder_spread, discount, True, issuer, holder)  # fmt: skip
    for job in range(27):
        u, p = unit[job], path[job]
        n = (maturity[u] - month - offset) // step + 1
        months = month + offset + np.arange(n) * step
        d = np.concatenate([[1.0], discount[months - month, p]])
        years = np.concatenate([[0.0], (months - month) / 12.0])
        curve, held = d * np.exp(-0.012 * years), d * np.exp(-0.015 * years)
        rows = [np.append(x[1:] / x[:-1], 1.0) for x in (curve, held)]
        own_flow = np.concatenate([[0.0], flow[u, months]])
        own_price = np.concatenate([[np.inf], price[u, months]])
        own_price[-1] = np.inf
        columns = [x[:, None] for x in (*rows, own_flow, own_price, own_price + cost)]
        alone = solve(op, Problem(np.array([n]), *columns))
        assert (issuer[job], holder[job]) == pytest.approx((alone[0][0], alone[1][0]), rel=1e-12)


def test_order_jobs_in_another_order_keep_their_bits():
    rng = np.random.default_rng(12)
    maturity, flow, price = path_tables(rng, 20, 240)
    discount = np.exp(-rng.uniform(0.01, 0.06, 5)[None, :] * np.arange(241)[:, None] / 12.0)
    unit, path = (a.ravel().astype(np.int64) for a in np.meshgrid(np.arange(20), np.arange(5), indexing="ij"))
    op = operator_for(0.03, 0.01, 6, 6, 40, GRID_HALF_YEAR)

    def run(order: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        out = np.empty(100), np.empty(100)
        run_jobs(*operator_arguments(op), 0, 6, 6, unit[order], path[order], maturity, flow, price, 0.5,
                 np.full(100, 0.01), np.full(100, 0.02), discount, True, *out)  # fmt: skip
        return out

    order = rng.permutation(100)
    for plain, mixed in zip(run(np.arange(100)), run(order)):
        assert plain[order].tobytes() == mixed.tobytes()


def test_order_bounds_and_straight_values_agree_with_plain_sums():
    rng = np.random.default_rng(13)
    maturity, flow, price = path_tables(rng, 12, 120)
    discount = np.exp(-rng.uniform(0.01, 0.06, 4)[None, :] * np.arange(121)[:, None] / 12.0)
    units, spread, alive = np.arange(12), rng.uniform(0.0, 0.02, 12), np.ones((12, 4), dtype=np.bool_)
    alive[3, 2] = False
    bounds, values = np.empty((12, 4)), np.zeros((12, 4))
    upper_bounds(0, 6, units, maturity, flow, price, 0.5, spread, discount, alive, bounds)
    straight_values(0, 6, units, maturity, flow, spread, discount, alive, values)
    for u in range(12):
        m = np.arange(1, maturity[u] + 1)
        for p in range(4):
            d = discount[m, p] * np.exp(-spread[u] * m / 12.0)
            if not alive[u, p]:
                assert bounds[u, p] == -np.inf
                assert values[u, p] == 0.0
                continue
            bar = price[u, m] + 0.5
            bar[-1] = np.inf
            assert bounds[u, p] == pytest.approx(plain_upper_bound(d, flow[u, m], bar), rel=1e-12)
            assert values[u, p] == pytest.approx(float((flow[u, m] * d).sum()), rel=1e-12)


def test_pinned_the_unrolled_bands_are_what_their_writer_writes():
    spec = importlib.util.spec_from_file_location("band_writer_again", EXERCISE / "band_writer.py")
    assert spec is not None
    assert spec.loader is not None
    writer = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(writer)
    assert (EXERCISE / "band_kernels.py").read_text(encoding="utf-8") == writer.band_kernels()


def test_known_own_exponential_and_logarithm_against_fifty_digits():
    """Reference: mpmath at 50 digits."""
    rng = np.random.default_rng(14)
    mpmath.mp.dps = 50
    for x in np.concatenate([rng.uniform(-700.0, 700.0, 300), rng.uniform(-1.0, 1.0, 300)]):
        true = mpmath.exp(mpmath.mpf(float(x)))
        assert abs(float((mpmath.mpf(exp_one(float(x))) - true) / true)) < 3e-16
    for x in np.concatenate([np.exp(rng.uniform(-600.0, 600.0, 300)), rng.uniform(0.9, 1.1, 300)]):
        true = mpmath.log(mpmath.mpf(float(x)))
        assert abs(float((mpmath.mpf(log_one(float(x))) - true) / true)) < 3e-16


def test_limit_own_exponential_and_logarithm_at_their_ends():
    assert exp_one(0.0) == 1.0
    assert log_one(1.0) == 0.0
    assert exp_one(-1000.0) == 0.0
    assert exp_one(1000.0) == np.inf
    assert log_one(0.0) == -np.inf
    assert np.isnan(log_one(-1.0))
    assert exp_array(np.array([[0.0, 1.0]])).shape == (1, 2)
    assert exp_array(np.array([0.3]))[0] == exp_one(0.3)
