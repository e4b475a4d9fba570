"""Relations that hold between runs, whatever the figures: order, blocks, threads, scale, splitting, superposition.

They use `prepare` and `project` past the door where the door's own checks (starting assets, control totals) refuse.
"""

from __future__ import annotations

import random
from collections.abc import Callable, Iterator
from dataclasses import fields, replace
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from projection_studies import BUSY_SEGMENTS, MONTHS, SCENARIOS, busy_study, hand_study, stream_rows, totals

from projector.report.render import render_report
from projector.run.block import BlockResult, project
from projector.run.prepare import Prepared, prepare
from projector.run.runner import collect, run_blocks, stage
from projector.study.reading import read_study

PATHS = len(SCENARIOS)


def arrays(result: BlockResult) -> Iterator[tuple[str, np.ndarray]]:
    """Every array of a block with a path axis, by name; calls as the month of each security's first one."""
    for f in fields(result):
        value = getattr(result, f.name)
        if isinstance(value, np.ndarray):
            yield f.name, value
        elif isinstance(value, dict):
            yield from ((f"{f.name} {key}", array) for key, array in value.items())
    yield "called in", result.events.months()


def assert_same(one: BlockResult, other: BlockResult, cut: Callable[[np.ndarray], np.ndarray] = lambda a: a) -> None:
    """Both hold the same numbers, bit for bit; `cut` picks from the second what the first has."""
    expected = dict(arrays(other))
    for name, array in arrays(one):
        np.testing.assert_array_equal(array, cut(expected[name]), err_msg=name)


def with_tables(prepared: Prepared, **tables: pd.DataFrame) -> Prepared:
    """Laid out again with other tables, past the door."""
    study = prepared.study
    return prepare(replace(study, tables=replace(study.tables, **tables)))


def with_cash(prepared: Prepared, change: float) -> Prepared:
    """The first segment's opening cash changed."""
    first, *rest = prepared.study.segments
    segments = (replace(first, cash=first.cash + change), *rest)
    return replace(prepared, study=replace(prepared.study, segments=segments))


def borrow_and_lend_alike(prepared: Prepared) -> Prepared:
    """The conditions of superposition: cash only, no expense, borrowing without limit at the rate cash earns."""
    study = prepared.study
    study = replace(
        study,
        purchases=replace(study.purchases, share_of_cash_invested=0.0),
        borrowing=replace(study.borrowing, spread_bp=0.0),
        investment_expense=replace(study.investment_expense, annual_share_of_statement_value=0.0),
    )
    alike = prepare(study)
    return replace(alike, strategy=replace(alike.strategy, borrowing_limit=1e9))


def statement(result: BlockResult) -> np.ndarray:
    """Statement surplus. [month, segment, path]"""
    b = result.balances
    assets = b["statement_start"] + b["statement_bought"] + b["accrued"] + b["recoveries"] + b["cash"]
    return assets - b["borrowing"] - b["shortfall"] - b["reserve"]


def growth(result: BlockResult, after: int) -> np.ndarray:
    """What 1 at month `after` has become at the horizon at the path's one-month rates. [path]"""
    return np.prod(1.0 + result.short_rate[after + 1 :], axis=0)


@pytest.fixture(scope="module")
def alike(busy: Any) -> Prepared:
    return borrow_and_lend_alike(busy.prepared)


@pytest.fixture(scope="module")
def alike_block(alike: Prepared) -> BlockResult:
    return project(alike, 0, PATHS)


@pytest.fixture(scope="module")
def busy_results(busy: Any, busy_block: Any) -> Any:
    return collect(busy, [busy_block])


def test_limit_the_busy_study_is_busy(busy_results: Any) -> None:
    """What the relations below rest on: there are calls, sales, borrowing, recoveries and decisions near the bar."""
    m = busy_results.measures.set_index(["scenario", "segment"])
    assert (m["par_called"] > 0.0).sum() >= 4
    assert (m["par_called"] == 0.0).sum() >= 4
    assert (m["par_sold"] > 0.0).sum() >= 7
    assert (m["peak_borrowing"] > 0.0).all()
    assert set(busy_results.decisions["decided_by"]) >= {"bound", "solve"}
    assert {"recovery", "sale", "purchase", "call_premium"} <= set(busy_results.flows["category"])


# P1: order of rows


def shuffled(study: Any, seed: int) -> Any:
    """Rows of every table in another order; a security's rights keep theirs, since theirs is checked."""
    rng = random.Random(seed)
    for name, rows in study.tables.items():
        if name == "call_rights":
            mine = {s: [r for r in rows if r["security_id"] == s] for s in ("B1", "B4")}
            order = [r["security_id"] for r in rows]
            rng.shuffle(order)
            study.tables[name] = [mine[s].pop(0) for s in order]
        elif name != "yield_curve":
            rng.shuffle(rows)
    return study


