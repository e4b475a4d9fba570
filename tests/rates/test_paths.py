"""Rate paths: the seven of the regulations in each reading, tables of shifts, history, imported sets, the digest."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pandas as pd
import pytest

from projector.rates.curve import log_discount_nodes
from projector.rates.paths import build_paths, five_year_yield
from projector.rates.presets.seven import TITLES, seven_paths, shift_at
from projector.rates.tabled import history_paths, imported_paths, shift_paths
from projector.study.records import PathSource

YEARS = 15
FLAT = np.full(3, 0.04)
# Rule text: Nevada Administrative Code 681B.240 (1)(a)-(g), 1996; 11 NYCRR 95.10(d). Per cent, from 4 %, years 0..15.
UNFLOORED = {
    1: (4.0,) * 16,
    2: (4.0, 4.5, 5.0, 5.5, 6.0, 6.5, 7.0, 7.5, 8.0, 8.5, *(9.0,) * 6),
    3: (4.0, 5.0, 6.0, 7.0, 8.0, 9.0, 8.0, 7.0, 6.0, 5.0, *(4.0,) * 6),
    4: (4.0, *(7.0,) * 15),
    5: (4.0, 3.5, 3.0, 2.5, 2.0, 1.5, 1.0, 0.5, 0.0, -0.5, *(-1.0,) * 6),
    6: (4.0, 3.0, 2.0, 1.0, 0.0, -1.0, 0.0, 1.0, 2.0, 3.0, *(4.0,) * 6),
    7: (4.0, *(1.0,) * 15),
}
FLOORED = UNFLOORED | {
    5: (4.0, 3.5, 3.0, 2.5, *(2.0,) * 12),
    6: (4.0, 3.0, *(2.0,) * 7, 3.0, *(4.0,) * 6),
    7: (4.0, *(2.0,) * 15),
}
FROM_FLOOR = FLOORED | {6: (4.0, 3.0, 2.0, 2.0, 2.0, 2.0, 3.0, *(4.0,) * 9)}


def at_year_ends(floor: str, within_year: str, recovery: str, start: np.ndarray = FLAT) -> np.ndarray:
    """Yields in per cent at years 0..15. [year, tenor, path]"""
    five = float(start[1])
    return 100.0 * seven_paths(start, five, 12 * YEARS, floor, within_year, recovery)[::12]


@pytest.mark.parametrize("within_year", ["year_end_steps", "linear"])
@pytest.mark.parametrize(
    ("floor", "recovery", "expected"),
    [("none", "cut", UNFLOORED), ("none", "from_floor", UNFLOORED), ("shift", "cut", FLOORED),
     ("every_tenor", "cut", FLOORED), ("shift", "from_floor", FROM_FLOOR), ("every_tenor", "from_floor", FROM_FLOOR)],
)  # fmt: skip
def test_known_seven_paths_from_four_per_cent_at_year_ends(floor, recovery, expected, within_year) -> None:
    found = at_year_ends(floor, within_year, recovery)
    for k in range(1, 8):
        for tenor in range(3):
            np.testing.assert_allclose(found[:, tenor, k - 1], expected[k], rtol=0, atol=1e-12)


@pytest.mark.parametrize(
    ("recovery", "k", "shifts"),
    [
        ("cut", 5, (0, -0.5, -1, -1.5, -2, -2.05, -2.05, -2.05, -2.05, -2.05, -2.05)),
        ("cut", 6, (0, -1, -2, -2.05, -2.05, -2.05, -2.05, -2.05, -2, -1, 0)),
        ("from_floor", 6, (0, -1, -2, -2.05, -2.05, -2.05, -1.05, -0.05, 0, 0, 0)),
        ("cut", 7, (0, *(-2.05,) * 10)),
    ],
)
def test_known_worked_floor_with_the_five_year_at_4_10_per_cent(recovery, k, shifts) -> None:
    """The largest downward shift is half of 4.10 %; worked by hand from the rule's text."""
    start = np.array([0.045, 0.041, 0.038])
    found = at_year_ends("shift", "year_end_steps", recovery, start)[:11, :, k - 1]
    np.testing.assert_allclose(found - 100.0 * start, np.repeat(np.array(shifts)[:, None], 3, axis=1), atol=1e-12)


