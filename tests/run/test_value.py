"""`projector value`: figures against other roads, tables whole or not at all, refusals in one sentence."""

from __future__ import annotations

import json
from collections.abc import Callable
from datetime import date
from pathlib import Path
from typing import Any

import numpy as np
import numpy_financial as npf
import pandas as pd
import pyarrow.parquet as pq
import pytest
import QuantLib as ql
from projection_studies import busy_study, call_right, hand_study

import projector
from projector.bonds.mapped import Terms
from projector.bonds.yields import from_bond_equivalent
from projector.rates.curve import CurveError
from projector.rates.key_rates import KEY_NAMES
from projector.run.publish import STALE_PREFIX, file_digest
from projector.run.street import price_at_required_yield, street_redemptions, worst_yield
from projector.run.value_columns import REQUIRED_COLUMNS, VALUE_COLUMNS
from projector.run.value_table import ValueResults, value_staged
from projector.run.value_text import figure, value_text

REQUIRED = 0.055
TODAY = date(2022, 12, 31)
Command = Callable[..., tuple[int, str, str]]


@pytest.fixture(scope="module")
def values(busy: Any) -> ValueResults:
    """The busy study, valued with a required yield."""
    return value_staged(busy, REQUIRED)


@pytest.fixture
def command(run_command: Command) -> Command:
    """Runs a command in this process: exit code, output, errors on one line."""

    def run(*arguments: object) -> tuple[int, str, str]:
        code, out, err = run_command(*arguments)
        return code, out, " ".join(err.replace("│", " ").split())

    return run


def listing(folder: Path) -> dict[str, str]:
    return {p.relative_to(folder).as_posix(): file_digest(p) for p in sorted(folder.rglob("*")) if p.is_file()}


def security(values: ValueResults, name: str) -> pd.Series:
    return values.holdings.set_index("security_id").loc[name]


# figures


def test_known_price_yield_and_accrued_of_a_general_library(values: ValueResults) -> None:
    """QuantLib FixedRateBond, 30/360, half-yearly compounding: B1, 5 % to 2030-06-15 at 101.25."""
    today = ql.Date(31, 12, 2022)
    ql.Settings.instance().evaluationDate = today
    count = ql.Thirty360(ql.Thirty360.BondBasis)
    dates = ql.Schedule(ql.Date(15, 6, 2020), ql.Date(15, 6, 2030), ql.Period(6, ql.Months), ql.NullCalendar(),
                        ql.Unadjusted, ql.Unadjusted, ql.DateGeneration.Backward, False)  # fmt: skip
    bond = ql.FixedRateBond(0, 100.0, dates, [0.05], count)
    clean = ql.BondPrice(101.25, ql.BondPrice.Clean)
    rate = ql.BondFunctions.bondYield(bond, clean, count, ql.Compounded, ql.Semiannual, today, 1e-12, 200, 0.05)
    row = security(values, "B1")
    assert row["yield_to_maturity"] == pytest.approx(rate, abs=1e-9)
    assert row["accrued"] == pytest.approx(bond.accruedAmount(today), abs=1e-12)
    assert row["dirty_price"] == row["clean_price"] + row["accrued"]


def test_order_the_yield_to_worst_is_the_least_of_the_yields_to_each_redemption(values: ValueResults) -> None:
    listed = values.call_yields.groupby("security_id")["yield"].min()
    found = values.holdings.set_index("security_id")["yield_to_worst"]
    np.testing.assert_allclose(found, listed[found.index], rtol=0.0, atol=1e-10)
    counts = values.call_yields.groupby("security_id")["redemption"].value_counts().unstack()
    assert (counts["maturity"] == 1).all()
    assert counts.loc["B1", "call"] == 4  # two prices, first and last day of each


def test_order_the_price_at_the_yield_to_worst_is_the_price(busy: Any, values: ValueResults) -> None:
    prepared = busy.prepared
    rights = {"B1": 2, "B4": 2}
    for u, name in enumerate(prepared.bonds.ids):
        row = security(values, name)
        mine = [
            {**r, "first_date": r["first_date"].date(), "last_date": r["last_date"].date()}
            for r in prepared.study.tables.call_rights.to_dict("records")
            if r["security_id"] == name
        ]
        assert len(mine) == rights.get(name, 0)
        ways = street_redemptions(prepared.dated_bonds[u], prepared.security_rows[name], mine, TODAY)
        back, day = price_at_required_yield(prepared.dated_bonds[u], ways, TODAY, row["yield_to_worst"])
        assert back == pytest.approx(row["clean_price"], abs=1e-8)
        assert day.isoformat() == row["worst_date"]
        assert (row["price_at_required_yield"] > row["clean_price"]) == (row["yield_to_worst"] > REQUIRED)


