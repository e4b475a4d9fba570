"""Decisions on paths: what a bound settles solving would settle alike, near ties are looked at again, months are those
of a plain search, and the key of what is kept holds what it must and nothing else.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from projection_studies import BUSY_SEGMENTS, busy_study, totals

from projector.bonds.calibration import HIGHEST, PriceToday, calibrate
from projector.bonds.call_rules import Opportunity, OptimalWithCost
from projector.bonds.decisions import DecisionPass, DecisionRows, unit_key
from projector.bonds.exercise.model import ShortRateModel
from projector.bonds.exercise.path_kernels import Dates
from projector.bonds.exercise.plain import plain_values
from projector.bonds.exercise.settle_kernels import NEVER_PUT
from projector.bonds.exercise.step_operator import GRID_FINE, GRID_FINER, GRID_HALF_YEAR
from projector.bonds.mapped import MappedBonds
from projector.bonds.solving import ExerciseModel, Jobs, MonthSolver, production_grid
from projector.bonds.spreads import SpreadPath
from projector.run.block import discounts_of
from projector.run.prepare import Prepared, prepare
from projector.study.reading import read_study

A, SIGMA, COST = 0.03, 0.01, 0.5
MONTHS = 60


def bonds() -> MappedBonds:
    """Four securities: half-year rights from month 12, declining; monthly rights; one European; one without.

    The last two pay between half-years, so they carry accrued interest at month 0.
    """
    terms = [(54, 6, 6.0, range(12, 54, 6)), (48, 1, 5.5, range(6, 48)), (58, 6, 5.0, [28]), (45, 6, 4.0, [])]
    last = 60
    coupon, accrued = np.zeros((4, last + 1)), np.zeros((4, last + 1))
    price = np.full((4, last + 1), np.inf)
    principal, outstanding = np.zeros((4, last + 1)), np.ones((4, last + 1))
    for u, (maturity, _, rate, rights) in enumerate(terms):
        for m in range(maturity, 0, -6):
            coupon[u, m] = rate / 2.0
        months = np.arange(maturity)
        accrued[u, :maturity] = rate / 2.0 * ((months - maturity) % 6) / 6.0
        for i, m in enumerate(rights):
            price[u, m] = max(100.0, 102.0 - 0.5 * i) if u == 0 else 100.0
        principal[u, maturity] = 100.0
        outstanding[u, maturity:] = 0.0
    maturity = np.array([t[0] for t in terms])
    return MappedBonds(
        ids=("A", "B", "C", "D"), ratings=("A",) * 4, maturity=maturity, step=np.array([t[1] for t in terms]),
        coupon_step=np.full(4, 6), coupon=coupon, accrued=accrued, clean_price=price,
        put_price=np.full((4, last + 1), NEVER_PUT), outstanding=outstanding, principal=principal,
        redemption=np.full(4, 100.0), double_share=np.zeros((4, last + 1)), call_lag=np.zeros(4, dtype=np.int64),
        put_lag=np.zeros(4, dtype=np.int64), announced=np.zeros(4, dtype=np.bool_),
    )  # fmt: skip


def spreads(refunding: float = 0.01, valuation: float = 0.012) -> SpreadPath:
    months = MONTHS + 1
    return SpreadPath(np.full((4, months), valuation), np.ones(months), np.zeros(4), np.full((4, months), refunding))


def solver(cost: float = COST, sigma: float = SIGMA) -> MonthSolver:
    return MonthSolver(bonds(), spreads(), ExerciseModel(A, sigma, cost))


def rate(month: int) -> np.ndarray:
    """Flat continuously compounded rates of five paths that fall, rise, or sit near the refunding level."""
    return np.array([0.045, 0.045 - 0.0005 * month, 0.045 + 0.0005 * month, 0.02, 0.042 - 0.0002 * month])


def discounts(month: int) -> np.ndarray:
    return np.exp(-rate(month)[None, :] * np.arange(MONTHS + 1)[:, None] / 12.0)


def run(s: MonthSolver, rows: DecisionRows | None = None):
    return DecisionPass(s, OptimalWithCost(), MONTHS).run(discounts, 5, rows)


def plain_month(u: int, p: int) -> int:
    """First month in which going on costs at least the bar, by the plain twin on finer grids and no bound."""
    s = solver()
    b = s.bonds
    for month in np.flatnonzero(np.isfinite(b.clean_price[u])):
        step = int(b.step[u])
        ahead = np.arange(month + step, b.maturity[u] + 1, step)
        d = np.concatenate([[1.0], discounts(int(month))[ahead - month, p]]) * np.exp(
            -0.01 * np.concatenate([[0.0], ahead - month]) / 12.0
        )
        ratio = np.append(d[1:] / d[:-1], 1.0)
        flow = np.concatenate([[0.0], b.flow[u, ahead]])
        price = np.concatenate([[np.inf], b.dirty_price[u, ahead]])
        price[-1] = np.inf
        grid = GRID_FINE if step == 1 else GRID_FINER
        going_on = plain_values(ShortRateModel(A, SIGMA), step, step, grid, ahead.size, ratio, ratio, flow, price,
                                price + COST)[0]  # fmt: skip
        if going_on >= b.dirty_price[u, month] + COST:
            return int(month)
    return -1


def test_order_call_months_are_those_of_a_plain_search_without_bounds():
    months = run(solver()).months()
    for u, p in ((0, 0), (0, 1), (0, 2), (0, 3), (1, 1), (1, 3), (2, 1), (2, 3), (2, 4)):
        assert months[u, p] == plain_month(u, p), (u, p)
    assert (months[3] == -1).all()
    assert len({int(m) for m in months.ravel()}) > 3


def test_order_what_the_bound_settles_solving_settles_alike():
    s, rows = solver(), DecisionRows()
    run(s, rows)
    frame = rows.frame()
    held = frame[frame["by"] == 0]
    assert len(held) > 20
    for row in held.itertuples():
        u, m = int(row.unit), int(row.month)
        step = int(s.bonds.step[u])
        jobs = Jobs(Dates(m, step, step, 0, 0), np.array([u]), np.array([int(row.path)]))
        value = s.solve(jobs, discounts(m), GRID_FINER, False)[0][0]
        assert value <= row.upper_bound + 1e-6
        assert value < row.bar
        assert row.share == 0.0


def no_bound(s: MonthSolver, at: Dates, units: np.ndarray, discount: np.ndarray, alive: np.ndarray) -> Any:
    """In place of the deterministic bound: everything alive is solved."""
    return np.where(alive, np.inf, -np.inf)


def test_order_call_months_without_the_bound_are_the_same(monkeypatch, busy):
    """Four securities on five paths, and a study with two segments on its seven."""

    def all_months() -> list[np.ndarray]:
        p = busy.prepared
        of_study = DecisionPass(p.solver, p.rule, p.months).run(discounts_of(p, 0, 7), 7)
        return [run(solver()).months(), of_study.months()]

    rows = DecisionRows()
    run(solver(), rows)
    assert (rows.frame()["by"] == 0).sum() > 20
    with_bound = all_months()
    monkeypatch.setattr(MonthSolver, "bounds", no_bound)
    for one, two in zip(with_bound, all_months()):
        assert (one == two).all()
    assert all((m >= 0).any() and (m < 0).any() for m in with_bound)
    rows = DecisionRows()
    run(solver(), rows)
    assert (rows.frame()["by"] > 0).all()


def test_order_a_decision_is_that_of_its_path_alone():
    together = run(solver()).months()
    for p in range(5):
        alone = DecisionPass(solver(), OptimalWithCost(), MONTHS).run(lambda m, p=p: discounts(m)[:, [p]].copy(), 1)
        assert (alone.months()[:, 0] == together[:, p]).all()


def test_order_every_row_says_what_its_figures_say():
    rows = DecisionRows()
    run(solver(), rows)
    frame = rows.frame()
    solved = frame[frame["by"] > 0]
    assert ((solved["continuation"] >= solved["bar"]) == (solved["share"] > 0.0)).all()
    assert frame.loc[frame["by"] == 0, "continuation"].isna().all()
    assert not frame.duplicated(["unit", "path", "month"]).any()
    assert (solved["continuation"] <= solved["upper_bound"] + 0.01).all()  # but for the grid's error
    assert (solved["upper_bound"] >= solved["bar"]).all()
    off = (solved["continuation"] - solved["bar"]).abs()
    monthly = solved["unit"] == 1
    assert (off[monthly & (solved["by"] == 1)] >= 0.002).all()
    assert (off[~monthly & (solved["by"] == 1)] >= 0.005).all()


def going_on(decide: DecisionPass, at: Dates, units: np.ndarray, bar: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Issuer's cost of going on on the first path, solved against a bar, and which grid settled it."""
    sure, no_put = np.full((1, 1), np.inf), np.full((1, 1), -np.inf)
    discount = discounts(at.month)[:, :1].copy()
    cost, _, by = decide.continuations(at, units, sure, bar[:, None], no_put, discount)
    return cost[0], by[0]


