"""The solver's kernel and its plain twin, lane by lane; and what a lane's bits may not depend on."""

from __future__ import annotations

import importlib.util
import os
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import mpmath
import numpy as np
import pytest

import projector
from projector.arithmetic.elementary import exp_array, exp_one, log_one
from projector.bonds.exercise import plain
from projector.bonds.exercise.model import ShortRateModel
from projector.bonds.exercise.path_kernels import Dates, UnitTables, run_jobs, straight_values, upper_bounds
from projector.bonds.exercise.plain import plain_straight_value, plain_upper_bound, plain_values
from projector.bonds.exercise.pricing import Problem, operator_for, operator_tables, solve
from projector.bonds.exercise.settle_kernels import NEVER_PUT
from projector.bonds.exercise.solver_kernels import Rights
from projector.bonds.exercise.step_operator import GRID_FINE, GRID_FINER, GRID_HALF_YEAR, GRID_MONTHLY

EXERCISE = Path(projector.__file__).parent / "bonds" / "exercise"


def random_problem(rng: np.random.Generator, lanes: int, longest: int, step: float, spread: float) -> Problem:
    """Securities of mixed lives, rights, costs and curves: European, windows, rights with gaps, none at all.

    Coupons lie around the curve, so that going on crosses the bar inside the grid.
    """
    top = longest + 1
    steps = rng.integers(3, longest + 1, lanes)
    ratio, flow = np.ones((top, lanes)), np.zeros((top, lanes))
    price, bar = np.full((top, lanes), np.inf), np.full((top, lanes), np.inf)
    for lane, n in enumerate(steps):
        t = np.arange(n + 1) * step
        level = rng.uniform(0.01, 0.07)
        discount = np.exp(-(level + rng.uniform(-0.01, 0.01) * np.exp(-t / 5.0)) * t)
        ratio[:n, lane] = discount[1:] / discount[:-1]
        flow[1 : n + 1, lane] = 100.0 * step * (level + rng.uniform(-0.005, 0.02))
        flow[n, lane] += 100.0
        kind = rng.integers(0, 7)  # 0 none, 1 European, 2 a window, 3 every other date, else all to maturity
        first = int(rng.integers(1, n))
        last = first if kind == 1 else (n - 1 if kind != 2 else int(rng.integers(first, n)))
        if kind != 0:
            every = 2 if kind == 3 else 1
            k = np.arange(first, last + 1, every)
            price[k, lane] = 100.0 + rng.uniform(0.0, 3.0) * np.linspace(1.0, 0.0, k.size)
            bar[:, lane] = price[:, lane] + rng.choice([0.0, 0.5, 1.5])
    return Problem(steps, ratio, ratio * np.exp(-spread * step), flow, price, bar)


def lane_of(problem: Problem, lane: int) -> list[np.ndarray]:
    """One security's columns in the order the twin takes them."""
    return [x[:, lane] for x in (problem.ratio, problem.holder_ratio, problem.flow, problem.price, problem.bar)]


def lanes_of(problem: Problem, lanes: np.ndarray) -> Problem:
    """Some of the securities, as a problem of their own."""
    columns = (problem.ratio, problem.holder_ratio, problem.flow, problem.price, problem.bar)
    return Problem(problem.steps[lanes], *(np.ascontiguousarray(x[:, lanes]) for x in columns))


@pytest.fixture
def kinks(monkeypatch: pytest.MonkeyPatch) -> list[float]:
    """The jumps of every correction the twin makes: shows that a comparison met what it compares."""
    met: list[float] = []
    own = plain.corrections

    def counted(curve: np.polynomial.Polynomial, theta: float, jump: float) -> np.ndarray:
        met.append(jump)
        return own(curve, theta, jump)

    monkeypatch.setattr(plain, "corrections", counted)
    return met


@pytest.mark.parametrize(
    ("step", "offset", "longest", "grid", "spread"),
    [
        (6, 6, 14, GRID_HALF_YEAR, 0.0),
        (6, 6, 12, GRID_MONTHLY, 0.01),
        (6, 1, 12, GRID_HALF_YEAR, 0.005),
        (6, 4, 10, GRID_HALF_YEAR, -0.004),
        (1, 1, 36, GRID_MONTHLY, 0.01),
        (12, 5, 8, GRID_FINE, 0.002),
        (3, 2, 9, GRID_FINE, 0.0),
        (6, 3, 6, GRID_FINER, 0.01),
    ],
)
@pytest.mark.parametrize(("a", "sigma"), [(0.03, 0.01), (0.0, 0.008), (-0.01, 0.012)])
def test_order_kernel_and_plain_twin_agree(step, offset, longest, grid, spread, a, sigma, kinks):
    rng = np.random.default_rng(step * 1000 + offset * 10 + longest)
    problem = random_problem(rng, 12, longest, step / 12.0, spread)
    op = operator_for(a, sigma, step, offset, longest, grid)
    issuer, holder = solve(op, problem)
    for lane in range(12):
        n = int(problem.steps[lane])
        twin = plain_values(ShortRateModel(a, sigma), step, offset, grid, n, *lane_of(problem, lane))
        assert (issuer[lane], holder[lane]) == pytest.approx(twin, rel=1e-12), lane
    assert len(kinks) >= 14  # kinks corrected inside the range, not only values carried back
    assert sum(abs(jump) > 1e-3 for jump in kinks) >= 5