@pytest.mark.parametrize("seed", [1, 2])
def test_order_rows_shuffled_change_no_input_digest_and_no_result(tmp_path: Path, busy_results: Any, seed: int) -> None:
    staged = stage(shuffled(busy_study(tmp_path / "busy"), seed).write())
    results = collect(staged, [project(staged.prepared, 0, PATHS)])
    assert results.study.input_digest == busy_results.study.input_digest
    assert results.result_digests == busy_results.result_digests
    for name, frame in results.tables().items():
        pd.testing.assert_frame_equal(frame, busy_results.tables()[name], check_exact=True)


# P3: path by path


@pytest.mark.parametrize("i", range(PATHS))
def test_order_a_path_alone_is_the_path_in_the_block(busy: Any, busy_block: Any, i: int) -> None:
    alone = project(busy.prepared, i, i + 1)
    assert_same(alone, busy_block, lambda a: a[..., i : i + 1])
    mine = busy_block.decisions[busy_block.decisions["path"] == i].reset_index(drop=True)
    pd.testing.assert_frame_equal(alone.decisions.reset_index(drop=True), mine, check_exact=True, check_dtype=False)


@pytest.mark.parametrize(("lo", "hi"), [(0, 3), (2, 7), (5, 7)])
def test_order_a_block_is_the_same_inside_a_larger_one(busy: Any, busy_block: Any, lo: int, hi: int) -> None:
    assert_same(project(busy.prepared, lo, hi), busy_block, lambda a: a[..., lo:hi])


def test_order_a_summary_holds_the_same_arrays_as_the_detail(busy: Any, busy_block: Any) -> None:
    summary = project(busy.prepared, 0, PATHS, record="summary")
    assert summary.decisions is None
    assert_same(summary, busy_block)


def test_order_paths_turned_round_give_the_results_turned_round(busy: Any, busy_block: Any) -> None:
    """P2, past the digest of the set: each stream goes with its path."""
    prepared = busy.prepared
    blocks = tuple(
        b if b.insensitive else replace(b, flows=b.flows[..., ::-1], reserve=b.reserve[..., ::-1])
        for b in prepared.blocks
    )
    yields = np.ascontiguousarray(prepared.paths.yields[:, :, ::-1])
    turned = replace(prepared, paths=replace(prepared.paths, yields=yields), blocks=blocks)
    assert_same(project(turned, 0, PATHS), busy_block, lambda a: a[..., ::-1])


@pytest.mark.parametrize(("threads", "block"), [(1, 1), (2, 3), (1, 3), (2, 1)])
def test_order_blocks_and_threads_change_no_digest(busy: Any, busy_results: Any, threads: int, block: int) -> None:
    results = collect(busy, run_blocks(busy.prepared, threads, block))
    assert results.result_digests == busy_results.result_digests


def test_order_blocks_and_threads_change_no_byte_of_the_report(busy: Any, busy_results: Any) -> None:
    other = collect(busy, run_blocks(busy.prepared, 2, 2))
    # identities count cells, and print the largest rounding wherever it stood: equal too
    assert render_report(other, "projector run busy") == render_report(busy_results, "projector run busy")


# no foresight


def test_limit_nothing_before_a_month_knows_the_curves_after_it(busy: Any, busy_block: Any) -> None:
    u, paths = 9, busy.prepared.paths
    yields = paths.yields.copy()
    yields[u + 1 :] += 0.013
    changed = project(replace(busy.prepared, paths=replace(paths, yields=yields)), 0, PATHS)
    for name, array in busy_block.balances.items():
        np.testing.assert_array_equal(changed.balances[name][: u + 1], array[: u + 1], err_msg=name)
    # interest on what is owed differs afterwards on every path
    other, base = (r.flows[("segment", "borrowing_interest")] for r in (changed, busy_block))
    assert (other[-1] != base[-1]).any(axis=0).all()
    for key, array in busy_block.flows.items():
        np.testing.assert_array_equal(changed.flows[key][: u + 1], array[: u + 1], err_msg=str(key))


# P6: a dedicated portfolio