def test_order_a_price_gives_a_spread_and_the_spread_the_price(busy_folder: Path, tmp_path: Path) -> None:
    before = projector.value_study(busy_folder).set_index("security_id")
    study = busy_study(tmp_path / "spreads")
    for line, row in enumerate(study.tables["securities"], start=2):
        oas = before.loc[row["security_id"], "oas_bp"]
        study.cell("securities", line, "clean_price", "").cell("securities", line, "spread_bp", repr(float(oas)))
    after = projector.value_study(study.write()).set_index("security_id")
    assert (after["spread_from"] == "given").all()
    for name in ("clean_price", "yield_to_worst", "effective_duration", "effective_convexity", "never_called"):
        np.testing.assert_allclose(after[name], before[name], rtol=1e-8, atol=1e-7)


def test_order_the_parts_of_a_price_add_up(values: ValueResults) -> None:
    h = values.holdings
    priced = h[h["spread_from"] == "price"]
    np.testing.assert_allclose(priced["model_price"], priced["clean_price"], rtol=0.0, atol=1e-8)
    np.testing.assert_allclose(h["straight_value"] - h["option_value"], h["model_price"], rtol=0.0, atol=1e-12)
    plain = h["next_call_date"] == ""
    np.testing.assert_allclose(h.loc[plain, "option_value"], 0.0, atol=1e-10)
    assert (h.loc[~plain, "option_value"] > 0.0).all()
    np.testing.assert_allclose(h["market_value"], h["par"] * h["clean_price"] / 100.0, rtol=1e-15)
    np.testing.assert_allclose(h["market_value_with_accrued"], h["par"] * h["dirty_price"] / 100.0, rtol=1e-15)
    keys = h[[f"key_rate_{name}" for name in KEY_NAMES]].sum(axis=1)
    np.testing.assert_allclose(keys, h["effective_duration"], rtol=0.0, atol=0.03)


def test_order_call_odds_and_never_called_add_to_one(values: ValueResults) -> None:
    odds = values.call_odds.groupby("security_id")["probability"].sum()
    never = values.holdings.set_index("security_id")["never_called"]
    assert set(odds.index) == {"B1", "B2", "B4"}
    np.testing.assert_allclose(odds + never[odds.index], 1.0, rtol=0.0, atol=1e-6)
    assert (never.drop(odds.index) == 1.0).all()
    years = values.call_odds[values.call_odds["security_id"] == "B1"]["year"].tolist()
    assert years == sorted(years)
    assert years[0] == 2023
    assert years[-1] == 2030


def make_whole_study(folder: Path, coupon: str, first: str = "2021-06-30") -> Path:
    """The study for the pencil, its curve flat at 6 %, B3 with a make-whole right at 50 bp and a par call."""
    study = hand_study(folder)
    study.cell("securities", 4, "coupon_rate", coupon).cell("securities", 4, "par_call_date", "2027-06-30")
    study.tables["call_rights"].append(
        {**call_right("B3", first, "2027-06-29", "", "make_whole"), "make_whole_spread_bp": "50"}
    )
    return study.write()


def test_known_make_whole_price_by_a_second_library(tmp_path: Path) -> None:
    """numpy-financial pv: nine half-years to the par call at (6 % + 50 bp) / 2; below par the price is par."""
    rich = projector.value_study(make_whole_study(tmp_path / "rich", "0.08")).set_index("security_id")
    assert rich.loc["B3", "make_whole_price"] == pytest.approx(-npf.pv(0.0325, 9, 4.0, 100.0), abs=1e-9)
    assert np.isnan(rich.loc["B1", "make_whole_price"])
    poor = projector.value_study(make_whole_study(tmp_path / "poor", "0.05")).set_index("security_id")
    assert poor.loc["B3", "make_whole_price"] == 100.0
    assert poor.loc["B3", "next_call_date"] == "2027-06-30"
    later = projector.value_study(make_whole_study(tmp_path / "later", "0.08", "2023-01-31")).set_index("security_id")
    assert np.isnan(later.loc["B3", "make_whole_price"])


def test_known_on_a_flat_curve_the_spread_to_treasury_is_the_yield_less_the_curve(hand: Any) -> None:
    h = value_staged(hand).holdings
    np.testing.assert_allclose(h["spread_to_treasury_maturity_bp"], 1e4 * (h["yield_to_maturity"] - 0.06), atol=1e-6)
    np.testing.assert_allclose(h["spread_to_treasury_worst_bp"], 1e4 * (h["yield_to_worst"] - 0.06), atol=1e-6)


