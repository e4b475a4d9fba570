"""Explanations: they tell what the run did, and what they add agrees with it."""

from __future__ import annotations

import math
import random
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from projection_studies import busy_study

import projector
from projector.questions import records
from projector.questions.explain import explain, find_path, find_security, tell
from projector.run.block import discounts_of, project
from projector.run.call_table import calls_frame
from projector.run.runner import run_blocks, stage
from projector.study.errors import StudyRefused

DEMO = Path(__file__).resolve().parents[2] / "scenarios" / "harbour_ridge_2022"
CLEAR = 0.002  # per 100: nearer the bar the two grids may differ about the side
CALLED, UNCALLED = 25, 10


@pytest.fixture(scope="module")
def told(busy: Any) -> Callable[[str, int], records.CallStory]:
    """Stories of the study that does everything, each path projected alone, every right solved."""
    prepared = busy.prepared
    alone = {path: project(prepared, path, path + 1) for path in range(prepared.paths.count)}
    stories = {
        (name, path): tell(prepared, alone[path], unit, path, solve_all=True)
        for unit, name in enumerate(prepared.bonds.ids)
        for path in alone
    }
    return lambda name, path: stories[name, path]


def agrees(story: records.CallStory, month: int | None) -> None:
    """Going on costs at least the bar in the month of the call, less in every month with a right before it."""
    live = story.live
    assert story.decided == month
    assert live["continuation"].notna().all()
    at_least = (live["continuation"] >= live["bar"]).to_numpy()
    assert np.array_equal(at_least, (live["month"] == month).to_numpy())
    assert story.months["decision"].eq(records.CALLED).sum() == (month is not None)
    if month is not None:
        assert live["month"].iloc[-1] == month
        assert story.months["month"].iloc[-1] == story.paid


def sides_agree(story: records.CallStory) -> None:
    """The yields say the same as the costs: at or under the critical yield exactly where going on costs the bar."""
    live = story.live[story.live["critical_yield"].notna() & (story.live["issuer_saving"].abs() > CLEAR)]
    under = live["refunding_yield"] <= live["critical_yield"]
    assert np.array_equal(under.to_numpy(), (live["issuer_saving"] > 0.0).to_numpy())


def test_order_every_story_of_the_busy_study_is_the_run_s(told: Any, busy: Any, busy_block: Any) -> None:
    months = busy_block.events.months()
    found = 0
    for unit, name in enumerate(busy.prepared.bonds.ids):
        for path in range(7):
            month = int(months[unit, path])
            agrees(told(name, path), month if month >= 0 else None)
            sides_agree(told(name, path))
            found += month >= 0
    assert found >= 3


def test_order_bounds_costs_and_bars_are_the_run_s_rows(told: Any, busy: Any, busy_block: Any) -> None:
    """Told from the path alone, recorded among seven: the same numbers."""
    rows = busy_block.decisions
    assert len(rows) > 50
    for (unit, path), run in rows.groupby(["unit", "path"]):
        live = told(busy.prepared.bonds.ids[int(unit)], int(path)).live
        run = run.sort_values("month")
        assert live["month"].tolist() == run["month"].tolist()
        for column in ("upper_bound", "bar"):
            assert live[column].tolist() == run[column].tolist()
        solved = run["continuation"].notna().to_numpy()
        assert live["continuation"].to_numpy()[solved].tolist() == run["continuation"].to_numpy()[solved].tolist()
        assert ((live["settled_by"] != records.BY_BOUND).to_numpy() == solved).all()


@pytest.mark.parametrize(("name", "month"), [("B4", 7), ("B1", 19), ("B2", 0)])
def test_order_refunding_yields_read_the_month_s_own_curve_life_and_spread(
    name: str, month: int, told: Any, busy: Any
) -> None:
    prepared, path = busy.prepared, 1  # yields rise here, and nothing is called
    unit = prepared.bonds.ids.index(name)
    life = int(prepared.bonds.maturity[unit]) - month
    spread = prepared.solver.spreads.refunding[unit, month]
    discount = discounts_of(prepared, 0, 7)(month)[:, path]
    rate = told(name, path).months["refunding_yield"].iloc[month]
    worth, last = 0.0, 0
    for t in range(1, life + 1):
        if (life - t) % 6 == 0:
            worth += rate * (t - last) / 12.0 * discount[t] * math.exp(-spread * t / 12.0)
            last = t
    worth += discount[life] * math.exp(-spread * life / 12.0)
    assert worth == pytest.approx(1.0, abs=1e-12)


