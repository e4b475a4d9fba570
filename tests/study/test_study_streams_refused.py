"""Liability streams against themselves and the run, control totals, and tables of paths."""

from __future__ import annotations

from typing import Any

import pandas as pd
import pytest

from projector.study.reading import read_study
from projector.study.streamchecks import check_stream_scenarios, spans

IDS = ("S1", "S2")


def _streams(**by_scenario: int) -> pd.DataFrame:
    """One block with an item from month 1 and its reserve from month 0 to the given month, for each scenario."""
    rows = [
        ("annuities", "payout", scenario, month, item)
        for scenario, last in by_scenario.items()
        for item, first in (("expense", 1), ("reserve_statutory", 0))
        for month in range(first, last + 1)
    ]
    frame = pd.DataFrame(rows, columns=["segment", "block", "scenario", "month", "item"])
    return frame.assign(amount=1.0, row=range(2, len(frame) + 2))


def _found(streams: pd.DataFrame, insensitive: tuple[str, ...] = ()) -> list[str]:
    errors = check_stream_scenarios(streams, insensitive, IDS, 12, "streams.csv")
    return [error.sentence() for error in errors]


def test_limit_complete_streams_pass() -> None:
    assert _found(_streams(S1=12, S2=12)) == []
    assert _found(_streams(all=12), ("payout",)) == []


def test_limit_missing_months_are_named() -> None:
    streams = _streams(S1=12, S2=12)
    gone = (streams["scenario"] == "S2") & (streams["item"] == "expense") & streams["month"].isin([3, 7, 8])
    assert _found(streams[~gone]) == [
        "E440 streams.csv, column month: block payout, scenario S2, item expense: months 3, 7 to 8 are missing; "
        "add one row for each, 0 where nothing flows."
    ]


def test_limit_an_item_missing_in_one_scenario_is_named() -> None:
    streams = _streams(S1=12, S2=12)
    found = _found(streams[(streams["scenario"] == "S1") | (streams["item"] != "expense")])
    assert len(found) == 1
    assert "block payout, scenario S2, item expense: months 1 to 12 are missing" in found[0]


def test_limit_a_month_twice_is_named() -> None:
    streams = _streams(S1=12, S2=12)
    found = _found(pd.concat([streams, streams.iloc[[4]]]))
    assert len(found) == 1
    assert found[0].startswith(
        "E441 streams.csv, column month: block payout, scenario S1, item expense: month 5 is there more than once"
    )


def test_limit_a_missing_scenario_is_named() -> None:
    assert _found(_streams(S1=12)) == [
        "E442 streams.csv, column scenario: block payout has no stream for S2; "
        "add a stream for every scenario of the run, or declare the block insensitive to rates."
    ]


def test_limit_a_scenario_of_another_set_is_located() -> None:
    assert _found(_streams(S1=12, S2=12, S8=12)) == [
        "E443 streams.csv, row 52, column scenario: block payout has a stream for a scenario that is not in this run: "
        "it may belong to another set (found 'S8'); make the streams again for the scenarios of this run: S1, S2."
    ]


def test_limit_braces_in_names_are_only_text() -> None:
    errors = check_stream_scenarios(_streams(S1=12), (), ("P{1}", "{"), 12, "streams.csv")
    assert errors[0].remedy.endswith("for the scenarios of this run: P{1}, {")


@pytest.mark.parametrize(
    ("streams", "insensitive", "code"),
    [
        (_streams(all=12), (), "E448"),
        (_streams(S1=12, S2=12), ("payout",), "E448"),
        (_streams(S1=12, S2=12), ("pay_out",), "E448"),
    ],
)
def test_limit_streams_fit_their_declaration(streams: pd.DataFrame, insensitive: tuple[str, ...], code: str) -> None:
    assert {error.split()[0] for error in _found(streams, insensitive)} >= {code}


def test_known_spans_of_months() -> None:
    assert spans([3]) == "3"
    assert spans([1, 2, 3, 7, 9, 10]) == "1 to 3, 7, 9 to 10"


def test_limit_a_month_twice_in_the_table_is_refused_with_block_and_item(small: Any, only_fault: Any) -> None:
    error = only_fault(small.cell("liability_streams", 4, "month", "2"))
    assert error.sentence() == (
        "E441 liability_streams.csv, row 4, column month: segment annuities, block payout, scenario all, "
        "item annuity_payment, month 2 stands in row 3 already (found '2'); "
        "keep one row for each segment and block and scenario and item and month."
    )


@pytest.mark.parametrize(
    ("row", "column", "value", "code"),
    [
        (2, "month", "0", "E447"),
        (2, "month", "25", "E447"),
        (2, "segment", "annuity", "E402"),
        (2, "segment", "life", "E402"),
    ],
)
def test_limit_stream_cells_that_do_not_fit_the_study(
    small: Any, faults: Any, row: int, column: str, value: str, code: str
) -> None:
    found = [
        (error.code, error.row, error.column) for error in faults(small.cell("liability_streams", row, column, value))
    ]
    assert (code, row, column) in found


def test_limit_a_block_in_two_segments_is_refused(small: Any, faults: Any) -> None:
    small.replace("[call_model]", '[[segments]]\nname = "life"\ntitle = "Life"\ncash = 0\n\n[call_model]')
    assert "E444" in {error.code for error in faults(small.cell("liability_streams", 2, "segment", "life"))}