def test_limit_a_bermudan_row_is_used_on_coupon_dates_and_no_price_is_above_par_after_the_par_call() -> None:
    row = {
        "coupon_rate": 0.05, "coupon_frequency": 2, "day_count": "30/360", "end_of_month": False,
        "issue_date": date(2020, 6, 15), "maturity_date": date(2030, 6, 15), "first_coupon_date": None,
        "par_call_date": date(2029, 12, 15),
    }  # fmt: skip
    rights = [
        {"style": "bermudan", "first_date": date(2024, 1, 1), "last_date": date(2026, 1, 1), "price": 102.0},
        {"style": "bermudan", "first_date": date(2026, 1, 2), "last_date": date(2026, 6, 1), "price": 101.0},
        {"style": "american", "first_date": date(2026, 6, 2), "last_date": date(2030, 1, 1), "price": 100.5},
        {"style": "make_whole", "first_date": date(2021, 1, 1), "last_date": date(2029, 12, 14), "price": np.nan},
    ]
    found = [(way.day, way.price) for way in street_redemptions(Terms(row).dated(), row, rights, TODAY)]
    assert found == [
        (date(2024, 6, 15), 102.0), (date(2025, 12, 15), 102.0), (date(2026, 6, 2), 100.5),
        (date(2029, 12, 15), 100.0), (date(2030, 1, 1), 100.0), (date(2030, 6, 14), 100.0),
    ]  # fmt: skip


def test_limit_a_yield_beyond_belief_is_left_empty_with_its_date() -> None:
    row = {
        "coupon_rate": 0.05, "coupon_frequency": 2, "day_count": "30/360", "end_of_month": False,
        "issue_date": date(2020, 6, 15), "maturity_date": date(2030, 6, 15), "first_coupon_date": None,
        "par_call_date": None,
    }  # fmt: skip
    rights = [{"style": "american", "first_date": date(2021, 1, 1), "last_date": date(2030, 6, 1), "price": 100.0}]
    bond = Terms(row).dated()
    found = worst_yield(bond, street_redemptions(bond, row, rights, TODAY), TODAY, 104.0)
    assert np.isnan(found.annual_yield)
    assert found.redemption == (date(2023, 1, 1), 100.0)


def test_known_a_bond_equivalent_yield_of_four_percent_is_this_much_monthly_and_yearly() -> None:
    """numpy-financial rate: what grows by 1.02 in half a year grows monthly and yearly by these."""
    assert from_bond_equivalent(0.04, 12) == pytest.approx(12.0 * npf.rate(6, 0.0, -1.0, 1.02), abs=1e-12)
    assert from_bond_equivalent(0.04, 1) == pytest.approx(1.02**2 - 1.0, abs=1e-15)
    assert from_bond_equivalent(0.04, 2) == 0.04


# tables and texts


def test_known_frames_follow_their_columns_and_the_required_yield_stands_only_when_asked(
    busy: Any, values: ValueResults
) -> None:
    assert set(projector.value_columns(True)["holdings"]) - set(VALUE_COLUMNS["holdings"]) == set(REQUIRED_COLUMNS)
    plain = value_staged(busy)
    for results in (values, plain):
        for name, frame in results.tables().items():
            assert list(frame.columns) == list(results.columns()[name])
    assert not set(REQUIRED_COLUMNS) & set(plain.holdings.columns)
    pd.testing.assert_frame_equal(plain.holdings, values.holdings.drop(columns=list(REQUIRED_COLUMNS)))
    assert plain.holdings["security_id"].tolist() == [f"B{i}" for i in range(1, 7)]


def test_known_units_and_meanings_of_every_column_are_stated(values: ValueResults) -> None:
    units = {"-", "1/year", "per 100", "bp", "year", "year^2", "currency", "date"}
    for columns in values.columns().values():
        for name, (unit, meaning) in columns.items():
            assert unit in units, name
            assert len(meaning) > 3, name
    for name in ("call_odds", "holdings"):
        said = " ".join(meaning for _, meaning in values.columns()[name].values())
        assert "pricing measure, not a forecast" in said


def test_known_the_printed_table_has_a_line_a_security_and_one_for_all(values: ValueResults) -> None:
    lines = value_text(values).split("\n")
    assert [line.split()[0] for line in lines[4:10]] == [f"B{i}" for i in range(1, 7)]
    assert lines[11].startswith("6 securities, par ")
    assert any("pricing measure, not a forecast" in line for line in lines)
    assert figure(float("nan"), 2) == "-"
    assert figure(-0.0004, 3) == "0.000"
    assert figure(-1234.5, 1) == "-1,234.5"


# the command