def test_order_par_and_price_of_a_call_are_those_of_the_calls_table(told: Any, busy: Any, busy_block: Any) -> None:
    calls = calls_frame(busy.prepared, [busy_block])
    assert len(calls) >= 3
    for (scenario, name), rows in calls.groupby(["scenario", "security_id"]):
        story = told(name, busy.prepared.paths.ids.index(scenario))
        row = story.months.iloc[-1]
        assert row["month"] == rows["month"].iloc[0]
        assert row["call_price"] == rows["price"].iloc[0]
        assert row["par_held"] == pytest.approx(rows["par_called"].sum(), rel=1e-12)


def test_order_what_the_bound_settled_is_left_empty_unless_asked(told: Any, busy: Any) -> None:
    prepared = busy.prepared
    unit = prepared.bonds.ids.index("B1")
    plain, solved = tell(prepared, project(prepared, 0, 1), unit, 0), told("B1", 0)
    by_bound = (plain.months["settled_by"] == records.BY_BOUND).to_numpy()
    assert by_bound.any()
    assert plain.months.loc[by_bound, ["continuation", "issuer_saving", "issuer_saving_amount"]].isna().all(axis=None)
    held = solved.months[by_bound]
    assert (held["continuation"] <= held["upper_bound"] + 1e-3).all()
    rest = [c for c in records.COLUMNS if c not in ("continuation", "issuer_saving", "issuer_saving_amount")]
    pd.testing.assert_frame_equal(plain.months[rest], solved.months[rest])
    pd.testing.assert_frame_equal(plain.months[~by_bound], solved.months[~by_bound])


def test_known_the_hand_study_s_call_costs_what_a_pencil_finds(hand: Any, hand_block: Any) -> None:
    """Nine years of 4 a half-year at the issuer's 2.98 % on path 2; see tests/run/test_by_hand.py."""
    unit = hand.prepared.bonds.ids.index("B1")
    story = tell(hand.prepared, hand_block, unit, 1)
    row = story.months.iloc[-1]
    r = 1.015 * 1.045 / 1.03 - 1.0
    going_on = 4.0 * (1 - (1 + r) ** -18) / r + 100.0 * (1 + r) ** -18
    assert (story.decided, story.paid, row["decision"]) == (12, 12, "called")
    assert row["continuation"] == pytest.approx(going_on, abs=1e-9)
    assert row["bar"] == 100.5
    assert row["issuer_saving_amount"] == pytest.approx((going_on - 100.5) * 10_000.0, abs=1e-4)
    # the holder's spread is the issuer's here: he loses what the issuer saves, and its cost
    assert row["holder_loss"] == pytest.approx(going_on - 100.0, abs=1e-9)
    assert row["holder_loss_amount"] == pytest.approx((going_on - 100.0) * 10_000.0, abs=1e-4)
    kept = tell(hand.prepared, hand_block, unit, 0)
    assert (kept.decided, kept.paid) == (None, None)
    assert kept.months["month"].tolist() == list(range(25))
    assert kept.live["month"].tolist() == [12]


def test_limit_a_security_without_rights_tells_its_payments_and_no_decision(told: Any) -> None:
    story = told("B6", 0)
    assert len(story.live) == 0
    assert story.decided is None
    assert story.months["decision"].unique().tolist() == [records.NO_RIGHT, records.MATURED]
    assert story.months["promised"].iloc[-1] == 102.25
    assert story.months["refunding_yield"].notna().sum() == len(story.months) - 1


