"""One pure function serves run, explain, threads and cluster: a block of paths in, arrays by path index out (C13).

Decisions are one pass over the months, the roll-forward another; each rebuilds the month's discounts and keeps none
(C3). Nothing here reduces over paths.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt
import pandas as pd

from projector.balance import holdings_kernels as item
from projector.balance import purchases
from projector.balance.holdings import group_items
from projector.balance.market_values import GroupValues
from projector.balance.month import (
    ASSET_CATEGORIES,
    BOUGHT_CATEGORIES,
    SEGMENT_CATEGORIES,
    MonthRecord,
    State,
    month_step,
    opening_state,
    segment_sum,
)
from projector.bonds.decisions import CallEvents
from projector.bonds.store import SolveStore
from projector.liabilities.blocks import ITEM_NAMES, Market, MonthOutcome, signed
from projector.rates.curve import log_discount_nodes, monthly_discounts
from projector.run.deciding import decide
from projector.run.earned import EarnedRate
from projector.run.prepare import Prepared

Array = npt.NDArray[np.float64]

BALANCES = (
    "cash", "statement_start", "statement_bought", "accrued", "recoveries", "borrowing", "shortfall", "reserve",
    "surrender", "earned_rate", "interest_earned", "default_cost",
)  # fmt: skip
PAR_ITEMS = ("scheduled", "called", "put", "defaulted", "bought", "sold", "close")
BOOK_ITEMS = (
    "accretion", "principal", "called", "put", "defaulted", "sold", "sold_accrued", "recoverable",
)  # fmt: skip


@dataclass
class BlockResult:
    """A block of paths in full: arrays [month, segment, path] unless said. [currency]"""

    path_lo: int
    path_hi: int
    flows: dict[tuple[str, str], Array]
    balances: dict[str, Array]
    par: dict[str, Array]
    book: dict[str, Array]
    short_rate: Array  # [month, path] over the month
    net_yield: Array  # [month, path] net yield of the purchase mix
    runoff: Array  # asset flows of the starting holdings alone, nothing sold
    runoff_par: Array  # their par
    runoff_statement: Array  # at the horizon [segment, path], incl. accrued and recoveries due
    runoff_market: Array
    market_start: dict[int, Array]  # year-end month -> value of starting holdings left, incl. accrued [segment, path]
    market_bought: dict[int, Array]
    group_book: dict[int, Array]  # month -> [group, path] statement value left
    class_book: dict[int, Array]  # month -> [class, segment, path] purchases
    events: CallEvents
    held: Array  # [month, group, path] share not sold, before the month's own sale
    decisions: pd.DataFrame | None


def project(
    prepared: Prepared, path_lo: int, path_hi: int, record: str = "detail", store: SolveStore | None = None
) -> BlockResult:
    """Projects the paths path_lo..path_hi-1.

    record  "detail" keeps rows of decisions; "summary" does not (the arrays are the same)
    store   decisions and values of earlier runs, used and added to (the arrays are the same with and without)
    """
    discounts = discounts_of(prepared, path_lo, path_hi)
    events, frame, places = decide(prepared, path_lo, path_hi, record, discounts, store)
    items = group_items(prepared.holdings, prepared.bonds, prepared.terms, prepared.survival, events, prepared.months)
    values = GroupValues(prepared.holdings, prepared.solver, prepared.survival, events, store, places)
    result = roll_forward(prepared, path_lo, path_hi, items, values, discounts, events)
    if frame is not None:
        result.decisions = frame.assign(path=frame["path"].astype(np.int64) + path_lo)
    return result


def discounts_of(prepared: Prepared, path_lo: int, path_hi: int) -> Callable[[int], Array]:
    """The month's P(tau), rebuilt whenever asked."""
    nodes = log_discount_nodes(prepared.paths.part(path_lo, path_hi), prepared.paths.reading)
    longest = int(prepared.strategy.mix.term.max(initial=12))

    def at(month: int) -> Array:
        return monthly_discounts(nodes[month], max(prepared.bonds.last_month - month, longest))

    return at