def test_limit_two_newton_steps_end_close_to_the_crossing(monkeypatch):
    """What the kernel and the twin share, the place of the kink, against bisection on the same quintic."""
    worst, own = [], plain.kink_place

    def compared(curve: np.polynomial.Polynomial, bar: float) -> float:
        low, high = 0.0, 1.0
        for _ in range(60):
            middle = 0.5 * (low + high)
            low, high = (middle, high) if curve(middle) > bar else (low, middle)
        found = own(curve, bar)
        worst.append(abs(found - low))
        return found

    monkeypatch.setattr(plain, "kink_place", compared)
    problem = random_problem(np.random.default_rng(21), 30, 16, 0.5, 0.01)
    for lane in range(30):
        n = int(problem.steps[lane])
        plain_values(ShortRateModel(0.03, 0.01), 6, 6, GRID_HALF_YEAR, n, *lane_of(problem, lane))
    assert len(worst) > 50
    assert max(worst) < 1e-5


def test_order_the_holder_s_recursion_changes_no_bit_of_the_issuer_s():
    problem = random_problem(np.random.default_rng(9), 40, 20, 0.5, 0.01)
    op = operator_for(0.03, 0.01, 6, 2, 20, GRID_HALF_YEAR)
    both, alone = solve(op, problem, True), solve(op, problem, False)
    assert both[0].tobytes() == alone[0].tobytes() == alone[1].tobytes()
    same = replace(problem, holder_ratio=problem.ratio, bar=problem.price)
    issuer, holder = solve(op, same)
    # no cost and one curve: one value, but for what two Newton steps leave of the jump
    assert holder == pytest.approx(issuer, rel=1e-8)


def test_limit_a_price_at_maturity_or_today_is_no_right():
    problem = random_problem(np.random.default_rng(10), 20, 20, 0.5, 0.01)
    price, bar = problem.price.copy(), problem.bar.copy()
    for row in (np.zeros(20, dtype=np.int64), problem.steps):
        price[row, np.arange(20)] = 90.0
        bar[row, np.arange(20)] = 90.5
    op = operator_for(0.03, 0.01, 6, 6, 20, GRID_HALF_YEAR)
    for with_them, without in zip(solve(op, replace(problem, price=price, bar=bar)), solve(op, problem)):
        assert with_them.tobytes() == without.tobytes()


def test_order_one_solve_alone_and_sixteen_together_give_the_same_bits():
    problem = random_problem(np.random.default_rng(5), 37, 30, 0.5, 0.01)
    op = operator_for(0.03, 0.01, 6, 6, 30, GRID_HALF_YEAR)
    together = solve(op, problem)
    for lane in range(37):
        alone = solve(op, lanes_of(problem, np.array([lane])))
        assert (alone[0][0], alone[1][0]) == (together[0][lane], together[1][lane])


def test_order_neighbours_and_places_never_change_a_lane():
    problem = random_problem(np.random.default_rng(6), 48, 24, 0.5, 0.004)
    op = operator_for(0.03, 0.01, 6, 6, 24, GRID_HALF_YEAR)
    order = np.random.default_rng(7).permutation(48)
    for straight, shuffled in zip(solve(op, problem), solve(op, lanes_of(problem, order))):
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


CALLS_ONLY = Rights(0, 0, True, False, False, False)


def plain_tables(maturity: np.ndarray, flow: np.ndarray, price: np.ndarray) -> UnitTables:
    """Securities with calls and nothing else."""
    return UnitTables(maturity, flow, price, np.full(flow.shape, NEVER_PUT), np.ones(flow.shape), np.zeros(flow.shape))


