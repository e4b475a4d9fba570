"""Calls by scenario, security and segment: par, price, and the yield given up by lots (definitions of Money)."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
import pandas as pd

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


def share_before(block: BlockResult) -> Array:
    """Share outstanding just before each event of a block. [-], shape (event,)"""
    out = np.ones(block.events.month.size)
    shares, starts = block.events.share, set(block.events.start[:, :-1].ravel().tolist())
    for e in range(1, out.size):
        if e not in starts:
            out[e] = out[e - 1] * (1.0 - shares[e - 1])
    return out


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
    share = (events.share * share_before(block))[e] * block.held[month, group, path[e]]
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
            "right": np.where(prepared.stated_rights[unit[e]], "stated price", "par call"),
            "par_called": par,
            "price": prepared.bonds.clean_price[unit[e], month],
            "premium": par * (prepared.bonds.clean_price[unit[e], month] / 100.0 - 1.0),
            "book_yield": book_yield,
            "purchase_yield": purchase,
            "years_to_worst": years,
            "yield_given_up": par * (book_yield - purchase) * years + 0.0,
        }
    )


def group_of_lot(prepared: Prepared) -> npt.NDArray[np.int64]:
    """Sale group of every lot."""
    holdings, lots = prepared.holdings, prepared.lots
    at = {(int(s), int(g)): int(k) for s, g, k in zip(holdings.security, holdings.segment, holdings.group)}
    return np.array([at[(int(s), int(g))] for s, g in zip(lots.security, lots.segment)], dtype=np.int64)


def calls_frame(prepared: Prepared, blocks: list[BlockResult]) -> pd.DataFrame:
    """The calls table: lots of one security and segment added up, yields and years weighted by par."""
    rows = pd.concat([call_rows(prepared, b) for b in blocks], ignore_index=True)
    rows = rows[rows["par_called"] > 0.0]
    weighted = rows.assign(
        book_yield=rows["book_yield"] * rows["par_called"], years_to_worst=rows["years_to_worst"] * rows["par_called"]
    )
    keys = ["scenario", "security_id", "segment", "month"]
    out = weighted.groupby(keys, sort=False, as_index=False).agg(
        right=("right", "first"),
        par_called=("par_called", "sum"), price=("price", "first"), premium=("premium", "sum"),
        book_yield=("book_yield", "sum"), purchase_yield=("purchase_yield", "first"),
        years_to_worst=("years_to_worst", "sum"), yield_given_up=("yield_given_up", "sum"),
    )  # fmt: skip
    out["book_yield"] /= out["par_called"]
    out["years_to_worst"] /= out["par_called"]
    order = {s: i for i, s in enumerate(prepared.paths.ids)}
    out = out.assign(o=out["scenario"].map(order)).sort_values(["o", "month", "security_id", "segment"])
    return out[list(COLUMNS["calls"])].reset_index(drop=True)