def dedicated(folder: Path) -> Prepared:
    """The pencil study without rights, defaults, expense and cash; its liability takes the assets' flows as they come,
    and its reserve is their statement value and accrued interest.
    """
    s = hand_study(folder)
    s.replace("cash = 50000.0", "cash = 0.0")
    s.replace("annual_share_of_statement_value = 0.0012", "annual_share_of_statement_value = 0")
    s.replace("share_of_cash_invested = 0.5", "share_of_cash_invested = 0")
    s.toml = s.toml[: s.toml.index("[[purchases.classes]]")] + s.toml[s.toml.index("[borrowing]") :]
    s.tables["call_rights"] = []
    s.written_by_hand.add("call_rights")
    s.tables["default_costs"] = [{"rating": r, "annual_cost": "0"} for r in ("A", "BBB")]
    s.tables["control_totals"] = totals(s.tables, {"annuities": 0.0})
    s.write()
    header = "security_id,first_date,last_date,style,price,make_whole_spread_bp,notice_days\n"
    (folder / "call_rights.csv").write_text(header, encoding="utf-8")
    draft = prepare(read_study(folder)[0])
    flows = np.zeros(MONTHS + 1)
    for par, rate, dates, maturity in (
        (1_000_000.0, 0.08, range(6, 25, 6), 120),
        (400_000.0, 0.05, (3, 9), 9),
        (600_000.0, 0.06, range(6, 25, 6), 60),
    ):
        for m in dates:
            flows[m] += par * rate / 2.0 + (par if m == maturity else 0.0)
    h, accrued = draft.holdings, draft.bonds.accrued
    value = np.zeros(MONTHS + 1)
    for n, s_ in enumerate(h.security):
        value += h.par[n] / 100.0 * (h.book[n] + np.where(np.arange(MONTHS + 1) < draft.bonds.maturity[s_], 1.0, 0.0)
                                     * accrued[s_, : MONTHS + 1])  # fmt: skip
    rows = stream_rows("annuities", "payout", "all", "annuity_payment", dict(enumerate(flows.tolist()[1:], start=1)))
    rows += stream_rows("annuities", "payout", "all", "reserve_statutory", dict(enumerate(value.tolist())))
    s.tables["liability_streams"] = rows
    s.tables["control_totals"] = totals(s.tables, {"annuities": 0.0})
    return stage(s.write()).prepared


def test_limit_a_dedicated_portfolio_holds_no_cash_and_no_surplus(tmp_path: Path) -> None:
    prepared = dedicated(tmp_path / "dedicated")
    result = project(prepared, 0, 2)
    scale = np.abs(result.flows[("segment", "annuity_payment")]).max()
    assert scale > 400_000.0
    for name in ("cash", "borrowing", "shortfall"):
        assert np.abs(result.balances[name]).max() <= 1e-9 * scale
    assert (result.par["sold"] == 0.0).all()
    np.testing.assert_allclose(statement(result), 0.0, atol=1e-6)


# P7 and P8: superposition where money is borrowed and lent at one rate


@pytest.mark.parametrize("extra", [250_000.0, -40_000.0])
def test_limit_cash_added_at_the_start_grows_at_the_one_month_rates(alike: Any, alike_block: Any, extra: float) -> None:
    more = project(with_cash(alike, extra), 0, PATHS)
    rise = (statement(more) - statement(alike_block))[-1]
    np.testing.assert_allclose(rise[0], extra * growth(alike_block, 0), rtol=1e-11)
    np.testing.assert_array_equal(rise[1], 0.0)
    assert (alike_block.balances["borrowing"] > 0.0).any()  # both signs of balance are met
    assert (alike_block.balances["cash"] > 0.0).any()
    assert (alike_block.par["sold"] == 0.0).all()


@pytest.mark.parametrize("u", [1, 13, 24])
def test_limit_an_outflow_lowers_the_end_by_itself_and_its_interest(alike: Any, alike_block: Any, u: int) -> None:
    streams = alike.study.tables.liability_streams
    extra = streams[(streams["block"] == "payout") & (streams["item"] == "annuity_payment")].copy()
    extra = extra.assign(block="one_off", amount=np.where(extra["month"] == u, 70_000.0, 0.0))
    reserve = streams[(streams["block"] == "payout") & (streams["item"] == "reserve_statutory")].assign(
        block="one_off", amount=0.0
    )
    more = with_tables(alike, liability_streams=pd.concat([streams, extra, reserve], ignore_index=True))
    result = project(replace(more, strategy=alike.strategy), 0, PATHS)
    change = statement(result) - statement(alike_block)
    np.testing.assert_allclose(change[-1, 0], -70_000.0 * growth(alike_block, u), rtol=1e-10)
    np.testing.assert_array_equal(change[:u], 0.0)


