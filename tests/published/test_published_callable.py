"""Callable bonds under Hull-White against values made elsewhere: an independent integration, closed forms, a tree.

Values: `callable_values.json` beside this file (own reference values by an independent method, not published figures);
Hull, Options, Futures, and Other Derivatives, three-year put on a nine-year zero bond (recalled from memory, equal to
the closed form); Jamshidian, An Exact Bond Option Formula, J. of Finance 44(1), 1989, for European options.
"""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import QuantLib as ql
from scipy.optimize import brentq
from scipy.stats import norm

from projector.bonds.exercise.model import ShortRateModel
from projector.bonds.exercise.pricing import Problem, operator_for, solve
from projector.bonds.exercise.settle_kernels import NEVER_PUT
from projector.bonds.exercise.step_operator import GRID_FINE, GRID_HALF_YEAR, GRID_MONTHLY, GRID_REFERENCE, Grid

VALUES = json.loads(Path(__file__).with_name("callable_values.json").read_text(encoding="utf-8"))
CASES = {case["id"]: case for case in VALUES["cases"]}
PROMISED = {GRID_MONTHLY: 0.01, GRID_HALF_YEAR: 0.002, GRID_FINE: 0.0003, GRID_REFERENCE: 2e-5}


def zero_rate(nodes: list[list[float]], years: np.ndarray) -> np.ndarray:
    table = np.array(nodes)
    return np.interp(years, table[:, 0], table[:, 1])


def grid_of(months: list[int]) -> tuple[int, int]:
    """Largest step of 12, 6, 3, 1 months that all dates share, and the months to the first date."""
    for step in (12, 6, 3, 1):
        offsets = {(m - 1) % step + 1 for m in months}
        if len(offsets) == 1:
            return step, offsets.pop()
    raise AssertionError


def problem_of(case: dict[str, Any], shift: float = 0.0) -> tuple[int, int, Problem]:
    """Step, offset and arrays of one case."""
    flows, calls, puts = ({int(m): a for m, a in case.get(name, [])} for name in ("flows", "calls", "puts"))
    step, offset = grid_of([*flows, *calls, *puts])
    n = (max(flows) - offset) // step + 1
    months = np.array([0] + [offset + k * step for k in range(n)])
    years = months / 12.0
    discount = np.exp(-(zero_rate(case["zero_nodes"], years) + case["spread"] + shift) * years)
    ratio = np.append(discount[1:] / discount[:-1], 1.0)[:, None]
    flow = np.array([flows.get(int(m), 0.0) for m in months])[:, None]
    price = np.array([calls.get(int(m), np.inf) for m in months])[:, None]
    put = np.array([puts.get(int(m), NEVER_PUT) for m in months])[:, None] if puts else None
    return step, offset, Problem(np.array([n]), ratio, ratio, flow, price, price, put)


def price_of(case: dict[str, Any], grid: Grid, shift: float = 0.0) -> float:
    step, offset, problem = problem_of(case, shift)
    op = operator_for(case["a"], case["sigma"], step, offset, int(problem.steps[0]), grid)
    return float(solve(op, problem)[0][0])


@pytest.mark.parametrize("name", CASES)
@pytest.mark.parametrize("grid", [GRID_REFERENCE, GRID_FINE, GRID_HALF_YEAR, GRID_MONTHLY])
def test_known_callable_price_by_an_independent_integration(name: str, grid: Grid) -> None:
    case = CASES[name]
    assert price_of(case, grid) == pytest.approx(case["dirty_price"], abs=PROMISED[grid])


@pytest.mark.parametrize("name", CASES)
def test_known_effective_duration_at_25_bp(name: str) -> None:
    case = CASES[name]
    up, down, base = (price_of(case, GRID_REFERENCE, s) for s in (0.0025, -0.0025, 0.0))
    assert (down - up) / (2.0 * base * 0.0025) == pytest.approx(case["duration"], abs=0.002)


