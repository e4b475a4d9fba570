"""One month of the balance sheet of every segment on every path, in the order of events of C2.

The step is handed everything it needs; path is the last axis and no path's numbers depend on another's. Nothing here
adds over paths.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from projector.balance import holdings_kernels as item
from projector.balance import purchases
from projector.balance.holdings_kernels import group_sums
from projector.balance.market_values import GroupValues
from projector.balance.purchases import Cohorts, Mix
from projector.liabilities.blocks import Market
from projector.study.records import Borrowing

Array = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

# flow categories beside those of the liabilities (C12); the first column says whose they are
ASSET_CATEGORIES = (
    "coupon", "principal", "call_par", "call_premium", "put", "recovery", "sale",
)  # fmt: skip
BOUGHT_CATEGORIES = ("coupon", "principal", "recovery", "sale", "purchase")
SEGMENT_CATEGORIES = (
    "investment_expense", "cash_interest", "borrowed", "repaid", "borrowing_interest", "shortfall_drawn",
    "shortfall_repaid", "shortfall_interest",
)  # fmt: skip


@dataclass(frozen=True)
class Strategy:
    """What the step needs from the study: mix, borrowing, investment expense [1/month], recovery lag [month]."""

    mix: Mix
    borrowing_spread: float  # [1/month], simple
    borrowing_limit: float  # share of statement assets
    expense: float  # [1/month] on opening statement value of bonds
    recovery_lag: int

    @staticmethod
    def from_study(mix: Mix, borrowing: Borrowing, annual_expense: float, lag: int) -> Strategy:
        return Strategy(
            mix,
            borrowing.spread_bp * 1e-4 / 12.0,
            borrowing.limit_share_of_statement_assets,
            annual_expense / 12.0,
            lag,
        )


@dataclass
class State:
    """Balances at a month end. [currency], shape (segment, path) unless said; owned and changed by the step."""

    cash: Array
    borrowing: Array
    shortfall: Array
    held: Array  # [group, path] share of the starting holdings not sold
    cohorts: Cohorts
    due_start: Array  # [month, segment, path] recoveries due, from starting holdings
    due_bought: Array  # the same from purchases
    receivable: Array  # recoveries not yet received
    statement_start: Array
    accrued_start: Array
    accrued_bought: Array

    @property
    def statement_bought(self) -> Array:
        """Purchases are bought at par and carried at par: their effective yield is their coupon."""
        return purchases.class_total(self.cohorts.par)


@dataclass(frozen=True)
class MonthRecord:
    """What happened in a month. [currency], shape (segment, path)

    flows    by (holding, category), positive into the company, liabilities not included
    income   pieces of statement income that are not cash
    """

    flows: dict[tuple[str, str], Array]
    par: dict[str, Array]
    book: dict[str, Array]
    interest_earned: Array
    default_cost: Array


def segment_sum(values: Array, held: Array, segment: IntArray, segments: int) -> Array:
    """Sum of group values x held share by segment, in group order. [group, path] -> [segment, path]"""
    out = np.empty((segments, values.shape[1]))
    group_sums(np.ascontiguousarray(values), held, segment, out)
    return out


def sale_share(need: Array, value: Array) -> Array:
    """Share of everything to sell to meet a need: need / value, all of it when that is not enough. [-]"""
    ratio = need / np.where(value > 0.0, value, 1.0)
    return np.where((need > 0.0) & (value > 0.0), np.minimum(ratio, 1.0), 0.0)


def opening_state(cash: Array, items: Array, segment: IntArray, mix: Mix, months: int, lag: int) -> State:
    """Balances at the valuation date: the ledger's cash and statement values, nothing bought, nothing owed."""
    segments, paths = cash.size, items.shape[3]
    held = np.ones((items.shape[2], paths))
    zero = np.zeros((segments, paths))
    return State(
        cash=np.repeat(cash[:, None], paths, axis=1),
        borrowing=zero.copy(),
        shortfall=zero.copy(),
        held=held,
        cohorts=Cohorts.none(mix, months, segments, paths),
        due_start=np.zeros((months + lag + 1, segments, paths)),
        due_bought=np.zeros((months + lag + 1, segments, paths)),
        receivable=zero.copy(),
        statement_start=segment_sum(items[item.BOOK, 0], held, segment, segments),
        accrued_start=segment_sum(items[item.ACCRUED, 0], held, segment, segments),
        accrued_bought=zero.copy(),
    )