def test_limit_two_portfolios_together_do_what_each_does_alone(alike: Prepared, alike_block: Any) -> None:
    tables = alike.study.tables
    one = tables.lots["lot_id"].isin(["L1", "L3", "L6", "L8"])
    term = tables.liability_streams["block"] == "term"

    def part(lots: Any, streams: Any, share: float) -> BlockResult:
        chosen = tables.liability_streams[["amount"]].where(streams, 0.0)["amount"]
        piece = with_tables(
            alike, lots=tables.lots[lots], liability_streams=tables.liability_streams.assign(amount=chosen)
        )
        segments = tuple(replace(s, cash=s.cash * share) for s in piece.study.segments)
        piece = replace(piece, study=replace(piece.study, segments=segments), strategy=alike.strategy)
        return project(piece, 0, PATHS)

    a, b = part(one, term, 0.3), part(~one, ~term, 0.7)
    together = statement(a) + statement(b)
    np.testing.assert_allclose(together, statement(alike_block), rtol=0, atol=1e-7)
    for key, array in alike_block.flows.items():
        if key[0] == "start":
            np.testing.assert_allclose(a.flows[key] + b.flows[key], array, rtol=1e-12, atol=1e-9, err_msg=str(key))


# P9: a longer horizon


def test_order_a_longer_horizon_leaves_the_months_before_as_they_were(busy: Any, busy_block: Any) -> None:
    short = 12
    study = busy.prepared.study
    horizon = replace(study.horizon, months=short)
    blocks = project(prepare(replace(study, horizon=horizon)), 0, PATHS)
    for name in ("balances", "flows", "par", "book"):
        whole = getattr(busy_block, name)
        for key, array in getattr(blocks, name).items():
            np.testing.assert_array_equal(array, whole[key][: short + 1], err_msg=f"{name} {key}")
    for m in (0, short):
        np.testing.assert_array_equal(blocks.market_start[m], busy_block.market_start[m])
        np.testing.assert_array_equal(blocks.market_bought[m], busy_block.market_bought[m])
    np.testing.assert_array_equal(blocks.runoff, busy_block.runoff[: short + 1])


# P12 and B10, B9


def test_order_higher_default_cost_never_raises_surplus(alike: Prepared) -> None:
    table = alike.study.tables.default_costs
    last = None
    for rate in (0.0, 0.002, 0.01, 0.05):
        worse = with_tables(alike, default_costs=table.assign(annual_rate=rate))
        end = statement(project(replace(worse, strategy=alike.strategy), 0, PATHS))[-1]
        assert last is None or (end < last).all()
        last = end


def scaled(prepared: Prepared, factor: float) -> Prepared:
    """Every amount of money times a factor."""
    tables = prepared.study.tables
    lots = tables.lots.assign(**{c: tables.lots[c] * factor for c in ("par", "book_value", "tax_basis")})
    streams = tables.liability_streams.assign(amount=tables.liability_streams["amount"] * factor)
    other = with_tables(prepared, lots=lots, liability_streams=streams)
    segments = tuple(replace(s, cash=s.cash * factor) for s in other.study.segments)
    return replace(other, study=replace(other.study, segments=segments))


NOT_MONEY = ("short_rate", "net_yield", "held", "balances earned_rate", "called in")


@pytest.mark.parametrize("power", [3, -2])
def test_order_money_times_a_power_of_two_scales_every_figure_bit_for_bit(busy: Any, busy_block: Any, power) -> None:
    factor = 2.0**power
    expected = dict(arrays(busy_block))
    for name, array in arrays(project(scaled(busy.prepared, factor), 0, PATHS)):
        scale = 1.0 if name in NOT_MONEY else factor
        np.testing.assert_array_equal(array, expected[name] * scale, err_msg=name)


def test_order_money_times_ten_scales_flows_and_values_of_bonds(busy: Any, busy_block: Any) -> None:
    expected = dict(arrays(busy_block))
    for name, array in arrays(project(scaled(busy.prepared, 10.0), 0, PATHS)):
        scale = 1.0 if name in NOT_MONEY else 10.0
        if name in ("runoff_par", "runoff_statement", "runoff_market", "market_start 0", "group_book 0"):
            np.testing.assert_allclose(array, expected[name] * scale, rtol=1e-14, err_msg=name)
        elif name == "called in":
            np.testing.assert_array_equal(array, expected[name])
        else:
            np.testing.assert_allclose(array, expected[name] * scale, rtol=1e-9, atol=1e-6, err_msg=name)


def split_lots(lots: pd.DataFrame, shares: tuple[float, ...]) -> pd.DataFrame:
    """Every lot as several with the same value per 100."""
    parts = [
        lots.assign(lot_id=lots["lot_id"] + f"-{i}", **{c: lots[c] * x for c in ("par", "book_value", "tax_basis")})
        for i, x in enumerate(shares)
    ]
    return pd.concat(parts, ignore_index=True)


