"""What was solved once is not solved again, and a run with a store is the run without one."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np

from projector.bonds.solving import ExerciseModel
from projector.bonds.store import SolveStore
from projector.run.block import BlockResult, project


def same(one: BlockResult, two: BlockResult) -> bool:
    """Flows, balances, market values and decision rows, bit for bit."""
    arrays = all(one.flows[k].tobytes() == two.flows[k].tobytes() for k in one.flows)
    arrays &= all(one.balances[k].tobytes() == two.balances[k].tobytes() for k in one.balances)
    arrays &= all(one.market_start[m].tobytes() == two.market_start[m].tobytes() for m in one.market_start)
    keys = ["path", "unit", "month"]
    rows = [r.decisions.sort_values(keys).reset_index(drop=True).astype(float) for r in (one, two)]
    return arrays and rows[0].equals(rows[1][rows[0].columns])


def test_order_a_run_with_a_store_is_the_run_without_one(busy: Any, busy_block: BlockResult) -> None:
    store = SolveStore()
    paths = busy.prepared.paths.count
    first = project(busy.prepared, 0, paths, store=store)
    solved = store.solved
    again = project(busy.prepared, 0, paths, store=store)
    assert same(busy_block, first)
    assert same(first, again)
    assert solved > 0
    assert store.solved == solved  # nothing was solved the second time


def test_order_other_cash_and_strategy_ask_for_no_new_decision(busy: Any) -> None:
    store, prepared = SolveStore(), busy.prepared
    project(prepared, 0, 2, store=store)
    decided = len(store.decisions)
    segments = tuple(replace(s, cash=s.cash + 1e5) for s in prepared.study.segments)
    richer = replace(prepared, study=replace(prepared.study, segments=segments),
                     strategy=replace(prepared.strategy, borrowing_limit=0.0))  # fmt: skip
    project(richer, 0, 2, store=store)
    assert len(store.decisions) == decided


def test_order_another_cost_or_other_paths_share_nothing(busy: Any) -> None:
    store, prepared = SolveStore(), busy.prepared
    project(prepared, 0, 2, store=store)
    decided = len(store.decisions)
    model = prepared.solver.model
    dearer = ExerciseModel(model.mean_reversion, model.normal_volatility, model.cost + 0.25)
    project(replace(prepared, solver=replace(prepared.solver, model=dearer)), 0, 2, store=store)
    assert len(store.decisions) == 2 * decided
    project(prepared, 2, 3, store=store)
    assert len(store.decisions) == 3 * decided


def test_limit_a_value_is_found_only_where_every_wanted_path_is_known() -> None:
    store, place = SolveStore(), ("key", 0, 3)
    some = np.array([True, False, True])
    store.keep_value(place, 12, np.array([1.0, 0.0, 3.0]), some)
    assert store.value(place, 12, some).tolist() == [1.0, 0.0, 3.0]
    assert store.value(place, 12, np.array([True, True, False])) is None
    assert store.value(place, 24, some) is None
    store.keep_value(place, 12, np.array([0.0, 2.0, 0.0]), ~some)
    assert store.value(place, 12, np.ones(3, dtype=bool)).tolist() == [1.0, 2.0, 3.0]
