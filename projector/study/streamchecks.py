"""Liability streams: what they must satisfy alone, and against the scenarios of the run."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from functools import partial
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from projector.study.columns import ALL, FLOW_ITEMS, STATE_ITEMS
from projector.study.errors import LocatedError, first_errors
from projector.study.files import STUDY_FILE
from projector.study.names import listed, nearest
from projector.study.tablecheck import row_errors

RESERVE = "reserve_statutory"
SAME_TO = 0.005  # [currency]
_PLACE = ("block", "scenario", "item")
Place = tuple[str, str, str]


def stream_errors(streams: pd.DataFrame, horizon_months: int, close_out: str, file: str) -> list[LocatedError]:
    """What can be said without the scenarios: months in range, one segment a block, reserves at month 0.

    close_out  "statutory_reserve" or "surrender_value", as the study states for liabilities
    """
    month, flow = streams["month"].to_numpy(), streams["item"].isin(FLOW_ITEMS).to_numpy()
    at = partial(row_errors, streams, file=file, code="E447", column="month")
    errors = at(
        month > horizon_months,
        problem=f"the month of {{item}} in block {{block}} is after the horizon of {horizon_months} months",
        remedy="remove the row, or lengthen horizon.months",
    )
    errors += at(
        flow & (month == 0),
        problem="{item} in block {block} is a flow, and flows start in month 1",
        remedy="remove the row: month 0 is the valuation date itself",
    )
    return (
        errors
        + _segment_errors(streams, file)
        + _item_errors(streams, close_out, file)
        + _reserve_errors(streams, file)
    )


def reserves_at_start(streams: pd.DataFrame) -> pd.Series:
    """The statutory reserve at month 0 by segment: one amount for each block, whatever its scenarios. [currency]"""
    start = streams[(streams["item"] == RESERVE) & (streams["month"] == 0)]
    blocks = start.drop_duplicates(["segment", "block"])
    return blocks.groupby("segment", sort=True)["amount"].sum()


def _segment_errors(streams: pd.DataFrame, file: str) -> list[LocatedError]:
    pairs = streams.drop_duplicates(["block", "segment"])
    return row_errors(
        pairs,
        pairs.duplicated("block"),
        code="E444",
        file=file,
        column="segment",
        problem="block {block} stands in another segment too",
        remedy="give each block to one segment; split the block when it serves two",
    )


def _item_errors(streams: pd.DataFrame, close_out: str, file: str) -> list[LocatedError]:
    needed = {RESERVE: "every block needs its statutory reserve"}
    if close_out == "surrender_value":
        needed["surrender_value"] = "the study closes liabilities out at surrender value"
    errors = []
    blocks = sorted(streams["block"].unique())
    for item, why in needed.items():
        having = set(streams["block"][streams["item"] == item])
        lacking = [block for block in blocks if block not in having]
        errors += first_errors(lacking, partial(_item_error, file, item, why))
    return errors


def _item_error(file: str, item: str, why: str, block: str) -> LocatedError:
    return LocatedError(
        code="E446",
        file=file,
        column="item",
        problem=f"block {block} has no rows of {item}",
        remedy=f"add them for every scenario and month: {why}",
    )


def _reserve_errors(streams: pd.DataFrame, file: str) -> list[LocatedError]:
    start = streams[(streams["item"] == RESERVE) & (streams["month"] == 0)].copy()
    start["first"] = start.groupby("block")["amount"].transform("first")
    return row_errors(
        start,
        (start["amount"] - start["first"]).abs() > SAME_TO,
        code="E445",
        file=file,
        column="amount",
        problem="the reserve of block {block} at month 0 in scenario {scenario} is not the {first} of another",
        remedy="give month 0 the same reserve in every scenario: it is the ledger's amount at the valuation date",
    )


def check_stream_scenarios(
    streams: pd.DataFrame,
    insensitive: tuple[str, ...],
    scenario_ids: tuple[str, ...],
    horizon_months: int,
    file: str,
) -> list[LocatedError]:
    """The streams against the run: each block has every scenario, every item and every month once.

    streams       checked table: segment, block, scenario, month, item, amount, row
    insensitive   blocks whose one stream, scenario "all", serves every path
    scenario_ids  scenarios of the run
    """
    errors = _declaration_errors(streams, insensitive, file)
    by_scenario = streams[(streams["scenario"] != ALL) & ~streams["block"].isin(insensitive)]
    errors += _foreign_errors(by_scenario, scenario_ids, file)
    errors += _lacking_errors(by_scenario, scenario_ids, file)
    known = streams[streams["scenario"].isin((*scenario_ids, ALL))]
    return errors + _month_errors(known, horizon_months, file)


def _declaration_errors(streams: pd.DataFrame, insensitive: Sequence[str], file: str) -> list[LocatedError]:
    """Blocks named insensitive have scenario `all` and nothing else; no other block has it."""
    blocks, key = streams["block"].unique().tolist(), "liabilities.rate_insensitive_blocks"
    there = set(blocks)
    unknown = [block for block in insensitive if block not in there]
    errors = first_errors(unknown, partial(_undeclared, key, blocks))
    pairs = streams.drop_duplicates(["block", "scenario"])
    declared, whole = pairs["block"].isin(insensitive), pairs["scenario"] == ALL
    at = partial(row_errors, pairs, file=file, code="E448", column="scenario")
    return [
        *errors,
        *at(
            declared & ~whole,
            problem="block {block} is declared insensitive to rates but has a stream of its own for a scenario",
            remedy=f"write {ALL} and keep one stream, or take the block out of {key}",
        ),
        *at(
            ~declared & whole,
            problem="block {block} has one stream for all scenarios but is not declared insensitive to rates",
            remedy=f"name the block in {key}, or give it a stream for each scenario",
        ),
    ]


def _undeclared(key: str, blocks: list[str], block: str) -> LocatedError:
    return LocatedError(
        code="E448",
        file=STUDY_FILE,
        column=key,
        value=block,
        problem="this block has no rows in the liability streams",
        remedy=_meant(block, blocks, "remove the name"),
    )


def _meant(name: str, names: Iterable[str], otherwise: str) -> str:
    close = nearest(name, names)
    return f"did you mean {close}?" if close else otherwise


def _foreign_errors(streams: pd.DataFrame, scenario_ids: tuple[str, ...], file: str) -> list[LocatedError]:
    pairs = streams.drop_duplicates(["block", "scenario"])
    return row_errors(
        pairs,
        ~pairs["scenario"].isin(scenario_ids),
        code="E443",
        file=file,
        column="scenario",
        problem="block {block} has a stream for a scenario that is not in this run: it may belong to another set",
        remedy=f"make the streams again for the scenarios of this run: {listed(scenario_ids)}",
    )


def _lacking_errors(streams: pd.DataFrame, scenario_ids: tuple[str, ...], file: str) -> list[LocatedError]:
    have = streams.drop_duplicates(["block", "scenario"])
    have = have[have["scenario"].isin(scenario_ids)]
    counts = (
        have.groupby("block", sort=True)["scenario"].count().reindex(sorted(streams["block"].unique()), fill_value=0)
    )
    lacking = counts.index[counts < len(set(scenario_ids))].tolist()

    def told(block: str) -> LocatedError:
        there = set(have["scenario"][have["block"] == block])
        return LocatedError(
            code="E442",
            file=file,
            column="scenario",
            problem=f"block {block} has no stream for {listed(each for each in scenario_ids if each not in there)}",
            remedy="add a stream for every scenario of the run, or declare the block insensitive to rates",
        )

    return first_errors(lacking, told)


def _month_errors(streams: pd.DataFrame, horizon_months: int, file: str) -> list[LocatedError]:
    """Each item that a block has at all stands in each of its scenarios for every month once."""
    month = streams["month"].to_numpy()
    state = streams["item"].isin(STATE_ITEMS).to_numpy()
    within = (month <= horizon_months) & (state | (month >= 1))
    rows = streams[within]
    groups = rows.groupby(["block", "scenario", "item"], sort=True)["month"]
    sizes = dict(zip(groups.groups, zip(groups.nunique().tolist(), groups.size().tolist())))
    expected = [(place, *sizes.get(place, (0, 0))) for place in _expected(rows)]
    short = [place for place, distinct, _ in expected if distinct != horizon_months + 1 - _first_month(place)]
    doubled = [place for place, distinct, count in expected if count > distinct]

    def missing(place: Place) -> LocatedError:
        months = sorted(set(range(_first_month(place), horizon_months + 1)) - set(_months(rows, place).tolist()))
        return _month_error("E440", file, place, months, "missing", "add one row for each")

    def twice(place: Place) -> LocatedError:
        months, counts = np.unique(_months(rows, place), return_counts=True)
        again = months[counts > 1].tolist()
        return _month_error("E441", file, place, again, "there more than once", "keep one row for each")

    return first_errors(short, missing) + first_errors(doubled, twice)


def _first_month(place: Place) -> int:
    return 0 if place[2] in STATE_ITEMS else 1


def _expected(rows: pd.DataFrame) -> list[Place]:
    scenarios = rows.drop_duplicates(["block", "scenario"]).groupby("block", sort=True)["scenario"].agg(sorted)
    items = rows.drop_duplicates(["block", "item"]).groupby("block", sort=True)["item"].agg(sorted)
    return [
        (str(block), scenario, item)
        for block in scenarios.index
        for scenario in scenarios[block]
        for item in items[block]
    ]


def _months(rows: pd.DataFrame, place: Place) -> NDArray[Any]:
    """The months of one block, scenario and item; asked only for faults that are shown."""
    mask = np.logical_and.reduce([(rows[name] == value).to_numpy() for name, value in zip(_PLACE, place)])
    return rows["month"].to_numpy()[mask]


def _month_error(code: str, file: str, place: Place, months: list[int], what: str, remedy: str) -> LocatedError:
    which = f"month {months[0]} is" if len(months) == 1 else f"months {spans(months)} are"
    where = ", ".join(f"{name} {value}" for name, value in zip(_PLACE, place))
    return LocatedError(
        code=code,
        file=file,
        column="month",
        problem=f"{where}: {which} {what}",
        remedy=f"{remedy}, 0 where nothing flows",
    )


def spans(months: list[int], at_most: int = 6) -> str:
    """Months as they are spoken of: 3, 7 to 9 and so on."""
    breaks = [at for at in range(1, len(months)) if months[at] != months[at - 1] + 1]
    runs = [months[start:end] for start, end in zip([0, *breaks], [*breaks, len(months)])]
    words = [str(run[0]) if len(run) == 1 else f"{run[0]} to {run[-1]}" for run in runs]
    return listed(words, at_most)