def roll_forward(
    prepared: Prepared, path_lo: int, path_hi: int, items: Array, values: GroupValues,
    discounts: Callable[[int], Array], events: CallEvents,
) -> BlockResult:  # fmt: skip
    """Month after month for every segment: the loop is the table of contents of C2."""
    segment = prepared.holdings.groups.segment
    cash = np.array([s.cash for s in prepared.study.segments])
    state = opening_state(cash, items, segment, prepared.strategy.mix, prepared.months, prepared.strategy.recovery_lag)
    result = empty_result(prepared, path_lo, path_hi, items, events)
    opened = [(block, *block.open(path_lo, path_hi)) for block in prepared.blocks]
    liability_states: list[Any] = [s for _, s, _ in opened]
    keep_liabilities(prepared, result, 0, [o for _, _, o in opened])
    earned = EarnedRate.at_start(prepared, state)
    discount = discounts(0)
    keep_month(prepared, result, 0, state, None, earned.rate())
    keep_year_end(prepared, result, 0, state, items, values, discount)
    for m in range(1, prepared.months + 1):
        market = Market(m, discounts(m), 1.0 / discount[1] - 1.0)
        liability_states, outcomes = liability_month(prepared, liability_states, m, market, earned.rate())
        keep_liabilities(prepared, result, m, outcomes)
        result.held[m] = state.held
        happened = month_step(
            state, m, np.ascontiguousarray(items[:, m]), segment, prepared.strategy, market, market.discount,
            net_liability(prepared, result, m), values,
        )  # fmt: skip
        earned.month(state, happened)
        result.short_rate[m] = market.short_rate
        result.net_yield[m] = prepared.strategy.mix.net_yield(market.discount)
        keep_month(prepared, result, m, state, happened, earned.rate())
        discount = market.discount
        if m % 12 == 0:
            keep_year_end(prepared, result, m, state, items, values, discount)
    close_run_off(prepared, result, items, values, discount)
    return result


def liability_month(
    prepared: Prepared, states: list[Any], m: int, market: Market, earned: Array
) -> tuple[list[Any], list[MonthOutcome]]:
    """Month m of every block; each sees its own segment's earned rate of m - 1."""
    after, outcomes = [], []
    for block, state in zip(prepared.blocks, states):
        lagged = earned[prepared.segment_names.index(block.segment)]
        new_state, outcome = block.month(state, m, market, lagged)
        after.append(new_state)
        outcomes.append(outcome)
    return after, outcomes


def keep_liabilities(prepared: Prepared, result: BlockResult, m: int, outcomes: list[MonthOutcome]) -> None:
    """Adds the blocks' flows and balances to their segments."""
    for block, outcome in zip(prepared.blocks, outcomes):
        s = prepared.segment_names.index(block.segment)
        result.balances["reserve"][m, s] += outcome.reserve_statutory
        if outcome.surrender_value is not None:
            result.balances["surrender"][m, s] += outcome.surrender_value
        if m > 0:
            flows = signed(outcome.flows)
            for i, name in enumerate(ITEM_NAMES):
                result.flows[("segment", name)][m, s] += flows[i]


def net_liability(prepared: Prepared, result: BlockResult, m: int) -> Array:
    """Net liability flow into the company. [currency], (segment, path)"""
    total = np.zeros_like(result.flows[("segment", ITEM_NAMES[0])][m])
    for name in ITEM_NAMES:
        total = total + result.flows[("segment", name)][m]
    return total


def empty_result(prepared: Prepared, path_lo: int, path_hi: int, items: Array, events: CallEvents) -> BlockResult:
    """Room for every month."""
    segments, paths = len(prepared.study.segments), path_hi - path_lo
    shape = (prepared.months + 1, segments, paths)
    keys = (
        [("start", c) for c in ASSET_CATEGORIES]
        + [("bought", c) for c in BOUGHT_CATEGORIES]
        + [("segment", c) for c in (*ITEM_NAMES, *SEGMENT_CATEGORIES)]
    )
    return BlockResult(
        path_lo=path_lo,
        path_hi=path_hi,
        flows={key: np.zeros(shape) for key in keys},
        balances={name: np.zeros(shape) for name in BALANCES},
        par={name: np.zeros(shape) for name in PAR_ITEMS},
        book={name: np.zeros(shape) for name in BOOK_ITEMS},
        short_rate=np.zeros((prepared.months + 1, paths)),
        net_yield=np.zeros((prepared.months + 1, paths)),
        runoff=np.zeros(shape),
        runoff_par=np.zeros(shape),
        runoff_statement=np.zeros(shape[1:]),
        runoff_market=np.zeros(shape[1:]),
        market_start={},
        market_bought={},
        group_book={},
        class_book={},
        events=events,
        held=np.ones((prepared.months + 1, items.shape[2], paths)),
        decisions=None,
    )