@pytest.mark.parametrize("shares", [(0.5, 0.5), (0.37, 0.63), (0.1, 0.2, 0.7)])
def test_order_lots_split_into_fractions_change_no_total(busy: Any, busy_block: Any, shares) -> None:
    lots = split_lots(busy.prepared.study.tables.lots, shares)
    result = project(with_tables(busy.prepared, lots=lots), 0, PATHS)
    expected = dict(arrays(busy_block))
    for name, array in arrays(result):
        size = np.abs(expected[name]).max()
        np.testing.assert_allclose(array, expected[name], rtol=1e-12, atol=1e-12 * size, err_msg=name)
    np.testing.assert_array_equal(result.events.months(), busy_block.events.months())


def test_order_halved_lots_have_the_statement_value_per_100_of_the_whole(busy: Any) -> None:
    lots = split_lots(busy.prepared.study.tables.lots, (0.5, 0.5))
    halves = with_tables(busy.prepared, lots=lots).lots
    whole = {name: i for i, name in enumerate(busy.prepared.lots.lot_id)}
    at = np.array([whole[name.split("-")[0]] for name in halves.lot_id])
    np.testing.assert_array_equal(halves.growth_at_start, busy.prepared.lots.growth_at_start[at])
    np.testing.assert_array_equal(halves.opening_book, 0.5 * busy.prepared.lots.opening_book[at])


# S4 and S6: what means nothing changes nothing


def test_order_a_block_of_nothing_changes_nothing(busy: Any, busy_block: Any) -> None:
    streams = busy.prepared.study.tables.liability_streams
    nothing = streams[streams["block"] == "payout"].assign(block="a_nothing", amount=0.0)
    more = with_tables(busy.prepared, liability_streams=pd.concat([streams, nothing], ignore_index=True))
    assert len(more.blocks) == len(busy.prepared.blocks) + 1
    assert_same(project(more, 0, PATHS), busy_block)


def test_order_comments_and_unread_files_and_empty_refused_columns_leave_the_digest(tmp_path: Path, busy: Any) -> None:
    study = busy_study(tmp_path / "busy")
    study.toml = "# another comment\n" + study.toml.replace("[tax]", "[tax]   # none")
    for row in study.tables["securities"]:
        row["put_date"] = ""
    folder = study.write()
    (folder / "notes.txt").write_text("not read", encoding="utf-8")
    again = read_study(folder)[0]
    assert again.input_digest == busy.prepared.study.input_digest
    assert {f.sha256 for f in again.files} != {f.sha256 for f in busy.prepared.study.files}


def test_order_a_printed_text_enters_the_input_digest_and_no_result(tmp_path: Path, busy_results: Any) -> None:
    study = busy_study(tmp_path / "busy").replace("Invented data.", "Invented figures.")
    staged = stage(study.write())
    results = collect(staged, [project(staged.prepared, 0, PATHS)])
    assert results.study.input_digest != busy_results.study.input_digest
    assert results.result_digests == busy_results.result_digests


def test_limit_segments_add_to_the_total(busy_results: Any) -> None:
    table = busy_results.balance.set_index(["scenario", "segment", "month"])
    for column in ("cash", "statement_start", "reserve", "statement_surplus"):
        parts = sum(table.xs(segment, level="segment")[column] for segment in BUSY_SEGMENTS)
        np.testing.assert_allclose(parts, table.xs("all", level="segment")[column], rtol=0, atol=1e-8)


# the demo study, on which no amount was chosen for these tests

DEMO = Path(__file__).resolve().parents[2] / "scenarios" / "harbour_ridge_2022"


def test_order_a_path_of_the_demo_alone_is_the_path_in_the_block() -> None:
    prepared = stage(DEMO).prepared
    whole = project(prepared, 0, PATHS)
    for i in (4, 6):
        assert_same(project(prepared, i, i + 1), whole, lambda a, i=i: a[..., i : i + 1])


@pytest.mark.long
def test_order_blocks_and_threads_change_no_digest_and_no_byte_of_the_demo_s_report():
    staged = stage(DEMO)
    one = collect(staged, [project(staged.prepared, 0, PATHS)])
    for threads, block in ((2, 3), (1, 1)):
        other = collect(staged, run_blocks(staged.prepared, threads, block))
        assert other.result_digests == one.result_digests  # mix: rows in another order
        assert render_report(other, "projector run demo") == render_report(one, "projector run demo")