def test_limit_names_are_found_and_others_refused_with_the_nearest(busy: Any) -> None:
    prepared = busy.prepared
    assert find_security(prepared, "B4") == prepared.bonds.ids.index("B4")
    assert find_path(prepared, "S3") == 2
    assert find_path(prepared, prepared.paths.titles[4]) == 4
    for find, name, said in (
        (find_security, "b44",
         "E601 security: no security of this study has that name (found 'b44'); did you mean B4? "
         "Write it as the study does."),
        (find_security, "zzz",
         "E601 security: no security of this study has that name (found 'zzz'); there are B1, B2, B3, B4, B5, B6."),
        (find_path, "Pop dwn",
         "E602 scenario: no scenario of this study has that name (found 'Pop dwn'); did you mean Pop down? "
         "Write it as the study does."),
    ):  # fmt: skip
        with pytest.raises(StudyRefused) as refused:
            find(prepared, name)
        assert str(refused.value) == said
        assert said[:4] in records.CODES


def test_known_the_package_function_returns_the_documented_columns(hand_folder: Path) -> None:
    frame = projector.explain_call(hand_folder, "B1", "S2")
    assert list(frame.columns) == list(projector.explain_columns())
    assert frame["decision"].iloc[-1] == "called"
    for unit, meaning in projector.explain_columns().values():
        assert unit in ("month", "date", "per 100", "1/year", "currency", "-")
        assert meaning


def test_order_the_package_function_solves_what_the_bound_settled_when_asked(busy_folder: Path) -> None:
    plain = projector.explain_call(busy_folder, "B1", "S1")
    solved = projector.explain_call(busy_folder, "B1", "S1", solve_all=True)
    right = plain["call_price"].notna()
    assert plain.loc[right, "continuation"].isna().any()
    assert solved.loc[right, "continuation"].notna().all()


def test_limit_no_volatility_explains_alike(tmp_path: Path) -> None:
    """The bound is then the value: what it does not settle is called, and both sides still agree."""
    study = busy_study(tmp_path / "still")
    line = next(text for text in study.toml.split("\n") if text.startswith("normal_volatility"))
    folder = study.replace(line, "normal_volatility = 0.0").write()
    story = explain(folder, "B1", "S7", solve_all=True)
    assert story.live["continuation"].to_numpy() == pytest.approx(story.live["upper_bound"].to_numpy(), rel=1e-12)
    sides_agree(story)


@pytest.mark.long
def test_order_explanations_of_the_demo_are_the_run_s() -> None:
    """A seeded sample: called ones from the run's calls table, and others that had rights and were not called."""
    prepared = stage(DEMO).prepared
    blocks = run_blocks(prepared, 1)
    calls = calls_frame(prepared, blocks)
    months = np.concatenate([block.events.months() for block in blocks], axis=1)
    draw = random.Random(2022)
    calls = calls[calls["right"].isin(["stated price", "par call"])]
    table = calls.groupby(["security_id", "scenario"])["decided"].first()
    par = calls.groupby(["security_id", "scenario"])["par_called"].sum()
    called = draw.sample(sorted(table.index.tolist()), CALLED)
    with_rights = prepared.bonds.with_rights()
    with_rights &= np.isfinite(prepared.bonds.clean_price).any(axis=1)
    never = sorted((int(u), int(p)) for u, p in np.argwhere(months < 0) if with_rights[u])
    uncalled = [(prepared.bonds.ids[u], prepared.paths.ids[p]) for u, p in draw.sample(never, UNCALLED)]
    alone: dict[int, Any] = {}
    for name, scenario in [*called, *uncalled]:
        path, unit = prepared.paths.ids.index(scenario), prepared.bonds.ids.index(name)
        if path not in alone:
            alone[path] = project(prepared, path, path + 1)
        story = tell(prepared, alone[path], unit, path, solve_all=True)
        if (name, scenario) in called:
            agrees(story, int(table[name, scenario]))
            assert story.months["par_held"].iloc[-1] == pytest.approx(par[name, scenario], rel=1e-12)
        else:
            agrees(story, None)
        sides_agree(story)