def keep_month(
    prepared: Prepared, result: BlockResult, m: int, state: State, happened: MonthRecord | None, earned: Array
) -> None:
    """Balances, flows and pieces of income of one month."""
    b = result.balances
    b["cash"][m], b["borrowing"][m], b["shortfall"][m] = state.cash, state.borrowing, state.shortfall
    b["statement_start"][m], b["statement_bought"][m] = state.statement_start, state.statement_bought
    b["accrued"][m] = state.accrued_start + state.accrued_bought
    b["recoveries"][m] = state.receivable
    b["earned_rate"][m] = earned
    if happened is None:
        result.par["close"][m] = opening_par(prepared, result)
        return
    b["interest_earned"][m], b["default_cost"][m] = happened.interest_earned, happened.default_cost
    for key, amount in happened.flows.items():
        result.flows[key][m] = amount
    for name, amount in happened.par.items():
        result.par[name][m] = amount
    for name, amount in happened.book.items():
        result.book[name][m] = amount


def opening_par(prepared: Prepared, result: BlockResult) -> Array:
    """Par at the valuation date by segment, from the lots themselves. [currency], (segment, path)"""
    out = np.zeros((len(prepared.study.segments), result.path_hi - result.path_lo))
    for n in range(prepared.lots.par.size):
        out[prepared.lots.segment[n]] += prepared.lots.par[n]
    return out


def keep_year_end(
    prepared: Prepared, result: BlockResult, m: int, state: State, items: Array, values: GroupValues, discount: Array
) -> None:
    """Market values and what is held, at month 0 and each year end."""
    segment = prepared.holdings.groups.segment
    everywhere = np.ones(state.cash.shape, dtype=np.bool_)
    group = values.at(m, discount, everywhere)
    result.market_start[m] = segment_sum(group, state.held, segment, len(prepared.study.segments))
    result.market_bought[m] = purchases.values(state.cohorts, prepared.strategy.mix, m, discount, everywhere)
    result.group_book[m] = items[item.BOOK, m] * state.held
    result.class_book[m] = state.cohorts.par.copy()


def close_run_off(prepared: Prepared, result: BlockResult, items: Array, values: GroupValues, discount: Array) -> None:
    """Flows of the starting holdings as if nothing were ever sold, and what they leave at the horizon."""
    segment = prepared.holdings.groups.segment
    segments, lag, last = len(prepared.study.segments), prepared.strategy.recovery_lag, prepared.months
    one = np.ones(items.shape[2:])
    due = np.zeros((last + lag + 1, *result.runoff.shape[1:]))
    for m in range(1, last + 1):
        total = np.zeros(result.runoff.shape[1:])
        for which in (item.COUPON, item.PRINCIPAL, item.CALL_PAR, item.CALL_PREMIUM, item.PUT_CASH):
            total = total + segment_sum(items[which, m], one, segment, segments)
        due[m + lag] += segment_sum(items[item.RECOVERABLE, m], one, segment, segments)
        opening = segment_sum(items[item.BOOK, m - 1], one, segment, segments)
        result.runoff[m] = total + due[m] - opening * prepared.strategy.expense
    for m in range(last + 1):
        result.runoff_par[m] = segment_sum(items[item.PAR, m], one, segment, segments)
    left = np.zeros(result.runoff.shape[1:])
    for m in range(last + 1, last + lag + 1):
        left = left + due[m]
    statement = segment_sum(items[item.BOOK, last], one, segment, segments)
    accrued = segment_sum(items[item.ACCRUED, last], one, segment, segments)
    result.runoff_statement = statement + accrued + left
    group = values.at(last, discount, np.ones(left.shape, dtype=np.bool_))
    result.runoff_market = segment_sum(group, one, segment, segments) + left
