"""Notice, puts, doubled sinking payments: the kernels against a dense grid that shares nothing with them."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from fine_grid import Security, fine_values

from projector.bonds.exercise.path_kernels import Dates, UnitTables, run_jobs
from projector.bonds.exercise.pricing import operator_for, operator_tables
from projector.bonds.exercise.settle_kernels import NEVER_PUT
from projector.bonds.exercise.solver_kernels import Rights
from projector.bonds.exercise.step_operator import GRID_FINE, GRID_HALF_YEAR, GRID_MONTHLY, Grid

A, SIGMA = 0.03, 0.01
DENSE = 6e-4  # per 100, error of the dense grid itself


def curve_of(level: float, slope: float, spread: float):
    """P(t) of a zero curve level + slope x (1 - e^(-t/5)) and a spread."""
    return lambda t: float(np.exp(-(level + slope * (1.0 - np.exp(-t / 5.0)) + spread) * t))


def kernel_values(
    s: Security, step: int, curve, spreads: tuple[float, float], grid: Grid, copies: int = 1
) -> tuple[float, float]:
    """The same security through the tables of months."""
    last = max(s.flows)
    shape = (1, last + 1)
    flow, price, put = np.zeros(shape), np.full(shape, np.inf), np.full(shape, NEVER_PUT)
    outstanding, double = np.ones(shape), np.zeros(shape)
    cost = 0.0
    for m, amount in s.flows.items():
        flow[0, m] = amount
    for m, (k, bar) in s.calls.items():
        price[0, m] = k
        cost = bar - k
    for m, k in s.puts.items():
        put[0, m] = k
    for m, (share, bar, par) in s.doubles.items():
        double[0, m], outstanding[0, m:] = share, par / 100.0
        cost = (bar - par) / par * 100.0
    tables = UnitTables(np.array([last]), flow, price, put, outstanding, double)
    lag = s.notice if s.calls else s.put_notice
    put_lag = s.put_notice if s.puts else lag
    offset = (last - lag - 1) % step + 1
    at = Dates(0, offset, step, lag, put_lag)
    discount = np.array([curve(m / 12.0) for m in range(last + 1)])[:, None]
    op = operator_for(A, SIGMA, step, offset, (last - offset) // step + 1, grid, lag % step)
    rights = Rights(lag // step, put_lag // step, True, lag > 0, bool(s.puts), bool(s.doubles))
    issuer, holder = np.empty(copies), np.empty(copies)
    zeros = np.zeros(copies, dtype=np.int64)
    run_jobs(
        operator_tables(op), at, zeros, zeros, tables, cost, np.full(copies, spreads[0]), np.full(copies, spreads[1]),
        discount, rights, issuer, holder,
    )  # fmt: skip
    return float(issuer[0]), float(holder[0])


def bullet(years: int, rate: float) -> dict[int, float]:
    """Half-yearly payments per 100."""
    flows = dict.fromkeys(range(6, 12 * years + 1, 6), 50.0 * rate)
    flows[12 * years] += 100.0
    return flows


def both_roads(s: Security, step: int, spreads: tuple[float, float], grid: Grid) -> list[tuple[float, float]]:
    """Kernel and dense grid, on a rising curve."""
    level, slope = 0.035, 0.01
    mine = kernel_values(s, step, curve_of(level, slope, 0.0), spreads, grid)
    return [mine, fine_values(A, SIGMA, *(curve_of(level, slope, x) for x in spreads), s)]


@pytest.mark.parametrize("notice", [1, 2, 3])
@pytest.mark.parametrize("spreads", [(0.01, 0.01), (0.01, 0.016)])
def test_order_half_year_rights_with_notice_are_those_of_the_dense_grid(notice, spreads):
    calls = dict.fromkeys(range(24, 120, 6), (100.0, 100.5))
    mine, dense = both_roads(Security(bullet(10, 0.055), calls, notice=notice), 6, spreads, GRID_HALF_YEAR)
    assert mine == pytest.approx(dense, abs=0.002 + DENSE)
    fine, _ = both_roads(Security(bullet(10, 0.055), calls, notice=notice), 6, spreads, GRID_FINE)
    assert fine == pytest.approx(dense, abs=0.0003 + DENSE)


@pytest.mark.parametrize("notice", [0, 1, 2, 3])
def test_order_monthly_rights_with_notice_and_accrued_between_coupons_are_those_of_the_dense_grid(notice):
    rate = 0.06
    calls = {}
    for m in range(12, 60):
        accrued = 50.0 * rate * (m % 6) / 6.0
        calls[m] = (101.0 + accrued, 101.3 + accrued)
    mine, dense = both_roads(Security(bullet(5, rate), calls, notice=notice), 1, (0.012, 0.015), GRID_MONTHLY)
    assert mine == pytest.approx(dense, abs=0.004 + DENSE)


@pytest.mark.parametrize("put_notice", [0, 1])
@pytest.mark.parametrize("notice", [0, 1])
def test_order_calls_and_puts_on_one_date_are_those_of_the_dense_grid(notice, put_notice):
    calls = dict.fromkeys(range(36, 120, 6), (101.0, 101.5))
    puts = {60: 98.0, 84: 98.0}
    s = Security(bullet(10, 0.05), calls, puts, notice=notice, put_notice=put_notice)
    step = 6 if notice == put_notice else 1
    mine, dense = both_roads(s, step, (0.012, 0.015), GRID_FINE)
    assert mine == pytest.approx(dense, abs=0.0005 + DENSE)


def sinker(years: int, rate: float, share: float) -> tuple[dict[int, float], dict[int, float]]:
    """Payments and par left when `share` of the par is repaid on every second coupon date from year three."""
    left, flows, outstanding = 1.0, {}, {}
    for m in range(6, 12 * years + 1, 6):
        flows[m] = 50.0 * rate * left
        repaid = left if m == 12 * years else (share if m >= 36 and m % 12 == 0 else 0.0)
        flows[m] += 100.0 * repaid
        left -= repaid
        outstanding[m] = left
    return flows, outstanding


def test_order_a_sinking_fund_with_the_option_to_double_is_that_of_the_dense_grid():
    flows, left = sinker(10, 0.055, 0.1)
    doubles = {m: (0.1 / left[m], 100.5 * left[m], 100.0 * left[m]) for m in range(36, 120, 12)}
    mine, dense = both_roads(Security(flows, doubles=doubles), 6, (0.01, 0.013), GRID_FINE)
    assert mine == pytest.approx(dense, abs=0.0005 + DENSE)


def test_limit_a_right_to_double_is_worth_nothing_when_nothing_may_be_doubled():
    flows, left = sinker(10, 0.055, 0.1)
    doubles = {m: (1e-12, 100.5 * left[m], 100.0 * left[m]) for m in range(36, 120, 12)}
    mine = kernel_values(Security(flows, doubles=doubles), 6, curve_of(0.035, 0.01, 0.0), (0.01, 0.01), GRID_FINE)
    plain = sum(amount * curve_of(0.035, 0.01, 0.01)(m / 12.0) for m, amount in flows.items())
    assert mine[0] == pytest.approx(plain, abs=1e-5)  # what the range of the grid leaves


def test_order_every_month_of_notice_is_worth_something_to_the_holder():
    """Notice is the issuer's loss: he must decide before he knows the rate of the day."""
    curve, values = curve_of(0.035, 0.01, 0.0), []
    for notice in range(4):
        calls = dict.fromkeys(range(24, 120, 6), (100.0, 100.0))
        s = Security(bullet(10, 0.055), calls, notice=notice)
        values.append(kernel_values(s, 6, curve, (0.01, 0.01), GRID_FINE)[1])
    assert all(0.02 < b - a < 0.15 for a, b in pairwise(values)), values


def test_order_a_put_raises_and_a_call_lowers_the_holder_s_value():
    curve, flows = curve_of(0.035, 0.01, 0.0), bullet(10, 0.05)
    calls, puts = dict.fromkeys(range(36, 120, 6), (100.0, 100.0)), {60: 97.0}
    plain, called, put, both = (
        kernel_values(Security(flows, c, p), 6, curve, (0.01, 0.01), GRID_FINE)[1]
        for c, p in (({}, {60: 1e-3}), (calls, {}), ({}, puts), (calls, puts))
    )
    assert called < both < put
    assert called < plain < put