def job_problem(
    u: int, p: int, tables: tuple[np.ndarray, ...], dates: tuple[int, int, int], cost: float,
    spreads: tuple[float, float], discount: np.ndarray,
) -> Problem:  # fmt: skip
    """One job's own arrays: nothing collapsed, no neighbours, the discount multiplied up step by step."""
    (maturity, flow, price), (month, offset, step) = tables, dates
    n = (int(maturity[u]) - month - offset) // step + 1
    months = month + offset + np.arange(n) * step
    d = np.concatenate([[1.0], discount[months - month, p]])
    columns = []
    for spread in spreads:
        decay = np.full(n, exp_one(-spread * step / 12.0))
        decay[0] = exp_one(-spread * offset / 12.0)
        columns.append(np.append(d[1:] / d[:-1] * decay, 1.0))
    due = np.concatenate([[np.inf], price[u, months[:-1]], [np.inf]])
    columns += [np.concatenate([[0.0], flow[u, months]]), due, due + cost]
    return Problem(np.array([n]), *(x[:, None] for x in columns))


@pytest.mark.parametrize(("month", "offset"), [(2, 4), (0, 6), (17, 1)])
def test_order_jobs_on_paths_keep_their_bits_alone_and_are_the_solves_of_their_own_arrays(month, offset):
    rng = np.random.default_rng(11)
    maturity, flow, price = path_tables(rng, 9, 120)
    live = np.flatnonzero(maturity > month + 6)
    discount = np.exp(-np.array([0.02, 0.035, 0.05])[None, :] * np.arange(121)[:, None] / 12.0)
    unit, path = (a.ravel().astype(np.int64) for a in np.meshgrid(live, np.arange(3), indexing="ij"))
    mine, theirs = rng.uniform(0.0, 0.02, unit.size), rng.uniform(0.0, 0.02, unit.size)
    op = operator_for(0.03, 0.01, 6, offset, 20, GRID_HALF_YEAR)

    def on_paths(jobs: np.ndarray) -> np.ndarray:
        out = np.empty((2, jobs.size))
        run_jobs(operator_tables(op), Dates(month, offset, 6, 0, 0), unit[jobs], path[jobs],
                 plain_tables(maturity, flow, price), 0.5, mine[jobs], theirs[jobs], discount, CALLS_ONLY, out[0],
                 out[1])  # fmt: skip
        return out

    together = on_paths(np.arange(unit.size))
    for job in range(unit.size):
        assert on_paths(np.array([job]))[:, 0].tobytes() == together[:, job].tobytes()
        own = solve(op, job_problem(
            int(unit[job]), int(path[job]), (maturity, flow, price), (month, offset, 6), 0.5, (mine[job], theirs[job]),
            discount,
        ))  # fmt: skip
        assert together[:, job] == pytest.approx([own[0][0], own[1][0]], rel=1e-13)