def month_step(
    state: State, m: int, items: Array, segment: IntArray, strategy: Strategy, market: Market, next_discount: Array,
    liability: Array, values: GroupValues,
) -> MonthRecord:  # fmt: skip
    """Runs month m; changes `state` in place and returns what happened.

    items          [item, group, path] of month m at a held share of one
    market         short rate over the month; next_discount is P(tau) of month m itself
    liability      net liability flow into the company, all blocks of the segment [segment, path]
    """
    segments = state.cash.shape[0]

    def of(which: int) -> Array:
        return segment_sum(items[which], state.held, segment, segments)

    opening_book = state.statement_start + state.statement_bought
    opening_accrued = state.accrued_start + state.accrued_bought
    cash_interest = state.cash * market.short_rate
    start = {name: of(which) for name, which in START_ITEMS.items()}
    bought = purchases.month_flows(state.cohorts, strategy.mix, m)
    state.due_start[m + strategy.recovery_lag] += start["recoverable"]
    state.due_bought[m + strategy.recovery_lag] += bought.recoverable
    recovered_start, recovered_bought = state.due_start[m], state.due_bought[m]
    state.receivable = state.receivable + start["recoverable"] + bought.recoverable - recovered_start - recovered_bought
    expense = opening_book * strategy.expense
    rate = market.short_rate + strategy.borrowing_spread
    borrowing_interest, shortfall_interest = state.borrowing * rate, state.shortfall * rate
    cash = (
        state.cash + cash_interest + start["coupon"] + start["principal"] + start["call_par"] + start["call_premium"]
        + start["put"] + recovered_start + bought.coupon + bought.principal + recovered_bought + liability - expense
        - borrowing_interest - shortfall_interest
    )  # fmt: skip
    repaid = np.minimum(np.maximum(cash, 0.0), state.borrowing)
    cash = cash - repaid
    shortfall_repaid = np.minimum(np.maximum(cash, 0.0), state.shortfall)
    cash = cash - shortfall_repaid
    state.borrowing = state.borrowing - repaid
    state.shortfall = state.shortfall - shortfall_repaid
    spent = purchases.buy(state.cohorts, strategy.mix, m, cash, next_discount)
    if strategy.mix.invested == 1.0:  # all of it is spent: what subtraction leaves is rounding
        cash = np.minimum(cash, 0.0)
    else:
        cash = cash - spent
    book_now, accrued_now, par_start = of(item.BOOK), of(item.ACCRUED), of(item.PAR)
    par_bought = state.statement_bought
    room = np.maximum(strategy.borrowing_limit * (book_now + par_bought) - state.borrowing, 0.0)
    borrowed = np.minimum(np.maximum(-cash, 0.0), room)
    state.borrowing = state.borrowing + borrowed
    cash = cash + borrowed
    need = np.maximum(-cash, 0.0)
    accrued_bought = purchases.accrued(state.cohorts, m)
    sale = sell(state, m, need, segment, strategy.mix, next_discount, values)
    cash = cash + sale.start + sale.bought
    # a sale of less than everything meets the need; what is left of it is rounding, not a shortfall
    cash = np.where((need > 0.0) & (sale.share > 0.0) & (sale.share < 1.0), 0.0, cash)
    drawn = np.maximum(-cash, 0.0)
    cash = cash + drawn
    state.shortfall = state.shortfall + drawn
    state.cash = cash
    sold_book_start, sold_book_bought = book_now * sale.share, par_bought * sale.share
    sold_accrued = (accrued_now + accrued_bought) * sale.share
    state.statement_start, state.accrued_start = of(item.BOOK), of(item.ACCRUED)
    state.accrued_bought = purchases.accrued(state.cohorts, m)
    interest = (
        start["coupon"] + bought.coupon + state.accrued_start + state.accrued_bought - opening_accrued + sold_accrued
        + start["default_accrued"] + bought.default_accrued
    )  # fmt: skip
    default_cost = (
        start["default_book"] + start["default_accrued"] + bought.default_par + bought.default_accrued
        - start["recoverable"] - bought.recoverable
    )  # fmt: skip
    return MonthRecord(
        flows={
            ("start", "coupon"): start["coupon"],
            ("start", "principal"): start["principal"],
            ("start", "call_par"): start["call_par"],
            ("start", "call_premium"): start["call_premium"],
            ("start", "put"): start["put"],
            ("start", "recovery"): recovered_start,
            ("start", "sale"): sale.start,
            ("bought", "coupon"): bought.coupon,
            ("bought", "principal"): bought.principal,
            ("bought", "recovery"): recovered_bought,
            ("bought", "sale"): sale.bought,
            ("bought", "purchase"): -spent,
            ("segment", "investment_expense"): -expense,
            ("segment", "cash_interest"): cash_interest,
            ("segment", "borrowed"): borrowed,
            ("segment", "repaid"): -repaid,
            ("segment", "borrowing_interest"): -borrowing_interest,
            ("segment", "shortfall_drawn"): drawn,
            ("segment", "shortfall_repaid"): -shortfall_repaid,
            ("segment", "shortfall_interest"): -shortfall_interest,
        },
        par={
            "scheduled": start["principal"] + bought.principal,
            "called": start["call_par"],
            "put": start["put_par"],
            "defaulted": start["default_par"] + bought.default_par,
            "bought": spent,
            "sold": (par_start + par_bought) * sale.share,
            "close": of(item.PAR) + state.statement_bought,
        },
        book={
            "accretion": start["accretion"],
            "principal": start["principal_book"] + bought.principal,
            "called": start["called_book"],
            "put": start["put_book"],
            "defaulted": start["default_book"] + bought.default_par,
            "sold": sold_book_start + sold_book_bought,
            "sold_accrued": sold_accrued,
            "recoverable": start["recoverable"] + bought.recoverable,
        },
        interest_earned=interest,
        default_cost=default_cost,
    )