def test_limit_a_near_tie_is_solved_again_on_finer_grids():
    s = solver()
    month, u = 24, np.array([0])
    jobs = Jobs(Dates(month, 6, 6, 0, 0), u, np.array([0]))
    value = s.solve(jobs, discounts(month), GRID_FINER, False)[0]
    decide = DecisionPass(s, OptimalWithCost(), MONTHS)
    for gap, code in ((0.05, 1), (0.003, 2), (0.00003, 3)):
        for side in (gap, -gap):
            found, by = going_on(decide, jobs.at, u, value + side)
            assert by[0] == code
            assert found[0] == pytest.approx(value[0], abs=0.002)
    coarse, fine, finer = (
        s.solve(jobs, discounts(month), g, False)[0] for g in (GRID_HALF_YEAR, GRID_FINE, GRID_FINER)
    )
    assert len({coarse[0], fine[0], finer[0]}) == 3
    for gap, grid in ((0.05, coarse), (0.003, fine), (0.00003, finer)):
        found, _ = going_on(decide, jobs.at, u, finer + gap)
        assert found[0] == grid[0]  # and by that very grid


def test_limit_the_tie_band_of_monthly_grids_is_narrower():
    s, u, p = solver(), np.array([1]), np.array([0])
    at = Dates(24, 1, 1, 0, 0)
    value = s.solve(Jobs(at, u, p), discounts(24), GRID_FINER, False)[0]
    decide = DecisionPass(s, OptimalWithCost(), MONTHS)
    for gap, code in ((0.05, 1), (0.003, 1), (0.001, 2), (0.00003, 3)):
        assert going_on(decide, at, u, value + gap)[1][0] == code