def test_known_floor_on_every_tenor_keeps_half_of_each() -> None:
    start = np.array([0.05, 0.041, 0.01])
    found = at_year_ends("every_tenor", "linear", "cut", start)
    np.testing.assert_allclose(found[1:, :, 6], np.tile([2.5, 2.05, 0.5], (YEARS, 1)), atol=1e-12)
    assert found[5, 0, 4] == pytest.approx(2.5)
    assert found[4, 0, 4] == pytest.approx(3.0)  # the five-year at its floor of 2.10, the one-year not yet
    assert found[4, 1, 4] == pytest.approx(2.1)


def test_known_steps_come_at_year_ends_and_linear_changes_within_the_year() -> None:
    steps = seven_paths(FLAT, 0.04, 24, "none", "year_end_steps", "cut")
    linear = seven_paths(FLAT, 0.04, 24, "none", "linear", "cut")
    for m in range(25):
        assert steps[m, 0, 1] == pytest.approx(0.04 + 0.005 * (m // 12), abs=1e-16)
        assert linear[m, 0, 1] == pytest.approx(0.04 + 0.005 * m / 12.0, abs=1e-16)


@pytest.mark.parametrize("within_year", ["year_end_steps", "linear"])
def test_known_immediate_changes_apply_from_month_one(within_year) -> None:
    paths = seven_paths(FLAT, 0.04, 3, "none", within_year, "cut")
    np.testing.assert_allclose(paths[0, 0], 0.04, atol=0)
    np.testing.assert_allclose(paths[1:, 0, 3], 0.07, atol=1e-16)
    np.testing.assert_allclose(paths[1:, 0, 6], 0.01, atol=1e-16)


@pytest.mark.parametrize("floor", ["shift", "every_tenor"])
def test_limit_a_start_at_or_below_zero_has_no_floor(floor) -> None:
    start = np.array([-0.004, -0.001, 0.0])
    np.testing.assert_array_equal(
        seven_paths(start, -0.001, 24, floor, "linear", "from_floor"),
        seven_paths(start, -0.001, 24, "none", "linear", "cut"),
    )


def test_limit_the_up_paths_know_no_floor_and_no_cap() -> None:
    for k in (1, 2, 3, 4):
        for floor in ("shift", "every_tenor"):
            np.testing.assert_array_equal(
                seven_paths(FLAT, 0.04, 120, floor, "linear", "from_floor")[:, :, k - 1],
                seven_paths(FLAT, 0.04, 120, "none", "linear", "cut")[:, :, k - 1],
            )


def test_limit_mirror_paths_have_mirror_shifts() -> None:
    for years in np.linspace(0.0, 12.0, 49):
        for up, down in ((2, 5), (3, 6), (4, 7)):
            assert shift_at(up, years) == -shift_at(down, years)


def test_known_five_year_yield_is_read_between_its_neighbours() -> None:
    assert five_year_yield((3, 12, 60, 120), np.array([0.05, 0.045, 0.041, 0.039])) == 0.041
    assert five_year_yield((12, 36, 84), np.array([0.05, 0.04, 0.02])) == pytest.approx(0.03, abs=1e-16)


TENORS = (3, 12, 60, 120)
START = np.array([0.044, 0.047, 0.040, 0.039])


def shift_table(*rows: tuple[str, int, int, float]) -> pd.DataFrame:
    return pd.DataFrame(rows, columns=["title", "year", "tenor_months", "shift"])


TWIST = shift_table(
    ("steeper", 0, 12, -0.01), ("steeper", 0, 120, 0.01), ("steeper", 2, 12, -0.02), ("steeper", 2, 120, 0.0)
)


def test_known_a_twist_is_linear_between_tenors_and_flat_outside() -> None:
    titles, yields = shift_paths(TWIST, TENORS, START, 36, "linear")
    assert titles == ("steeper",)
    np.testing.assert_array_equal(yields[0, :, 0], START)
    between = -0.01 + 0.02 * (60 - 12) / (120 - 12)
    step = np.array([-0.01, -0.01, between, 0.01])
    after = -0.02 + 0.02 * (60 - 12) / (120 - 12)
    last = np.array([-0.02, -0.02, after, 0.0])
    np.testing.assert_allclose(yields[24, :, 0] - START, last, atol=1e-16)
    np.testing.assert_allclose(yields[36, :, 0], yields[24, :, 0], atol=0)
    for m in (1, 6, 23):  # evenly over the two years
        np.testing.assert_allclose(yields[m, :, 0] - START, step + (last - step) * m / 24.0, atol=1e-16)


def test_known_shift_table_steps_hold_within_the_year_and_jump_in_month_one() -> None:
    _, yields = shift_paths(TWIST, TENORS, START, 25, "year_end_steps")
    for m in range(1, 12):
        np.testing.assert_allclose(yields[m, 0, 0] - START[0], -0.01, atol=1e-16)
    np.testing.assert_allclose(yields[12, 0, 0] - START[0], -0.015, atol=1e-16)
    np.testing.assert_allclose(yields[23, 0, 0] - START[0], -0.015, atol=1e-16)
    np.testing.assert_allclose(yields[24:, 0, 0] - START[0], -0.02, atol=1e-16)


def test_order_rows_of_tables_of_paths_may_stand_in_any_order() -> None:
    shuffled = TWIST.sample(frac=1.0, random_state=3)
    np.testing.assert_array_equal(
        shift_paths(shuffled, TENORS, START, 30, "linear")[1], shift_paths(TWIST, TENORS, START, 30, "linear")[1]
    )
    table = history()
    np.testing.assert_array_equal(
        history_paths(table.sample(frac=1.0, random_state=3), TENORS, START, 6, "changes")[1],
        history_paths(table, TENORS, START, 6, "changes")[1],
    )


def history() -> pd.DataFrame:
    """Months 0..3, two tenors, invented."""
    rows = [("1981", m, t, 0.10 + 0.01 * m - 0.0001 * t) for m in range(4) for t in (12, 120)]
    return pd.DataFrame(rows, columns=["title", "month", "tenor_months", "rate"])


def test_known_history_replays_changes_on_the_starting_curve_or_levels_from_month_one() -> None:
    titles, changes = history_paths(history(), TENORS, START, 6, "changes")
    _, levels = history_paths(history(), TENORS, START, 6, "levels")
    assert titles == ("1981",)
    for m, passed in enumerate((0, 1, 2, 3, 3, 3, 3)):  # after its last month the curve stays
        np.testing.assert_allclose(changes[m, :, 0] - START, 0.01 * passed, atol=1e-15)
        if m:
            level = 0.10 + 0.01 * passed - 0.0001 * np.array([12, 12, 60, 120])
            np.testing.assert_allclose(levels[m, :, 0], level, atol=1e-15)
    np.testing.assert_array_equal(levels[0, :, 0], START)


def imported() -> pd.DataFrame:
    rng = np.random.default_rng(2)
    rows = [
        (name, m, t, START[j] if m == 0 else round(float(rng.uniform(0.01, 0.08)), 6))
        for name in ("10", "2", "1")
        for m in range(4)
        for j, t in enumerate(TENORS)
    ]
    return pd.DataFrame(rows, columns=["scenario", "month", "tenor_months", "rate"])


def test_known_imported_sets_come_as_supplied_and_in_the_order_of_their_names() -> None:
    table = imported()
    titles, yields = imported_paths(table.sample(frac=1.0, random_state=1), TENORS, START, 3)
    assert titles == ("1", "2", "10")
    at = table.set_index(["scenario", "month", "tenor_months"])["rate"]
    for p, name in enumerate(titles):
        for m in range(4):
            np.testing.assert_array_equal(yields[m, :, p], [at[(name, m, t)] for t in TENORS])


def test_limit_imported_months_beyond_the_horizon_are_left_out() -> None:
    _, yields = imported_paths(imported(), TENORS, START, 2)
    np.testing.assert_array_equal(yields, imported_paths(imported(), TENORS, START, 3)[1][:3])


def with_sources(study: Any, *sources: PathSource, **tables: pd.DataFrame) -> Any:
    """A study with these sources of paths."""
    return replace(
        study,
        rates=replace(study.rates, paths=tuple(sources)),
        tables=replace(study.tables, rate_tables={f"{name}.csv": t for name, t in tables.items()}),
    )


SEVEN = PathSource(kind="seven_deterministic", floor="shift", within_year="linear", recovery="cut")
SHIFTS = PathSource(kind="shift_table", file="shifts.csv", within_year="linear")


def test_known_sources_are_numbered_in_the_order_written(busy: Any) -> None:
    table = shift_table(("b", 0, 12, 0.01), ("a", 0, 12, 0.0))
    paths = build_paths(with_sources(busy.prepared.study, SEVEN, SHIFTS, shifts=table))
    assert paths.ids == tuple(f"S{i}" for i in range(1, 10))
    assert paths.titles == (*TITLES, "a", "b")
    assert paths.kinds == ("seven_deterministic",) * 7 + ("shift_table",) * 2
    np.testing.assert_array_equal(paths.yields[:, :, 7], paths.yields[:, :, 0])  # a shift of nothing is the level path


def test_order_the_set_digest_knows_every_rate_the_order_and_the_basis(busy: Any) -> None:
    paths = busy.prepared.paths
    digests = {paths.digest()}
    for m, j, p in ((1, 0, 0), (24, 2, 6), (7, 1, 3)):
        yields = paths.yields.copy()
        yields[m, j, p] = np.nextafter(yields[m, j, p], 1.0)
        digests.add(replace(paths, yields=yields).digest())
    digests.add(replace(paths, yields=np.ascontiguousarray(paths.yields[:, :, ::-1])).digest())
    digests.add(replace(paths, reading=replace(paths.reading, par_basis=False)).digest())
    digests.add(replace(paths, yields=paths.yields[:, :, :6], ids=paths.ids[:6]).digest())
    assert len(digests) == 7
    study = busy.prepared.study
    table = shift_table(("a", 0, 12, 0.005))
    one = build_paths(with_sources(study, SEVEN, SHIFTS, shifts=table)).digest()
    other = build_paths(with_sources(study, SHIFTS, SEVEN, shifts=table)).digest()
    assert one != other


def test_limit_the_set_digest_does_not_depend_on_memory_layout(busy: Any) -> None:
    paths = busy.prepared.paths
    assert replace(paths, yields=np.asfortranarray(paths.yields)).digest() == paths.digest()


def test_order_one_path_cut_out_has_the_curves_it_has_in_the_set(busy: Any) -> None:
    paths = busy.prepared.paths
    whole = log_discount_nodes(paths.yields, paths.reading)
    for p in range(paths.count):
        np.testing.assert_array_equal(log_discount_nodes(paths.part(p, p + 1), paths.reading)[:, :, 0], whole[:, :, p])


def test_limit_every_path_starts_from_the_starting_curve(busy: Any) -> None:
    start = busy.prepared.study.tables.yield_curve["rate"].to_numpy()
    for p in range(busy.prepared.paths.count):
        np.testing.assert_array_equal(busy.prepared.paths.yields[0, :, p], start)