START_ITEMS = {
    "coupon": item.COUPON,
    "principal": item.PRINCIPAL,
    "call_par": item.CALL_PAR,
    "call_premium": item.CALL_PREMIUM,
    "called_book": item.CALLED_BOOK,
    "put": item.PUT_CASH,
    "put_par": item.PUT_PAR,
    "put_book": item.PUT_BOOK,
    "default_par": item.DEFAULT_PAR,
    "default_book": item.DEFAULT_BOOK,
    "default_accrued": item.DEFAULT_ACCRUED,
    "recoverable": item.RECOVERABLE,
    "accretion": item.ACCRETION,
    "principal_book": item.PRINCIPAL_BOOK,
}


@dataclass(frozen=True)
class Sale:
    """Share sold of everything in the segment, and proceeds by origin. shape (segment, path)"""

    share: Array
    start: Array
    bought: Array


def sell(state: State, m: int, need: Array, segment: IntArray, mix: Mix, discount: Array, values: GroupValues) -> Sale:
    """Sells one share of every unit of the segment at exact market value; paths without need keep their bits."""
    zero = np.zeros(need.shape)
    wanted = need > 0.0
    if not wanted.any():  # only skips work: every write below is masked by the path's own need
        return Sale(zero, zero, zero)
    group = values.at(m, discount, wanted)
    start = np.where(wanted, segment_sum(group, state.held, segment, need.shape[0]), 0.0)
    bought = purchases.values(state.cohorts, mix, m, discount, wanted)
    share = sale_share(need, start + bought)
    state.held = state.held * (1.0 - share)[segment]
    purchases.sell_share(state.cohorts, share)
    return Sale(share, start * share, bought * share)