def test_order_a_called_security_is_asked_no_more_and_is_called_once():
    rows = DecisionRows()
    events = run(solver(), rows)
    frame = rows.frame()
    called = frame[frame["share"] > 0.0].groupby(["unit", "path"])["month"]
    assert (called.count() == 1).all()
    last = frame.groupby(["unit", "path"])["month"].max()
    assert (last.loc[called.min().index] == called.min()).all()
    assert (events.share == 1.0).all()


def test_order_ties_call():
    told = Opportunity(1, np.array([100.0, 99.999]), np.array([100.0, 100.0]))
    assert OptimalWithCost().share_called(told).tolist() == [1.0, 0.0]


def test_order_a_higher_cost_never_calls_more_by_any_date():
    months = [run(solver(cost)).months().astype(float) for cost in (0.0, 0.5, 2.0)]
    late = [np.where(m < 0, np.inf, m) for m in months]
    assert (late[0] <= late[1]).all()
    assert (late[1] <= late[2]).all()


def test_limit_no_volatility_calls_as_the_forward_curve_says():
    """With sigma = 0 going on costs the least over dates fixed in advance, so the bound is the value."""
    s = solver(sigma=0.0)
    rows = DecisionRows()
    run(s, rows)
    solved = rows.frame()
    solved = solved[solved["by"] > 0]
    assert len(solved) > 3
    assert solved["continuation"].to_numpy() == pytest.approx(solved["upper_bound"].to_numpy(), rel=1e-12)
    tiny = DecisionPass(solver(sigma=1e-6), OptimalWithCost(), MONTHS).run(discounts, 5).months()
    assert (run(s).months() == tiny).all()


@pytest.mark.parametrize(("month", "cost"), [(12, 0.5), (14, 0.5), (29, 0.0)])
def test_order_values_on_paths_are_the_plain_twin_s_on_their_own_dates(month, cost):
    """Before, between and after rights: the holder's value on the issuer's policy, ex coupon."""
    s = replace(solver(cost), spreads=replace(spreads(), residual=np.array([0.0, 0.002, -0.004, 0.001])))
    b, units, discount = s.bonds, np.arange(4), discounts(month)
    wanted = np.ones((4, 5), dtype=np.bool_)
    wanted[1, 3] = False
    found = s.values(month, units, discount, wanted)
    assert found[1, 3] == 0.0
    for u, p in ((0, 0), (0, 3), (1, 1), (2, 3), (2, 2), (3, 0)):
        step = int(b.step[u])
        offset = int((b.maturity[u] - month - 1) % step + 1)
        ahead = np.arange(month + offset, b.maturity[u] + 1, step)
        tau = np.concatenate([[0], ahead - month])
        held = 0.012 + float(s.spreads.residual[u])
        rows = []
        for spread in (0.01, held):
            d = discount[tau, p] * np.exp(-spread * tau / 12.0)
            rows.append(np.append(d[1:] / d[:-1], 1.0))
        price = np.concatenate([[np.inf], b.dirty_price[u, ahead]])
        flow = np.concatenate([[0.0], b.flow[u, ahead]])
        twin = plain_values(ShortRateModel(A, SIGMA), step, offset, production_grid(step), ahead.size, *rows, flow,
                            price, price + cost)[1]  # fmt: skip
        assert found[u, p] == pytest.approx(twin, rel=1e-10), (u, p)


