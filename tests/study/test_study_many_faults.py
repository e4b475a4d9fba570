"""Tables with a fault in every row: as much is told as is read, and the rest is counted, not built."""

from __future__ import annotations

from collections import Counter
from typing import Any

import pandas as pd
import pytest

from projector.study.errors import SHOWN_AT_MOST, LocatedError, StudyRefused, first_errors
from projector.study.ratechecks import rate_table_errors
from projector.study.reading import read_study
from projector.study.streamchecks import check_stream_scenarios


def _error(at: int) -> LocatedError:
    return LocatedError(code="E307", file="a.csv", row=at, column="x", problem="p", remedy="r")


def test_limit_errors_beyond_twenty_are_counted_not_kept() -> None:
    errors = first_errors(range(100), _error, 7)
    assert ([error.row for error in errors], errors[-1].more) == (list(range(SHOWN_AT_MOST)), 87)
    assert first_errors([], _error) == []
    lines = StudyRefused([*errors, _error(500), _error(501)]).text().splitlines()
    assert len(lines) == SHOWN_AT_MOST + 1
    assert lines[-1] == "E307 a.csv, column x: 89 more of the same."


def _refusal(small: Any) -> StudyRefused:
    folder = small.write()
    with pytest.raises(StudyRefused) as refusal:
        read_study(folder)
    kept = Counter((error.code, error.file, error.column) for error in refusal.value.errors)
    assert max(kept.values()) <= SHOWN_AT_MOST  # what takes the time is building them
    return refusal.value


def _many_lots(small: Any, count: int, line: str) -> Any:
    """The small study with this line, numbered, as its lots."""
    folder = small.write()
    small.written_by_hand.add("lots")
    header = "lot_id,security_id,segment,par,book_value,tax_basis\n"
    (folder / "lots.csv").write_text(header + "".join(line.replace("@", str(at)) for at in range(count)))
    return small


@pytest.mark.parametrize(
    ("line", "codes"),
    [
        ("L@,B1,annuities,-@.5,@ USD,x@\n", {("E309", "par"), ("E307", "book_value"), ("E307", "tax_basis")}),
        (" L@,,Seg@,nan,,1e99\n", {("E313", "lot_id"), ("E306", "security_id"), ("E313", "segment")}),
        ("L1,B1,annuities,1000,1000,1000\n", {("E314", "lot_id")}),
        ("L@,B1\n", {("E305", None)}),
        ("L@,B@x,segment_@,1000,1,99999@\n", {("E401", "security_id"), ("E402", "segment"), ("E408", "tax_basis")}),
    ],
)
def test_limit_a_hundred_thousand_bad_rows_are_refused_soon(
    small: Any, line: str, codes: set[tuple[str, str | None]]
) -> None:
    refusal = _refusal(_many_lots(small, 100_000, line))
    assert codes <= {(error.code, error.column) for error in refusal.errors}
    assert len(refusal.errors) < 200
    assert refusal.text().count("\n") < 200
    assert max(error.more for error in refusal.errors) > 99_000


def test_limit_every_choice_unknown_is_refused_soon(small: Any) -> None:
    rows = small.tables["securities"]
    small.tables["securities"] = [{**rows[0], "security_id": f"B{at}", "rating": f"x{at}"} for at in range(20_000)]
    refusal = _refusal(small)
    assert {(error.code, error.column) for error in refusal.errors} == {("E312", "rating")}
    assert refusal.text().endswith("E312 securities.csv, column rating: 19980 more of the same.")


def test_limit_numbers_of_a_parquet_file_are_counted_by_code(small: Any) -> None:
    folder = small.write()
    frame = pd.DataFrame({**{name: [cell] * 90_000 for name, cell in small.tables["lots"][0].items()}, "par": -1.0})
    frame["lot_id"], frame["tax_basis"] = [f"L{at}" for at in range(90_000)], 5.0
    frame.loc[60_000:, "par"] = float("inf")
    frame.to_parquet(folder / "lots.parquet")
    text = _refusal(small.replace('"lots.csv"', '"lots.parquet"')).text()
    assert "E309 lots.parquet, column par: 59980 more of the same." in text
    assert "E308 lots.parquet, column par: 29980 more of the same." in text


def _streams(blocks: int, months: list[int]) -> pd.DataFrame:
    frame = pd.DataFrame(
        [
            {"segment": "a", "block": f"b{at:05d}", "scenario": "S1", "month": month, "item": "reserve_statutory"}
            for at in range(blocks)
            for month in months
        ]
    )
    return frame.assign(amount=1.0, row=range(2, len(frame) + 2))


def test_limit_streams_with_a_fault_in_every_block_are_told_soon() -> None:
    errors = check_stream_scenarios(_streams(20_000, [0, 2, 2]), (), ("S1", "S2"), 12, "s.csv")
    errors += check_stream_scenarios(_streams(2, [0]), tuple(f"x{at}" for at in range(20_000)), ("S1",), 0, "s.csv")
    assert len(errors) <= 4 * SHOWN_AT_MOST
    found = {error.code: error for error in errors if error.more}
    assert {code: error.more + SHOWN_AT_MOST for code, error in found.items()} == dict.fromkeys(
        ("E440", "E441", "E442", "E448"), 20_000
    )
    assert found["E440"].problem == ("block b00019, scenario S1, item reserve_statutory: months 1, 3 to 12 are missing")
    assert found["E441"].problem.endswith("month 2 is there more than once")
    assert found["E442"].problem == "block b00019 has no stream for S2"


def test_limit_gaps_of_many_paths_are_counted() -> None:
    curve = pd.DataFrame({"tenor_months": [3, 12], "rate": [0.04, 0.05]})
    rows = [
        {"scenario": f"P{path}", "month": month, "tenor_months": tenor, "rate": 0.03}
        for path in range(100)
        for month, tenor in ((0, 3), (0, 12), (1, 3), (9, 3))
    ]
    table = pd.DataFrame(rows).assign(row=range(2, 402))
    errors = rate_table_errors("imported", table, curve, 2, "p.csv")
    assert sum(1 + error.more for error in errors if error.code == "E450") == 200
    assert sum(1 + error.more for error in errors if error.code == "E318") == 300
    assert len(errors) == 60