@pytest.mark.parametrize("name", CASES)
def test_known_the_stored_tree_of_a_general_library_is_near(name: str) -> None:
    """QuantLib 1.44, TreeCallableFixedRateBondEngine, 1,600 steps, stored with the case; its own error is to 0.0067."""
    case = CASES[name]
    assert price_of(case, GRID_REFERENCE) == pytest.approx(case["tree_1600"], abs=0.01)


@pytest.mark.parametrize("name", CASES)
def test_limit_without_rights_the_straight_value_comes_back(name: str) -> None:
    case = {**CASES[name], "calls": [], "puts": []}
    assert price_of(case, GRID_HALF_YEAR) == pytest.approx(CASES[name]["straight"], abs=1e-6)


def zero_call(model: ShortRateModel, p_t: float, p_s: float, t: float, s: float, strike: float) -> float:
    """European call on a zero bond. Source: Jamshidian 1989; Hull and White 1990 (cited from memory)."""
    deviation = model.g(s - t) * np.sqrt(model.variance(t))
    h = np.log(p_s / (p_t * strike)) / deviation + 0.5 * deviation
    return float(p_s * norm.cdf(h) - strike * p_t * norm.cdf(h - deviation))


def solved_zero_call(a: float, sigma: float, p_t: float, p_s: float, t: int, s: int, strike: float) -> float:
    """The same option as the issuer's right on a zero bond: straight value less callable value."""
    step = int(np.gcd(12 * t, 12 * s))
    n, k = 12 * s // step, 12 * t // step
    discount = np.ones(n + 1)
    discount[1 : k + 1] = p_t ** (np.arange(1, k + 1) / k)
    discount[k:] = p_t * (p_s / p_t) ** (np.arange(n - k + 1) / (n - k))
    ratio = np.append(discount[1:] / discount[:-1], 1.0)[:, None]
    flow, price = np.zeros((n + 1, 1)), np.full((n + 1, 1), np.inf)
    flow[n], price[k] = 100.0, 100.0 * strike
    op = operator_for(a, sigma, step, step, n, GRID_REFERENCE)
    value = solve(op, Problem(np.array([n]), ratio, ratio, flow, price, price))[0][0]
    return float(100.0 * p_s - value) / 100.0


@pytest.mark.parametrize("case", VALUES["zero_bond_options"], ids=lambda c: c["id"])
def test_known_zero_bond_options_by_closed_form_and_by_the_solver(case: dict[str, Any]) -> None:
    t, s, k = case["expiry"], case["maturity"], case["strike"]
    p_t, p_s = (float(np.exp(-zero_rate(case["zero_nodes"], np.array([y]))[0] * y)) for y in (t, s))
    closed = zero_call(ShortRateModel(case["a"], case["sigma"]), p_t, p_s, t, s, k)
    assert closed == pytest.approx(case["call"], abs=2e-9)
    assert closed - p_s + k * p_t == pytest.approx(case["put"], abs=2e-9)
    assert solved_zero_call(case["a"], case["sigma"], p_t, p_s, t, s, k) == pytest.approx(case["call"], abs=1e-7)


def test_known_three_year_put_on_a_nine_year_zero_from_the_handbook() -> None:
    """Hull, Options, Futures, and Other Derivatives, general tree-building example, zero curve of 8 July 1994: 1.8093.

    Curve and value recalled from memory; zero rates continuously compounded, linear in days / 365.
    """
    days = [3, 31, 62, 94, 185, 367, 731, 1096, 1461, 1826, 2194, 2558, 2922, 3287, 3653]
    percent = [5.01772, 4.98282, 4.97234, 4.96157, 4.99058, 5.09389, 5.79733, 6.30595, 6.73464, 6.94816, 7.08807,
               7.27527, 7.30852, 7.39790, 7.49015]  # fmt: skip
    p_t, p_s = (float(np.exp(-np.interp(365.0 * y, days, percent) / 100.0 * y)) for y in (3.0, 9.0))
    call = solved_zero_call(0.1, 0.01, p_t, p_s, 3, 9, 0.63)
    assert 100.0 * (call - p_s + 0.63 * p_t) == pytest.approx(1.8093, abs=0.0006)