def price_today(cost: float = COST, follows: bool = False) -> PriceToday:
    return PriceToday(bonds(), spreads(), ExerciseModel(A, SIGMA, cost), discounts(0)[:, :1].copy(), follows)


@pytest.mark.parametrize("follows", [False, True])
def test_order_calibration_gives_every_price_back(follows):
    price = price_today(follows=follows)
    clean = np.array([101.0, 99.0, 97.0, 95.0])
    fitted = calibrate(price, clean, np.full(4, np.nan), np.full(4, 0.01))
    assert fitted.origin == ("price",) * 4
    assert fitted.model_price == pytest.approx(clean, abs=1e-8)
    assert (price.bonds.accrued[2:, 0] > 0.5).all()
    again = price(np.arange(4), fitted.spread)
    assert again == pytest.approx(clean + price.bonds.accrued[:, 0], abs=1e-8)


def test_order_a_stated_spread_is_kept_and_priced():
    price = price_today()
    given = np.array([0.01, np.nan, 0.02, np.nan])
    fitted = calibrate(price, np.array([np.nan, 99.0, np.nan, 95.0]), given, np.full(4, 0.01))
    assert fitted.origin == ("given", "price", "given", "price")
    assert fitted.spread[[0, 2]].tolist() == [0.01, 0.02]
    assert fitted.clean_price[0] == fitted.model_price[0]


def test_limit_a_price_no_spread_can_give_falls_back_to_the_class_spread():
    fitted = calibrate(price_today(), np.array([101.0, 99.0, 97.0, 190.0]), np.full(4, np.nan), np.full(4, 0.01))
    assert fitted.origin == ("price", "price", "price", "rating_spread")
    assert fitted.spread[3] == 0.01
    assert fitted.model_price[3] < 110.0
    low = calibrate(price_today(), np.array([101.0, 99.0, 97.0, 20.0]), np.full(4, np.nan), np.full(4, 0.01))
    assert low.origin[3] == "rating_spread"
    assert (low.spread < HIGHEST).all()


def test_limit_spreads_down_to_minus_two_hundred_basis_points_are_found():
    price = price_today()
    stated = np.array([0.01, -0.004, -0.015, -0.0195])
    clean = price(np.arange(4), stated) - price.bonds.accrued[:, 0]
    fitted = calibrate(price, clean, np.full(4, np.nan), np.full(4, 0.01))
    assert fitted.origin == ("price",) * 4
    assert fitted.spread == pytest.approx(stated, abs=1e-9)
    beyond = clean + np.array([0.0, 0.0, 0.0, 1.0])
    assert calibrate(price, beyond, np.full(4, np.nan), np.full(4, 0.01)).origin[3] == "rating_spread"


def callable_next_month() -> tuple[MappedBonds, np.ndarray]:
    """The second security with a coupon of 12 % and rights from the next month on: its value hardly moves."""
    b = bonds()
    coupon = b.coupon.copy()
    coupon[1] *= 12.0 / 5.5
    accrued, clean = b.accrued.copy(), b.clean_price.copy()
    accrued[1] *= 12.0 / 5.5
    clean[1, 1:48] = 100.0
    changed = replace(b, coupon=coupon, accrued=accrued, clean_price=clean)
    return changed, np.full(4, 0.02)


