"""Measures per scenario and segment from a block's arrays (definitions: DEVELOPERS.md, Money)."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
import pandas as pd

from projector.liabilities.blocks import ITEM_NAMES
from projector.measures.criterion import criterion_values, scenarios_met
from projector.measures.surplus import (
    earned_rate_discount,
    lowest,
    market_surplus,
    one_month_discount,
    present_value,
    statement_surplus,
    years_negative,
)
from projector.measures.value import annual_effective, internal_rates
from projector.run.block import BlockResult
from projector.run.prepare import Prepared
from projector.run.results import ALL_SEGMENTS, COLUMNS
from projector.study.clock import year_ends

Array = npt.NDArray[np.float64]


@dataclass(frozen=True)
class SurplusTables:
    """Surplus of a block. [currency]; statement [month, segment, path], market [year end, segment, path]"""

    months: list[int]  # 0, 12, 24, ...
    statement: Array
    market: Array
    market_assets: Array  # bonds incl. accrued [year end, segment, path]


def surplus_tables(prepared: Prepared, r: BlockResult) -> SurplusTables:
    """Statement surplus monthly and market surplus at month 0 and the year ends."""
    months = [0, *year_ends(prepared.months)]
    by_reserve = prepared.study.horizon.liability_close_out == "statutory_reserve"
    liability = r.balances["reserve" if by_reserve else "surrender"]
    assets = np.stack([r.market_start[m] + r.market_bought[m] for m in months])
    market = np.stack([market_surplus(assets[i], r.balances, liability[m], m) for i, m in enumerate(months)])
    return SurplusTables(months, statement_surplus(r.balances), market, assets)


def rate_of(flows: Array) -> tuple[float, str]:
    """Annual effective rate of a monthly stream and its status; nan unless there is one root."""
    found = internal_rates(flows)
    status = str(found.status)
    return (annual_effective(found.rates[0]) if status == "one" else np.nan), status


def net_liability_flows(r: BlockResult) -> Array:
    """Liability flows into the company. [currency], [month, segment, path]"""
    total = np.zeros_like(r.runoff)
    for name in ITEM_NAMES:
        total = total + r.flows[("segment", name)]
    return total


def measure_rows(prepared: Prepared, r: BlockResult, tables: SurplusTables) -> list[dict[str, object]]:
    """Rows of the measures table for every path of a block: each segment, then all together."""
    rows = []
    pieces = value_pieces(prepared, r)
    earned = r.balances["earned_rate"][tables.months[1:]]
    pv_segments = tables.statement[-1] * earned_rate_discount(earned)
    d_treasury = one_month_discount(r.short_rate, 0.0)[-1]
    names = [*prepared.segment_names, ALL_SEGMENTS]
    for p in range(r.path_hi - r.path_lo):
        for s, name in enumerate(names):
            pick = slice(s, s + 1) if name != ALL_SEGMENTS else slice(None)
            statement = in_order(tables.statement[:, pick, p])
            market = in_order(tables.market[:, pick, p])
            row: dict[str, object] = {"scenario": prepared.paths.ids[r.path_lo + p], "segment": name}
            row |= surplus_measures(prepared, statement, market, tables.months)
            row["pv_ending_earned_rate"] = float(in_order(pv_segments[None, pick, p])[0])
            row["pv_ending_one_month_treasury"] = float(statement[-1] * d_treasury[p])
            row |= value_measures(prepared, pieces, pick, p)
            row |= segment_measures(r, pick, p)
            rows.append(row)
    return rows


def in_order(values: Array) -> Array:
    """Sum over the segment axis (the second), in segment order."""
    total = np.zeros(values.shape[0])
    for s in range(values.shape[1]):
        total = total + values[:, s]
    return total


def surplus_measures(prepared: Prepared, statement: Array, market: Array, months: list[int]) -> dict[str, object]:
    """Ends, lows, years below zero and the criterion. statement [month], market [year end]"""
    at_years, market_years = statement[months[1:]], market[1:]  # month 0 is what the ledger says
    low, where = lowest(at_years)
    market_low, market_where = lowest(market_years)
    criterion = prepared.study.criterion
    value = criterion_values(criterion, at_years[:, None], market_years[:, None])
    return {
        "ending_statement_surplus": float(statement[-1]),
        "ending_market_surplus": float(market[-1]),
        "lowest_statement_surplus": float(low),
        "lowest_statement_year": int(where) + 1,
        "lowest_market_surplus": float(market_low),
        "lowest_market_year": int(market_where) + 1,
        "years_negative": int(years_negative(at_years)),
        "criterion_value": float(value[0]),
        "criterion_met": bool(scenarios_met(criterion, value)[0]),
    }


def value_pieces(prepared: Prepared, r: BlockResult) -> dict[str, Array]:
    """Run-off flows, outgo, discounts and close-outs; [month, segment, path], [segment, path] or [month, path]."""
    study = prepared.study
    by_reserve = study.horizon.liability_close_out == "statutory_reserve"
    at_market = study.horizon.asset_close_out == "market_value"
    return {
        "runoff": r.runoff,
        "net": net_liability_flows(r),
        "discount": one_month_discount(r.short_rate, study.discounting.npv_constant_bp * 1e-4),
        "left_assets": r.runoff_market if at_market else r.runoff_statement,
        "left_liability": r.balances["reserve" if by_reserve else "surrender"][-1],
        "cash": r.balances["cash"][0],
        "market": r.market_start[0],
        "statement": r.balances["statement_start"][0] + r.balances["accrued"][0],
        "reserve": r.balances["reserve"][0],
        "end_assets": r.market_start[prepared.months] + r.market_bought[prepared.months] + r.balances["cash"][-1]
        + r.balances["recoveries"][-1] - r.balances["borrowing"][-1] - r.balances["shortfall"][-1],
    }  # fmt: skip


def value_measures(prepared: Prepared, pieces: dict[str, Array], pick: slice, p: int) -> dict[str, object]:
    """NPV gap, IRRs and their gap, horizon return, of one segment or all."""

    def one(name: str) -> float:
        return float(in_order(pieces[name][None, pick, p])[0])

    runoff, net = in_order(pieces["runoff"][:, pick, p]), in_order(pieces["net"][:, pick, p])
    discount = pieces["discount"][:, p]
    left_assets, left_liability = one("left_assets"), one("left_liability")
    pv_left, pv_owed = left_assets * float(discount[-1]), left_liability * float(discount[-1])
    pv_assets = float(present_value(runoff, discount)) + one("cash") + pv_left
    pv_outgo = -float(present_value(net, discount)) + pv_owed
    asset_flows, cost_flows = runoff.copy(), net.copy()
    asset_flows[-1] += left_assets
    cost_flows[-1] -= left_liability
    irr, irr_status = rate_of(with_outlay(asset_flows, -one("market")))
    irr_book, _ = rate_of(with_outlay(asset_flows, -one("statement")))
    cost, cost_status = rate_of(with_outlay(cost_flows, one("reserve")))
    whole = -net
    whole[-1] += one("end_assets")
    horizon, _ = rate_of(with_outlay(whole, -one("market") - one("cash")))
    return {
        "npv_gap": pv_assets - pv_outgo,
        "npv_close_out_assets": pv_left,
        "npv_close_out_liabilities": pv_owed,
        "irr_assets": irr,
        "irr_assets_status": irr_status,
        "irr_assets_on_statement_value": irr_book,
        "cost_rate": cost,
        "cost_rate_status": cost_status,
        "irr_gap": irr - cost,
        "horizon_return": horizon,
    }


def with_outlay(flows: Array, outlay: float) -> Array:
    """A monthly stream with its outlay at month 0."""
    out = flows.copy()
    out[0] = outlay
    return out


def segment_measures(r: BlockResult, pick: slice, p: int) -> dict[str, object]:
    """Borrowing, sales, shortfall and calls in total. [currency]"""

    def series(values: Array) -> Array:
        return in_order(values[:, pick, p])

    borrowing, shortfall = series(r.balances["borrowing"]), series(r.balances["shortfall"])
    gain = series(r.flows[("start", "sale")] + r.flows[("bought", "sale")] - r.book["sold"] - r.book["sold_accrued"])
    short = np.flatnonzero(shortfall > 0.0)
    return {
        "peak_borrowing": float(borrowing.max()),
        "months_with_borrowing": int((borrowing > 0.0).sum()),
        "par_sold": total(series(r.par["sold"])),
        "sale_gain": total(gain),
        "first_shortfall_month": int(short[0]) if short.size else -1,
        "largest_shortfall": float(shortfall.max()),
        "par_called": total(series(r.par["called"])),
        "call_premium": total(series(r.flows[("start", "call_premium")])),
    }


def total(series: Array) -> float:
    """Sum over months, exactly rounded once."""
    return math.fsum(series.tolist())


def measures_frame(prepared: Prepared, blocks: list[BlockResult], calls: pd.DataFrame) -> pd.DataFrame:
    """The measures table, scenario by scenario; yield given up and callable par from calls and lots."""
    rows = [row for r in blocks for row in measure_rows(prepared, r, surplus_tables(prepared, r))]
    frame = pd.DataFrame(rows)
    lots = prepared.lots
    par = {
        name: total(lots.par[lots.callable_rows][lots.segment[lots.callable_rows] == s])
        for s, name in enumerate(prepared.segment_names)
    }
    par[ALL_SEGMENTS] = total(lots.par[lots.callable_rows])
    frame["callable_par"] = frame["segment"].map(par)
    stated = prepared.stated_rights[lots.security]
    own = {name: total(lots.par[stated & (lots.segment == s)]) for s, name in enumerate(prepared.segment_names)}
    frame["stated_callable_par"] = frame["segment"].map(own | {ALL_SEGMENTS: total(lots.par[stated])})
    frame["stated_par_called"] = sums_of(calls[calls["right"] == "stated price"], "par_called", frame)
    frame["yield_given_up"] = sums_of(calls, "yield_given_up", frame)
    return frame[list(COLUMNS["measures"])]


def sums_of(calls: pd.DataFrame, column: str, rows: pd.DataFrame) -> list[float]:
    """Sum of a column of calls for each row's scenario and segment, exactly rounded once."""
    out = []
    for scenario, segment in zip(rows["scenario"], rows["segment"]):
        mine = calls["scenario"] == scenario
        mine = mine if segment == ALL_SEGMENTS else mine & (calls["segment"] == segment)
        out.append(total(calls.loc[mine, column].to_numpy()))
    return out