@pytest.mark.parametrize(
    ("a", "sigma", "first", "n"), [(0.03, 0.01, 10, 30), (0.1, 0.015, 4, 20), (0.0, 0.006, 20, 60)]
)
def test_known_european_call_on_a_coupon_bond_by_decomposition(a: float, sigma: float, first: int, n: int) -> None:
    """Jamshidian 1989: an option on a coupon bond is a sum of options on zero bonds struck at the critical state."""
    model, t = ShortRateModel(a, sigma), 0.5 * np.arange(n + 1)
    discount = np.exp(-(0.04 + 0.01 * np.exp(-t / 6.0)) * t)
    coupon, strike = 2.6, 101.0
    later = np.arange(first + 1, n + 1)
    amount = np.full(later.size, coupon)
    amount[-1] += 100.0

    def zeros(x: float) -> np.ndarray:
        tau = t[later] - t[first]
        return np.array(
            [discount[k] / discount[first] * model.convexity(t[first], u) * np.exp(-model.g(u) * x)
             for k, u in zip(later, tau)]
        )  # fmt: skip

    critical = brentq(lambda x: float(amount @ zeros(x)) - strike, -0.5, 0.5)
    option = sum(
        c * zero_call(model, discount[first], discount[k], t[first], t[k], z)
        for c, k, z in zip(amount, later, zeros(critical))
    )
    flow, price = np.full((n + 1, 1), coupon), np.full((n + 1, 1), np.inf)
    flow[n] += 100.0
    price[first] = strike
    ratio = np.append(discount[1:] / discount[:-1], 1.0)[:, None]
    op = operator_for(a, sigma, 6, 6, n, GRID_REFERENCE)
    value = solve(op, Problem(np.array([n]), ratio, ratio, flow, price, price))[0][0]
    straight = float(discount[1:] @ flow[1:, 0])
    assert straight - value == pytest.approx(option, abs=2e-7)


@pytest.mark.parametrize(("coupon", "years", "first"), [(0.05, 10, 2), (0.06, 20, 5), (0.035, 15, 3)])
def test_known_a_tree_made_now_by_the_general_library_is_near(coupon: float, years: int, first: int) -> None:
    """QuantLib's Hull-White tree at 240 steps; its error on such bonds is to 0.05."""
    saved = ql.Settings.instance().evaluationDate
    try:
        today, count = ql.Date(30, 6, 2022), ql.Thirty360(ql.Thirty360.BondBasis)
        ql.Settings.instance().evaluationDate = today
        curve = ql.YieldTermStructureHandle(ql.FlatForward(today, 0.045, count))
        dates = ql.Schedule(today, today + ql.Period(years, ql.Years), ql.Period(6, ql.Months), ql.NullCalendar(),
                            ql.Unadjusted, ql.Unadjusted, ql.DateGeneration.Backward, False)  # fmt: skip
        calls = ql.CallabilitySchedule()
        for day in list(dates)[2 * first : -1]:
            calls.append(ql.Callability(ql.BondPrice(100.0, ql.BondPrice.Clean), ql.Callability.Call, day))
        bond = ql.CallableFixedRateBond(0, 100.0, dates, [coupon], count, ql.Unadjusted, 100.0, today, calls)
        bond.setPricingEngine(ql.TreeCallableFixedRateBondEngine(ql.HullWhite(curve, 0.03, 0.01), 240))
        tree = bond.NPV()
    finally:
        ql.Settings.instance().evaluationDate = saved
    n = 2 * years
    flows = [[6 * k, 50.0 * coupon + (100.0 if k == n else 0.0)] for k in range(1, n + 1)]
    case = {"zero_nodes": [[0, 0.045], [40, 0.045]], "spread": 0.0, "a": 0.03, "sigma": 0.01, "flows": flows,
            "calls": [[6 * k, 100.0] for k in range(2 * first, n)]}  # fmt: skip
    assert price_of(case, GRID_FINE) == pytest.approx(tree, abs=0.06)