def test_limit_a_price_that_hardly_moves_with_the_spread_falls_back_to_the_class_spread():
    changed, stated = callable_next_month()
    price = replace(price_today(), bonds=changed)
    clean = price(np.arange(4), stated) - changed.accrued[:, 0]  # every price has a root, at a spread of 2 %
    fitted = calibrate(price, clean, np.full(4, np.nan), np.full(4, 0.01))
    assert fitted.origin == ("price", "rating_spread", "price", "price")
    assert fitted.spread == pytest.approx([0.02, 0.01, 0.02, 0.02], abs=1e-8)
    assert 0.0 < -fitted.slope[1] < 0.2
    assert (-fitted.slope[[0, 2, 3]] > 0.2).all()
    at_class = price(np.arange(4), np.full(4, 0.01)) - changed.accrued[:, 0]
    assert fitted.model_price[1] == pytest.approx(at_class[1], abs=1e-12)
    assert fitted.clean_price[1] == clean[1]  # the stated price stays stated


def test_limit_equal_refunding_and_valuation_spreads_without_cost_give_one_value():
    """The issuer's cost is then what the holder has; the policy moves with the spread, so the slope is smaller."""
    u, spread = np.array([0]), np.array([0.01])
    held, follows = price_today(0.0), price_today(0.0, follows=True)
    assert held(u, spread) == pytest.approx(follows(u, spread), abs=1e-6)
    wide, narrow = spread + 0.01, spread - 0.01
    assert follows(u, wide)[0] <= held(u, wide)[0] + 1e-6  # the issuer's best policy leaves the holder least
    assert follows(u, narrow)[0] < held(u, narrow)[0] - 0.01


def prepared_with(folder: Path, change: Callable[[Any], None]) -> Prepared:
    """The study that does everything, altered, laid out."""
    study = busy_study(folder)
    change(study)
    study.tables["control_totals"] = totals(study.tables, BUSY_SEGMENTS)
    return prepare(read_study(study.write())[0])


def keys_of(p: Prepared) -> dict[str, str]:
    return {name: unit_key(p.solver, p.rule, u, p.paths.digest(), p.months) for u, name in enumerate(p.bonds.ids)}


def test_order_the_key_of_a_study_s_security_holds_nothing_of_par_book_or_segment(tmp_path):
    def holdings(study: Any) -> None:
        for lot in study.tables["lots"]:
            lot["par"], lot["book_value"] = str(2 * float(lot["par"])), str(1.9 * float(lot["book_value"]))
        study.tables["lots"][1]["segment"] = "life"

    def dearer(study: Any) -> None:
        study.tables["securities"][3]["clean_price"] = "103.5"

    def later_right(study: Any) -> None:
        study.tables["call_rights"][3]["price"] = "100.25"

    def concession(study: Any) -> None:
        study.replace("concession_bp = 10", "concession_bp = 15")

    base = keys_of(prepared_with(tmp_path / "base", lambda study: None))
    assert len(set(base.values())) == 6
    assert keys_of(prepared_with(tmp_path / "holdings", holdings)) == base
    for name, change, moved in (
        ("dearer", dearer, {"B4"}),
        ("right", later_right, {"B4"}),
        ("all", concession, set(base)),
    ):
        keys = keys_of(prepared_with(tmp_path / name, change))
        assert {b for b in base if keys[b] != base[b]} == moved, name


def test_order_the_key_holds_terms_spreads_rule_model_and_set_and_nothing_of_par_or_book():
    s, rule = solver(), OptimalWithCost()
    key = unit_key(s, rule, 0, "set", MONTHS)
    assert key == unit_key(solver(), OptimalWithCost(), 0, "set", MONTHS)
    price = s.bonds.clean_price.copy()
    price[0, 24] += 0.01
    others = [
        unit_key(s, rule, 1, "set", MONTHS),
        unit_key(s, rule, 0, "other", MONTHS),
        unit_key(s, rule, 0, "set", MONTHS - 1),
        unit_key(replace(s, model=ExerciseModel(A, 0.011, COST)), rule, 0, "set", MONTHS),
        unit_key(replace(s, model=ExerciseModel(0.02, SIGMA, COST)), rule, 0, "set", MONTHS),
        unit_key(s, replace(rule, name="another"), 0, "set", MONTHS),
        unit_key(replace(s, model=ExerciseModel(A, SIGMA, 0.6)), rule, 0, "set", MONTHS),
        unit_key(replace(s, spreads=spreads(refunding=0.011)), rule, 0, "set", MONTHS),
        unit_key(replace(s, spreads=spreads(valuation=0.013)), rule, 0, "set", MONTHS),
        unit_key(replace(s, bonds=replace(s.bonds, clean_price=price)), rule, 0, "set", MONTHS),
    ]
    assert key not in others
    assert len(set(others)) == len(others)