def test_limit_a_block_without_reserve_is_refused(small: Any, faults: Any) -> None:
    streams = small.tables["liability_streams"]
    small.tables["liability_streams"] = [row for row in streams if row["item"] != "reserve_statutory"]
    found = faults(small)
    assert [error.code for error in found] == ["E446", "E430"]
    assert found[0].problem == "block payout has no rows of reserve_statutory"


def test_limit_surrender_close_out_needs_surrender_values(small: Any, only_fault: Any) -> None:
    small.replace('liability_close_out = "statutory_reserve"', 'liability_close_out = "surrender_value"')
    assert only_fault(small).problem == "block payout has no rows of surrender_value"


def _two_scenarios(small: Any) -> None:
    streams = small.tables["liability_streams"]
    small.tables["liability_streams"] = [{**row, "scenario": name} for name in IDS for row in streams]
    small.replace('rate_insensitive_blocks = ["payout"]', "rate_insensitive_blocks = []")


def test_limit_streams_by_scenario_need_the_digest_of_their_set(small: Any, only_fault: Any) -> None:
    _two_scenarios(small)
    error = only_fault(small)
    assert (error.code, error.column) == ("E449", "liabilities.scenario_set_digest")


def test_limit_the_reserve_at_the_start_is_one_amount(small: Any, only_fault: Any) -> None:
    _two_scenarios(small)
    small.replace("rate_insensitive_blocks = []", f'rate_insensitive_blocks = []\nscenario_set_digest = "{"0a" * 32}"')
    error = only_fault(small.cell("liability_streams", 75, "amount", "1850000.01"))
    assert (error.code, error.row, error.column, error.value) == ("E445", 75, "amount", "1850000.01")


@pytest.mark.parametrize(
    ("row", "amount"), [(2, "5"), (3, "1850000.51"), (4, "1845000.74"), (5, "1799999"), (6, "1000")]
)
def test_limit_totals_that_do_not_tie_are_refused(small: Any, only_fault: Any, row: int, amount: str) -> None:
    error = only_fault(small.cell("control_totals", row, "amount", amount))
    assert (error.code, error.file, error.row, error.column) == ("E430", "control_totals.csv", row, "amount")


def test_limit_a_total_that_does_not_tie_reads_as_a_sentence(small: Any, only_fault: Any) -> None:
    assert only_fault(small.cell("control_totals", 3, "amount", "1850100.5")).sentence() == (
        "E430 control_totals.csv, row 3, column amount: par of all segments does not tie: "
        "the tables give 1,850,000.50, -100.00 against the ledger (found '1850100.5'); "
        "find the difference before running; nothing is scaled to fit."
    )


def test_limit_half_a_cent_ties(small: Any) -> None:
    read_study(small.cell("control_totals", 3, "amount", "1850000.505").write())


def test_limit_a_missing_total_is_named(small: Any, only_fault: Any) -> None:
    del small.tables["control_totals"][2]
    error = only_fault(small)
    assert (error.code, error.value) == ("E431", "book_value")


def _paths(small: Any, kind: str, more: str, rows: list[dict[str, Any]]) -> None:
    small.replace("[liabilities]", f'[[rates.paths]]\nkind = "{kind}"\nfile = "paths.csv"\n{more}\n\n[liabilities]')
    small.tables["paths"] = rows


def _history(months: list[int], tenors: tuple[int, ...] = (3, 12, 120)) -> list[dict[str, Any]]:
    return [
        {"title": "Old days", "month": str(month), "tenor_months": str(tenor), "rate": "0.04"}
        for month in months
        for tenor in tenors
    ]


def test_limit_a_history_is_read(small: Any) -> None:
    _paths(small, "history", 'replay = "changes"', _history([0, 1, 2]))
    study, _ = read_study(small.write())
    assert len(study.tables.rate_tables["paths.csv"]) == 9
    assert study.rates.paths[1].replay == "changes"


def test_limit_a_history_with_a_gap_is_refused(small: Any, only_fault: Any) -> None:
    _paths(small, "history", 'replay = "levels"', _history([0, 2]))
    error = only_fault(small)
    assert error.code == "E318"
    assert error.problem == "path Old days has no rate in month 1 for tenors 3, 12, 120"


def test_limit_shifts_have_the_same_tenors_each_year_from_0(small: Any, faults: Any) -> None:
    rows = [
        {"title": "Up", "year": year, "tenor_months": tenor, "shift": "0.01"}
        for year, tenor in (("1", "12"), ("3", "120"))
    ]
    _paths(small, "shift_table", 'within_year = "linear"', rows)
    assert [error.problem for error in faults(small)] == [
        "path Up has no rate in year 0 for tenors 12, 120",
        "path Up has no rate in year 1 for tenors 120",
        "path Up has no rate in year 3 for tenors 12",
    ]


def test_limit_imported_paths_start_from_the_curve(small: Any, only_fault: Any) -> None:
    curve = {"3": "0.0442", "12": "0.0473", "120": "0.0388"}
    rows = [
        {"scenario": "P1", "month": str(month), "tenor_months": tenor, "rate": rate}
        for month in range(25)
        for tenor, rate in curve.items()
    ]
    rows[1]["rate"] = "0.0474"
    _paths(small, "imported", "", rows)
    assert only_fault(small).sentence() == (
        "E450 paths.csv, row 3, column rate: path P1 does not start from the yield curve, "
        "which has 0.0473 at 12 months (found '0.0474'); month 0 of imported paths must be the starting curve: "
        "bring one of the two up to date."
    )