def test_order_jobs_in_another_order_keep_their_bits():
    rng = np.random.default_rng(12)
    maturity, flow, price = path_tables(rng, 20, 240)
    discount = np.exp(-rng.uniform(0.01, 0.06, 5)[None, :] * np.arange(241)[:, None] / 12.0)
    unit, path = (a.ravel().astype(np.int64) for a in np.meshgrid(np.arange(20), np.arange(5), indexing="ij"))
    op = operator_for(0.03, 0.01, 6, 6, 40, GRID_HALF_YEAR)

    def run(order: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        out = np.empty(100), np.empty(100)
        run_jobs(operator_tables(op), Dates(0, 6, 6, 0, 0), unit[order], path[order],
                 plain_tables(maturity, flow, price), 0.5, np.full(100, 0.01), np.full(100, 0.02), discount,
                 CALLS_ONLY, *out)  # fmt: skip
        return out

    order = rng.permutation(100)
    for ordered, mixed in zip(run(np.arange(100)), run(order)):
        assert ordered[order].tobytes() == mixed.tobytes()


def test_order_bounds_and_straight_values_agree_with_plain_sums():
    rng = np.random.default_rng(13)
    maturity, flow, price = path_tables(rng, 12, 120)
    discount = np.exp(-rng.uniform(0.01, 0.06, 4)[None, :] * np.arange(121)[:, None] / 12.0)
    units, spread, alive = np.arange(12), rng.uniform(0.0, 0.02, 12), np.ones((12, 4), dtype=np.bool_)
    alive[3, 2] = False
    bounds, values = np.empty((12, 4)), np.zeros((12, 4))
    tables = plain_tables(maturity, flow, price)
    upper_bounds(Dates(0, 6, 6, 0, 0), units, tables, 0.5, spread, discount, alive, bounds)
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
            assert values[u, p] == pytest.approx(plain_straight_value(d, flow[u, m]), rel=1e-12)


@pytest.mark.parametrize("month", [1, 4, 11])
def test_order_straight_values_between_payments_agree_with_plain_sums(month):
    rng = np.random.default_rng(15)
    maturity, flow, _ = path_tables(rng, 12, 120)
    discount = np.exp(-rng.uniform(0.01, 0.06, 4)[None, :] * np.arange(121)[:, None] / 12.0)
    spread, values = rng.uniform(0.0, 0.02, 12), np.empty((12, 4))
    everyone = np.ones((12, 4), dtype=np.bool_)
    straight_values(month, 6, np.arange(12), maturity, flow, spread, discount, everyone, values)
    for u in range(12):
        ahead = np.arange(1, maturity[u] - month + 1)
        d = discount[ahead] * np.exp(-spread[u] * ahead / 12.0)[:, None]
        plain_ones = [plain_straight_value(d[:, p], flow[u, month + ahead]) for p in range(4)]
        assert values[u] == pytest.approx(plain_ones, rel=1e-12)


PATHS_CODE = """
import numpy as np
from projector.bonds.exercise.path_kernels import (
    Dates, UnitTables, announced_values, run_jobs, straight_values, upper_bounds,
)
from projector.bonds.exercise.pricing import operator_for, operator_tables
from projector.bonds.exercise.settle_kernels import NEVER_PUT
from projector.bonds.exercise.solver_kernels import Rights
from projector.bonds.exercise.step_operator import GRID_HALF_YEAR, GRID_MONTHLY
out = []
rounds = ((0, 6, 6, GRID_HALF_YEAR, 0, 0), (2, 4, 6, GRID_HALF_YEAR, 0, 0), (4, 1, 6, GRID_MONTHLY, 1, 0),
          (0, 1, 1, GRID_MONTHLY, 2, 1), (0, 5, 6, GRID_HALF_YEAR, 1, 2), (0, 6, 6, GRID_HALF_YEAR, 0, 3))
for month, offset, step, grid, lag, kind in rounds:
    maturity = np.array([18, 30, 24])
    flow, price = np.zeros((3, 31)), np.full((3, 31), np.inf)
    for u, m in enumerate(maturity):
        flow[u, 6 : m + 1 : 6] = 2.6 + 0.1 * u
        flow[u, m] += 100.0
    price[0, 6:18:6], price[1, 12:30:6] = 100.0, 101.0
    put, left, double = np.full((3, 31), NEVER_PUT), np.ones((3, 31)), np.zeros((3, 31))
    if kind in (1, 2):
        put[0, 12], put[2, 12:24:6] = 98.0, 99.0
    if kind == 3:
        double[1, 12:30:6], left[1, 12:] = 0.2, 0.8
    tables = UnitTables(maturity, flow, price, put, left, double)
    at = Dates(month, offset - (1 if offset == 1 and step == 6 else 0) or 6, step, lag, lag)
    rights = Rights(lag // step, lag // step, True, lag > 0, kind in (1, 2), kind == 3)
    discount = np.exp(-np.array([0.03, 0.06])[None, :] * np.arange(31)[:, None] / 12.0)
    unit, path = np.array([0, 0, 1, 1, 2]), np.array([0, 1, 0, 1, 0])
    issuer, holder, bounds, values = np.empty(5), np.empty(5), np.empty((3, 2)), np.zeros((3, 2))
    op = operator_tables(operator_for(0.03, 0.01, step, at.offset, 30, grid, lag % step))
    run_jobs(op, at, unit, path, tables, 0.5, np.full(5, 0.01), np.full(5, 0.012), discount, rights, issuer, holder)
    settled = np.empty(5)
    announced_values(month, unit, np.full(5, month + 2), np.full(5, 101.0), flow, np.full(5, 0.01), discount, path,
                     settled)
    alive, spread = np.array([[True, True], [True, False], [True, True]]), np.full(3, 0.01)
    upper_bounds(at, np.arange(3), tables, 0.5, spread, discount, alive, bounds)
    straight_values(month, step, np.arange(3), maturity, flow, spread, discount, alive, values)
    out += [float(v).hex() for v in (*issuer, *holder, *settled, *bounds.ravel(), *values.ravel())]
print(" ".join(out))
"""


def path_figures(folder: Path, **extra: str) -> str:
    """The figures as hexadecimal, from a process of its own with its own kernel folder."""
    home = Path(projector.__file__).resolve().parents[1]
    environment = {**os.environ, "PYTHONPATH": str(home), "NUMBA_CACHE_DIR": str(folder), **extra}
    done = subprocess.run(
        [sys.executable, "-c", PATHS_CODE], env=environment, capture_output=True, text=True, check=True
    )
    return done.stdout


@pytest.mark.long
def test_order_path_kernels_as_python_and_with_index_checks_give_the_same_bits(tmp_path):
    compiled = path_figures(tmp_path / "compiled")
    assert len(compiled.split()) == 162
    assert path_figures(tmp_path / "python", NUMBA_DISABLE_JIT="1") == compiled
    assert path_figures(tmp_path / "checked", NUMBA_BOUNDSCHECK="1") == compiled


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