def test_known_value_prints_and_publishes_whole(busy_folder: Path, tmp_path: Path, command: Command) -> None:
    target, before = tmp_path / "out", listing(busy_folder)
    code, said, errors = command("value", busy_folder, "--out", target, "--required-yield", REQUIRED)
    assert (code, errors) == (0, "")
    assert said.rstrip().split("\n")[-1] == f"tables: {target / 'tables'}"
    found = listing(target)
    assert set(found) == {"run_statement.json", *(f"tables/{name}.parquet" for name in VALUE_COLUMNS)}
    statement = json.loads((target / "run_statement.json").read_text(encoding="utf-8"))
    digests = {s["name"]: s["digest"]["sha256"] for s in statement["subject"]}
    assert digests == {name: digest for name, digest in found.items() if name != "run_statement.json"}
    columns = projector.value_columns(required_yield=True)
    for name in VALUE_COLUMNS:
        for field in pq.read_schema(target / "tables" / f"{name}.parquet"):
            assert (field.metadata[b"unit"].decode(), field.metadata[b"meaning"].decode()) == columns[name][field.name]
    assert listing(busy_folder) == before
    assert command("value", busy_folder, "--out", target, "--required-yield", REQUIRED)[0] == 0
    assert listing(target) == found
    assert [p.name for p in tmp_path.iterdir()] == ["out"]


def test_known_without_out_the_folder_is_named_by_study_and_digest(
    hand_folder: Path, hand: Any, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, command: Command
) -> None:
    monkeypatch.chdir(tmp_path)
    assert command("value", hand_folder)[0] == 0
    name = f"hand-{hand.prepared.study.input_digest[:12]}-value"
    assert [p.name for p in (tmp_path / "reports").iterdir()] == [name]


@pytest.mark.parametrize("required", ["5", "-0.2", "nan"])
def test_limit_a_required_yield_that_is_none_is_refused(
    required: str, hand_folder: Path, tmp_path: Path, command: Command
) -> None:
    code, said, errors = command("value", hand_folder, "--out", tmp_path / "out", f"--required-yield={required}")
    assert (code, said) == (2, "")
    assert "is not between -0.05 and 0.5; it is a decimal a year, bond-equivalent: 0.05 is 5 %" in errors
    assert not list(tmp_path.iterdir())
    with pytest.raises(ValueError, match=r"^the required yield .* is not between -0\.05 and 0\.5;"):
        projector.value_study(hand_folder, float(required))


def test_limit_values_never_take_the_place_of_a_run_nor_of_what_no_command_wrote(
    hand_folder: Path, tmp_path: Path, command: Command
) -> None:
    target = tmp_path / "run"
    assert command("run", hand_folder, "--no-report", "--out", target)[0] == 0
    before = listing(tmp_path)
    code, _, errors = command("value", hand_folder, "--out", target)
    assert code == 2
    assert "holds the results of a run" in errors
    (tmp_path / "mine").mkdir()
    (tmp_path / "mine" / "notes.txt").write_text("mine", encoding="utf-8")
    assert command("value", hand_folder, "--out", tmp_path / "mine")[0] == 2
    assert command("value", hand_folder, "--out", hand_folder / "out")[0] == 2
    assert {name: digest for name, digest in listing(tmp_path).items() if name != "mine/notes.txt"} == before


def test_limit_a_refused_study_or_a_broken_writer_leaves_nothing(
    hand_folder: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, command: Command
) -> None:
    study = hand_study(tmp_path / "hand").cell("lots", 2, "par", "-1")
    code, said, errors = command("value", study.write(), "--out", tmp_path / "out")
    assert (code, said) == (2, "")
    assert "lots.csv, row 2, column par" in errors

    def broken(*_: object) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("projector.run.value_folder.write_statement", broken)
    assert command("value", hand_folder, "--out", tmp_path / "out")[0] == 2
    assert [p.name for p in tmp_path.iterdir()] == ["hand"]
    assert not list(tmp_path.glob(f"{STALE_PREFIX}*"))


def test_limit_a_curve_that_bears_no_shift_is_refused_in_one_sentence(
    hand_folder: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, command: Command
) -> None:
    def steep(*_: object) -> None:
        raise CurveError(0, 3)

    monkeypatch.setattr("projector.run.value_table.shifted_discounts", steep)
    code, said, errors = command("value", hand_folder, "--out", tmp_path / "out")
    assert (code, said) == (2, "")
    assert errors == (
        "E454 yield_curve.csv, column rate: the starting curve moved by +5 bp leaves no positive discount, so there is"
        " no duration; look for a yield in the wrong unit or with too steep a step between tenors."
    )
    assert not list(tmp_path.iterdir())


def test_pinned_the_example_of_the_readme_is_what_the_demo_prints() -> None:
    root = Path(__file__).resolve().parents[2]
    if not (root / "README.md").is_file():
        pytest.skip("README.md is not there")
    said = value_text(projector.value_tables(root / "scenarios" / "harbour_ridge_2022", 0.06)).split("\n")
    page = (root / "README.md").read_text(encoding="utf-8").split("\n")
    start = next(i for i, line in enumerate(page) if line.startswith("    security "))
    shown = [line[4:] for line in page[start : page.index("", start)]]
    assert len(shown) == 10
    for line in shown:
        assert line in said
