"""The door every liability comes through (C10), proved with a block that pays by last month's earned rate."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from projection_studies import SCENARIOS, busy_study

from projector.liabilities.blocks import FLOW_ITEMS, ITEM_NAMES, Market, MonthOutcome, signed
from projector.liabilities.streams import StreamState, SuppliedStream, build_streams, digest_errors
from projector.run.block import discounts_of, project
from projector.run.frames import flows_frame
from projector.run.prepare import Prepared
from projector.run.runner import stage
from projector.study.errors import StudyRefused

PATHS = len(SCENARIOS)
ACCOUNT = 300_000.0


@dataclass(frozen=True)
class Seen:
    """What the block was shown, month by month."""

    rates: dict[int, np.ndarray] = field(default_factory=dict)
    markets: dict[int, Market] = field(default_factory=dict)
    opened: list[tuple[int, int]] = field(default_factory=list)


@dataclass(frozen=True)
class CreditedBlock:
    """Pays interest on an account at last month's earned rate, and holds the account as its reserve."""

    segment: str
    seen: Seen = field(default_factory=Seen)
    name: str = "credited"

    def outcome(self, paid: np.ndarray) -> MonthOutcome:
        flows = np.zeros((len(ITEM_NAMES), paid.size))
        flows[ITEM_NAMES.index("withdrawal")] = paid
        return MonthOutcome(flows, np.full(paid.size, ACCOUNT), np.full(paid.size, 0.9 * ACCOUNT))

    def open(self, path_lo: int, path_hi: int) -> tuple[float, MonthOutcome]:
        self.seen.opened.append((path_lo, path_hi))
        return ACCOUNT, self.outcome(np.zeros(path_hi - path_lo))

    def month(self, state: float, m: int, market: Market, earned_rate_lagged: np.ndarray) -> tuple[float, MonthOutcome]:
        self.seen.rates[m] = earned_rate_lagged.copy()
        self.seen.markets[m] = market
        return state, self.outcome(state * earned_rate_lagged / 12.0)


def with_block(prepared: Prepared, block: CreditedBlock) -> Prepared:
    return replace(prepared, blocks=(*prepared.blocks, block))


@pytest.fixture(scope="module", params=["annuities", "life"])
def credited(request: Any, busy: Any) -> tuple[CreditedBlock, Prepared, Any]:
    """The block in one of the segments: what it saw, the study it was in, and the result."""
    block = CreditedBlock(request.param)
    prepared = with_block(busy.prepared, block)
    return block, prepared, project(prepared, 0, PATHS)


def test_limit_a_block_gets_the_earned_rate_of_its_segment_in_the_month_before(credited: Any) -> None:
    block, prepared, result = credited
    s = prepared.segment_names.index(block.segment)
    assert sorted(block.seen.rates) == list(range(1, prepared.months + 1))
    for m, rate in block.seen.rates.items():
        np.testing.assert_array_equal(rate, result.balances["earned_rate"][m - 1, s])
    assert len({rate.tobytes() for rate in block.seen.rates.values()}) == prepared.months  # they move every month


def test_limit_a_block_sees_the_curves_of_its_month_and_no_later_one(credited: Any) -> None:
    block, prepared, _ = credited
    discounts = discounts_of(prepared, 0, PATHS)
    for m, market in block.seen.markets.items():
        assert set(vars(market)) == {"month", "discount", "short_rate"}
        assert market.month == m
        np.testing.assert_array_equal(market.discount, discounts(m))
        # the short rate in force over the month was set at the month end before (C2)
        np.testing.assert_array_equal(market.short_rate, 1.0 / discounts(m - 1)[1] - 1.0)


def test_limit_what_a_block_does_before_a_month_does_not_depend_on_curves_after_it(credited: Any) -> None:
    block, prepared, _ = credited
    u = 11
    yields = prepared.paths.yields.copy()
    yields[u + 1 :] -= 0.004
    other = CreditedBlock(block.segment)
    moved = replace(prepared, paths=replace(prepared.paths, yields=yields), blocks=(*prepared.blocks[:-1], other))
    project(moved, 0, PATHS)
    for m in range(1, u + 2):  # the rate seen in month u + 1 is that of month u
        np.testing.assert_array_equal(other.seen.rates[m], block.seen.rates[m])
    assert (other.seen.rates[24] != block.seen.rates[24]).all()


def test_limit_flows_of_a_block_land_in_its_segment_with_their_sign(credited: Any, busy_block: Any) -> None:
    block, prepared, result = credited
    s = prepared.segment_names.index(block.segment)
    for m in range(1, prepared.months + 1):
        paid = -ACCOUNT * block.seen.rates[m] / 12.0
        np.testing.assert_array_equal(result.flows[("segment", "withdrawal")][m, s], paid)
        np.testing.assert_array_equal(result.flows[("segment", "withdrawal")][m, 1 - s], 0.0)
    table = flows_frame(prepared, [result])
    table = table[table["category"] == "withdrawal"]
    assert set(table["segment"]) == {block.segment}
    assert set(table["scenario"]) == set(SCENARIOS)
    one = table[(table["scenario"] == "S4") & (table["month"] == 7)]["amount"].tolist()
    assert one == [-ACCOUNT * block.seen.rates[7][3] / 12.0]
    np.testing.assert_array_equal(result.balances["reserve"][:, s], busy_block.balances["reserve"][:, s] + ACCOUNT)
    np.testing.assert_array_equal(result.balances["surrender"][:, s], 0.9 * ACCOUNT)


