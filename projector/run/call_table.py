"""Calls by scenario, security and segment: par, price, and the yield given up by lots (definitions of Money)."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
import pandas as pd

from projector.bonds.decisions import CALL, KINDS, PUT
from projector.run.block import BlockResult
from projector.run.prepare import Prepared
from projector.run.results import COLUMNS

Array = npt.NDArray[np.float64]


def bond_equivalent_of_growth(growth: Array) -> Array:
    """Monthly growth factor to a bond-equivalent yield, 2 (g^6 - 1), by multiplication. [1/year]"""
    half = growth * growth * growth
    return 2.0 * (half * half - 1.0)


def default_cost(prepared: Prepared) -> Array:
    """Yearly default cost of each security net of recovery, as it is taken off purchases. [1/year]"""
    kept = np.array([prepared.terms.survival[r] for r in prepared.bonds.ratings])
    recovered = np.array([prepared.terms.recovery[r] for r in prepared.bonds.ratings])
    year = np.ones(kept.size)
    for _ in range(12):
        year = year * kept
    return (1.0 - year) * (1.0 - recovered)


def call_rows(prepared: Prepared, block: BlockResult) -> pd.DataFrame:
    """One row per event and lot, then added up to security and segment."""
    events, lots = block.events, prepared.lots
    count = (events.start[:, 1:] - events.start[:, :-1]).ravel()
    paths = block.path_hi - block.path_lo
    cell = np.repeat(np.arange(count.size), count)
    unit, path = cell // paths, cell % paths
    lot_security = lots.security[lots.callable_rows]
    first = np.searchsorted(lot_security, unit, side="left")
    many = np.searchsorted(lot_security, unit, side="right") - first
    e = np.repeat(np.arange(unit.size), many)
    within = np.arange(e.size) - np.repeat(np.cumsum(many) - many, many)
    row = first[e] + within  # row among lots with rights
    lot = lots.callable_rows[row]
    month = events.month[e]
    group = group_of_lot(prepared)[lot]
    share = events.part[e] * prepared.bonds.outstanding[unit[e], month] * block.held[month, group, path[e]]
    par = lots.par[lot] * prepared.survival[unit[e], month] * share
    book_yield = bond_equivalent_of_growth(lots.growth_at[row, month]) - default_cost(prepared)[unit[e]]
    years = np.maximum(lots.worst[row, month - 1] - month, 0) / 12.0
    purchase = block.net_yield[month, path[e]]
    return pd.DataFrame(
        {
            "scenario": np.array(prepared.paths.ids)[block.path_lo + path[e]],
            "security_id": np.array(prepared.bonds.ids)[unit[e]],
            "segment": np.array(prepared.segment_names)[lots.segment[lot]],
            "month": month,
            "decided": events.decided[e],
            "right": np.where(
                events.kind[e] == CALL,
                np.where(prepared.stated_rights[unit[e]], "stated price", "par call"),
                np.array(KINDS)[events.kind[e]],
            ),
            "par_called": par,
            "price": events.price[e],
            "premium": par * (events.price[e] / 100.0 - 1.0),
            "book_yield": book_yield,
            "purchase_yield": purchase,
            "years_to_worst": years,
            "yield_given_up": par * (book_yield - purchase) * years + 0.0,
        }
    )


def announced_rows(prepared: Prepared, block: BlockResult) -> pd.DataFrame:
    """The same of calls announced by the valuation date: what they give up was given up before."""
    bonds, lots = prepared.bonds, prepared.lots
    lot = np.flatnonzero(bonds.announced[lots.security] & (bonds.maturity[lots.security] <= prepared.months))
    paths = block.path_hi - block.path_lo
    row, path = np.repeat(lot, paths), np.tile(np.arange(paths), lot.size)
    unit = lots.security[row]
    month = bonds.maturity[unit]
    par = lots.par[row] * prepared.survival[unit, month] * bonds.principal[unit, month] / 100.0
    par = par * block.held[month, group_of_lot(prepared)[row], path]
    return pd.DataFrame(
        {
            "scenario": np.array(prepared.paths.ids)[block.path_lo + path],
            "security_id": np.array(bonds.ids)[unit],
            "segment": np.array(prepared.segment_names)[lots.segment[row]],
            "month": month,
            "decided": 0,
            "right": "announced before",
            "par_called": par,
            "price": bonds.redemption[unit],
            "premium": par * (bonds.redemption[unit] / 100.0 - 1.0),
            "book_yield": bond_equivalent_of_growth(lots.growth_at_start[row]) - default_cost(prepared)[unit],
            "purchase_yield": block.net_yield[month, path],
            "years_to_worst": 0.0,
            "yield_given_up": 0.0,
        }
    )


def group_of_lot(prepared: Prepared) -> npt.NDArray[np.int64]:
    """Sale group of every lot."""
    holdings, lots = prepared.holdings, prepared.lots
    at = {(int(s), int(g)): int(k) for s, g, k in zip(holdings.security, holdings.segment, holdings.group)}
    return np.array([at[(int(s), int(g))] for s, g in zip(lots.security, lots.segment)], dtype=np.int64)


def puts_frame(prepared: Prepared, blocks: list[BlockResult]) -> pd.DataFrame:
    """The puts table: what the company, as holder, gave back; lots of one security and segment added up."""
    rows = pd.concat([call_rows(prepared, b) for b in blocks], ignore_index=True)
    rows = rows[(rows["par_called"] > 0.0) & (rows["right"] == KINDS[PUT])]
    rows = rows.assign(par_put=rows["par_called"], received=rows["par_called"] + rows["premium"])
    keys = ["scenario", "security_id", "segment", "month"]
    out = rows.groupby(keys, sort=False, as_index=False).agg(
        decided=("decided", "first"), par_put=("par_put", "sum"), price=("price", "first"),
        received=("received", "sum"),
    )  # fmt: skip
    order = {s: i for i, s in enumerate(prepared.paths.ids)}
    out = out.assign(o=out["scenario"].map(order)).sort_values(["o", "month", "security_id", "segment"])
    return out[list(COLUMNS["puts"])].reset_index(drop=True)


def calls_frame(prepared: Prepared, blocks: list[BlockResult]) -> pd.DataFrame:
    """The calls table: lots of one security and segment added up, yields and years weighted by par."""
    rows = pd.concat([f(prepared, b) for b in blocks for f in (call_rows, announced_rows)], ignore_index=True)
    rows = rows[(rows["par_called"] > 0.0) & (rows["right"] != KINDS[PUT])]
    weighted = rows.assign(
        book_yield=rows["book_yield"] * rows["par_called"], years_to_worst=rows["years_to_worst"] * rows["par_called"]
    )
    keys = ["scenario", "security_id", "segment", "month", "right"]
    out = weighted.groupby(keys, sort=False, as_index=False).agg(
        decided=("decided", "first"),
        par_called=("par_called", "sum"), price=("price", "first"), premium=("premium", "sum"),
        book_yield=("book_yield", "sum"), purchase_yield=("purchase_yield", "first"),
        years_to_worst=("years_to_worst", "sum"), yield_given_up=("yield_given_up", "sum"),
    )  # fmt: skip
    out["book_yield"] /= out["par_called"]
    out["years_to_worst"] /= out["par_called"]
    order = {s: i for i, s in enumerate(prepared.paths.ids)}
    out = out.assign(o=out["scenario"].map(order)).sort_values(["o", "month", "security_id", "segment", "right"])
    return out[list(COLUMNS["calls"])].reset_index(drop=True)
