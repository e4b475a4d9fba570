"""The demo study: its script writes the same files again, and the folder keeps what its page promises."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from projector.run.prepare import Prepared, prepare
from projector.study.reading import read_study

ROOT = Path(__file__).resolve().parents[2]
SCRIPT = ROOT / "scenarios" / "make_harbour_ridge_2022.py"
DEMO = ROOT / "scenarios" / "harbour_ridge_2022"
BYTES = (
    *(
        "study.toml",
        "securities.csv",
        "lots.csv",
        "call_rights.csv",
        "yield_curve.csv",
        "class_spreads.csv",
        "put_rights.csv",
        "sinking_payments.csv",
        "coupon_steps.csv",
        "announced_calls.csv",
    ),
    *("default_costs.csv", "control_totals.csv"),
)
STREAMS = "liability_streams.parquet"


@pytest.fixture(scope="module")
def demo() -> Prepared:
    return prepare(read_study(DEMO)[0])


def make_whole_spreads(demo: Prepared) -> pd.Series:
    rights = demo.study.tables.call_rights
    return rights[rights["style"] == "make_whole"].set_index("security_id")["make_whole_spread_bp"]


@pytest.mark.long
def test_pinned_the_generator_writes_the_committed_demo_again(tmp_path: Path) -> None:
    environment = os.environ | {"PYTHONPATH": str(ROOT), "PYTHONDONTWRITEBYTECODE": "1"}
    subprocess.run([sys.executable, str(SCRIPT), str(tmp_path)], check=True, env=environment)
    for name in BYTES:
        assert (tmp_path / name).read_bytes() == (DEMO / name).read_bytes(), name
    pd.testing.assert_frame_equal(
        pd.read_parquet(tmp_path / STREAMS), pd.read_parquet(DEMO / STREAMS), check_exact=True
    )
    assert sorted(p.name for p in tmp_path.iterdir()) == sorted((*BYTES, STREAMS))


def test_limit_starting_assets_of_the_demo_equal_its_reserves_in_every_segment(demo: Prepared) -> None:
    study = demo.study
    accrued = pd.Series(demo.bonds.accrued[:, 0], index=list(demo.bonds.ids))
    lots = study.tables.lots
    lots = lots.assign(value=lots["book_value"] + lots["par"] * accrued[lots["security_id"]].to_numpy() / 100.0)
    held = lots.groupby("segment")["value"].sum()
    streams = study.tables.liability_streams
    opening = streams[(streams["item"] == "reserve_statutory") & (streams["month"] == 0)].drop_duplicates("block")
    reserve = opening.groupby("segment")["amount"].sum()
    for segment in study.segments:
        assert 0.0 <= held[segment.name] + segment.cash - reserve[segment.name] < 0.005
        assert 0.002 < segment.cash / reserve[segment.name] < 0.01


def test_limit_streams_of_the_demo_are_bound_to_its_own_paths(demo: Prepared) -> None:
    assert demo.study.liabilities.scenario_set_digest == demo.paths.digest()


def test_limit_every_price_of_the_demo_has_a_spread_within_a_tenth_of_its_class(demo: Prepared) -> None:
    priced = ~demo.bonds.announced  # a price three weeks from repayment tells nothing of a spread
    assert set(np.array(demo.calibrated.origin)[priced]) == {"price"}
    assert priced.sum() == len(demo.bonds.ids) - 1
    class_spread = demo.solver.spreads.class_spread[:, 0]
    assert (abs(demo.calibrated.spread / class_spread - 1.0) < 0.1).all()


def test_order_only_the_three_bonds_named_on_the_page_are_below_their_make_whole_spread(demo: Prepared) -> None:
    spread = pd.Series(demo.calibrated.spread * 1e4, index=list(demo.bonds.ids))
    make_whole = make_whole_spreads(demo)
    below = make_whole.index[spread[make_whole.index].to_numpy() <= make_whole.to_numpy()]
    page = (DEMO / "README.md").read_text(encoding="utf-8")
    assert len(below) == 3
    assert all(name in page for name in below)


def test_order_the_demo_holds_what_its_page_promises(demo: Prepared) -> None:
    tables = demo.study.tables
    securities, lots, rights = tables.securities, tables.lots, tables.call_rights
    assert len(securities) >= 220
    assert len(lots) >= 320
    assert securities["sector"].nunique() == 10
    assert f"{len(securities)} securities in {len(lots)} lots" in (DEMO / "README.md").read_text(encoding="utf-8")
    assert set(rights["style"]) == {"european", "bermudan", "american", "make_whole"}
    stated = set(rights[rights["style"] != "make_whole"]["security_id"])
    share = lots[lots["security_id"].isin(stated)]["par"].sum() / lots["par"].sum()
    assert 0.20 <= share <= 0.25
    price = pd.Series(demo.calibrated.clean_price, index=list(demo.bonds.ids))
    market = (lots["par"] * price[lots["security_id"]].to_numpy() / 100.0).sum()
    assert 0.90 <= market / lots["book_value"].sum() <= 0.97
    odd = securities["first_coupon_date"]
    assert (odd > pd.Timestamp(demo.study.valuation_date)).sum() == 2
    assert (securities["coupon_frequency"] == 0).sum() >= 3