def test_order_a_block_that_credits_is_the_same_path_by_path(credited: Any) -> None:
    block, prepared, result = credited
    alone = CreditedBlock(block.segment)
    part = project(replace(prepared, blocks=(*prepared.blocks[:-1], alone)), 4, 6)
    assert alone.seen.opened == [(4, 6)]
    np.testing.assert_array_equal(part.balances["earned_rate"], result.balances["earned_rate"][..., 4:6])
    np.testing.assert_array_equal(part.balances["cash"], result.balances["cash"][..., 4:6])


# streams


def test_known_signs_come_from_the_item() -> None:
    assert {name for name, sign in FLOW_ITEMS.items() if sign > 0} == {"premium"}
    flows = np.arange(1.0, 17.0).reshape(8, 2)
    np.testing.assert_array_equal(signed(flows)[0], flows[0])
    np.testing.assert_array_equal(signed(flows)[1:], -flows[1:])


def stream_table(scenarios: tuple[str, ...]) -> pd.DataFrame:
    """Two months of one block; the amount tells item, month and scenario."""
    rows = [
        ("life", "b", s, m, item, 100.0 * i + 10.0 * m + p)
        for i, item in enumerate(("premium", "expense", "reserve_statutory"))
        for p, s in enumerate(scenarios)
        for m in range(0 if item == "reserve_statutory" else 1, 3)
    ]
    return pd.DataFrame(rows, columns=["segment", "block", "scenario", "month", "item", "amount"])


def shown(stream: SuppliedStream, lo: int, hi: int, m: int) -> MonthOutcome:
    state, first = stream.open(lo, hi)
    if m == 0:
        return first
    nothing = Market(m, np.ones((1, hi - lo)), np.zeros(hi - lo))
    after, outcome = stream.month(state, m, nothing, np.zeros(hi - lo))
    assert after == StreamState(lo, hi)
    return outcome


def test_known_a_stream_gives_each_path_its_own_amounts() -> None:
    (stream,) = build_streams(stream_table(("S1", "S2", "S3")).sample(frac=1.0, random_state=1), ("S1", "S2", "S3"), 2)
    assert (stream.name, stream.segment, stream.insensitive, stream.surrender) == ("b", "life", False, None)
    outcome = shown(stream, 1, 3, 2)
    np.testing.assert_array_equal(outcome.flows[ITEM_NAMES.index("premium")], [21.0, 22.0])
    np.testing.assert_array_equal(outcome.flows[ITEM_NAMES.index("expense")], [121.0, 122.0])
    np.testing.assert_array_equal(outcome.flows[ITEM_NAMES.index("withdrawal")], [0.0, 0.0])
    np.testing.assert_array_equal(outcome.reserve_statutory, [221.0, 222.0])
    np.testing.assert_array_equal(shown(stream, 0, 3, 0).reserve_statutory, [200.0, 201.0, 202.0])


def test_known_one_stream_serves_every_path_of_an_insensitive_block() -> None:
    (stream,) = build_streams(stream_table(("all",)), ("S1", "S2", "S3"), 2)
    assert stream.insensitive
    for lo, hi in ((0, 3), (2, 3)):
        outcome = shown(stream, lo, hi, 1)
        np.testing.assert_array_equal(outcome.flows[ITEM_NAMES.index("premium")], np.full(hi - lo, 10.0))
        np.testing.assert_array_equal(outcome.reserve_statutory, np.full(hi - lo, 210.0))


def test_limit_scenarios_are_matched_by_name_and_not_by_place() -> None:
    ids = tuple(f"S{i}" for i in range(1, 12))  # S10 sorts before S2 as text
    (stream,) = build_streams(stream_table(ids), ids, 2)
    np.testing.assert_array_equal(shown(stream, 0, 11, 1).flows[0], 10.0 + np.arange(11.0))


def test_limit_streams_bound_to_another_set_are_refused(tmp_path: Path, busy: Any) -> None:
    digest = busy.prepared.paths.digest()
    study = busy_study(tmp_path / "busy").replace(digest, "ab" * 32)
    with pytest.raises(StudyRefused) as refused:
        stage(study.write())
    assert refused.value.exit_code == 2
    (error,) = refused.value.errors
    assert (error.code, error.file, error.column, error.value) == (
        "E451", "study.toml", "liabilities.scenario_set_digest", "ab" * 32,
    )  # fmt: skip
    assert digest in error.remedy


def test_limit_a_changed_rate_unbinds_the_streams(tmp_path: Path) -> None:
    study = busy_study(tmp_path / "busy").cell("yield_curve", 3, "rate", "0.0474")
    with pytest.raises(StudyRefused, match="E451"):
        stage(study.write())


def test_limit_insensitive_blocks_need_no_digest() -> None:
    assert digest_errors(None, "ab" * 32, (), "study.toml") == []
    assert digest_errors("ab" * 32, "ab" * 32, ("b",), "study.toml") == []
    assert len(digest_errors(None, "ab" * 32, ("b",), "study.toml")) == 1
