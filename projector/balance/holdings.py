"""Holdings: a security's par in one segment, its statement value through time, and the sale group it belongs to.

Terms, price, spread and call decision belong to the security; par, statement value and segment to the lot. Lots of one
security in one segment are added up to a holding once; everything after is linear in it (C9).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
import pandas as pd

from projector.balance.holdings_kernels import ITEMS, HeldTerms, Left, add_holdings
from projector.balance.statement_kernels import statement_paths
from projector.bonds.decisions import CallEvents
from projector.bonds.mapped import MappedBonds
from projector.study.records import Defaults

Array = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]
BoolArray = npt.NDArray[np.bool_]

LOTS_AT_A_TIME = 512


@dataclass(frozen=True)
class DefaultTerms:
    """Default by rating in monthly form: one of the two forms of the study (never both)."""

    survival: dict[str, float]  # share of par that survives a month [-]
    recovery: dict[str, float]  # share of defaulted par recovered [-]
    lag_months: int

    @staticmethod
    def from_study(choice: Defaults, table: pd.DataFrame) -> DefaultTerms:
        """Annual rates to monthly by constant force: 1 - (1 - q)^(1/12)."""
        column = "annual_cost" if choice.form == "net_annual_cost" else "annual_rate"
        rating = [str(r) for r in table["rating"]]
        survival = {r: (1.0 - float(q)) ** (1.0 / 12.0) for r, q in zip(rating, table[column])}
        recovered = table["recovery"] if choice.form == "rate_recovery_lag" else np.zeros(len(rating))
        return DefaultTerms(survival, {r: float(x) for r, x in zip(rating, recovered)}, choice.recovery_lag_months)


@dataclass(frozen=True)
class SaleGroups:
    """Segment x asset class x callable or not, in that order (C9)."""

    segment: IntArray
    asset_class: tuple[str, ...]
    callable_: BoolArray

    @property
    def count(self) -> int:
        return self.segment.size


@dataclass(frozen=True)
class Holdings:
    """shape (holding,) and, for statement values per 100 of par, (holding, month 0..last)."""

    security: IntArray
    segment: IntArray
    group: IntArray
    par: Array
    book: Array
    accretion: Array
    opening_interest: Array  # effective interest of month 1 on the opening dirty value [currency]
    groups: SaleGroups


@dataclass(frozen=True)
class LotPaths:
    """Statement figures by lot: per 100 of par."""

    lot_id: tuple[str, ...]
    security: IntArray
    segment: IntArray
    par: Array
    opening_book: Array  # currency
    growth_at_start: Array  # monthly factor
    worst_at_start: IntArray
    callable_rows: IntArray  # lots of securities with rights
    growth_at: Array  # [callable lot, month]
    worst: npt.NDArray[np.int16]  # [callable lot, month]


def lot_frame(lots: pd.DataFrame, bonds: MappedBonds, segments: tuple[str, ...]) -> pd.DataFrame:
    """Lots with security and segment as indices, in the order (security, segment, lot id)."""
    index = {s: i for i, s in enumerate(bonds.ids)}
    frame = pd.DataFrame(
        {
            "lot_id": lots["lot_id"].astype(str),
            "s": lots["security_id"].map(index).astype(np.int64),
            "g": lots["segment"].map({s: i for i, s in enumerate(segments)}).astype(np.int64),
            "par": lots["par"].astype(np.float64),
            "book": lots["book_value"].astype(np.float64),
        }
    )
    return frame.sort_values(["s", "g", "lot_id"], kind="stable").reset_index(drop=True)


def build_groups(frame: pd.DataFrame, asset_class: list[str], callable_: BoolArray) -> tuple[SaleGroups, IntArray]:
    """Sale groups present, and each lot's group."""
    keys = [(int(g), asset_class[int(s)], bool(callable_[int(s)])) for s, g in zip(frame["s"], frame["g"])]
    distinct = sorted(set(keys))
    at = {key: i for i, key in enumerate(distinct)}
    groups = SaleGroups(
        np.array([k[0] for k in distinct], dtype=np.int64),
        tuple(k[1] for k in distinct),
        np.array([k[2] for k in distinct], dtype=np.bool_),
    )
    return groups, np.array([at[key] for key in keys], dtype=np.int64)


def build_holdings(
    lots: pd.DataFrame, bonds: MappedBonds, asset_class: list[str], stated: BoolArray, segments: tuple[str, ...],
    last_month: int,
) -> tuple[Holdings, LotPaths]:  # fmt: skip
    """Holdings and lot figures; statement values from each lot's own value at the valuation date, never from price.

    stated      securities callable at stated prices, by which sale groups are split
    last_month  months projected (statement values after it are not needed)
    """
    frame = lot_frame(lots, bonds, segments)
    with_rights = bonds.with_rights()
    groups, lot_group = build_groups(frame, asset_class, stated)
    months = min(last_month, bonds.last_month)
    security, par = frame["s"].to_numpy(), frame["par"].to_numpy()
    value = frame["book"].to_numpy() / par * 100.0
    pair = frame["s"].to_numpy() * len(segments) + frame["g"].to_numpy()
    starts = np.flatnonzero(np.concatenate([[True], pair[1:] != pair[:-1]]))
    holding = np.cumsum(np.concatenate([[0], (pair[1:] != pair[:-1]).astype(np.int64)]))
    count = starts.size
    total = np.zeros(count)
    np.add.at(total, holding, par)
    book, accretion = np.zeros((count, last_month + 1)), np.zeros((count, last_month + 1))
    interest = np.zeros(count)
    growth0, worst0 = np.empty(par.size), np.empty(par.size, dtype=np.int64)
    kept_growth, kept_worst = [], []
    last = bonds.principal[np.arange(len(bonds.ids)), bonds.maturity] * (bonds.redemption / 100.0)
    flow = bonds.coupon + bonds.principal
    flow[np.arange(len(bonds.ids)), bonds.maturity] -= bonds.principal[np.arange(len(bonds.ids)), bonds.maturity]
    priced = np.isfinite(bonds.clean_price)
    price = np.where(priced, np.where(priced, bonds.clean_price, 0.0) * bonds.outstanding, np.inf)
    for a in range(0, par.size, LOTS_AT_A_TIME):
        b = min(a + LOTS_AT_A_TIME, par.size)
        shape = (b - a, months + 1)
        lot_book, lot_accretion, growth, worst = (
            np.zeros(shape), np.zeros(shape), np.ones(shape), np.zeros(shape, dtype=np.int64)
        )  # fmt: skip
        statement_paths(
            security[a:b], value[a:b], bonds.maturity, months, last, price, bonds.accrued, bonds.coupon, flow,
            lot_book, lot_accretion, growth, worst,
        )  # fmt: skip
        weight = par[a:b] / total[holding[a:b]]
        np.add.at(book[:, : months + 1], holding[a:b], lot_book * weight[:, None])
        np.add.at(accretion[:, : months + 1], holding[a:b], lot_accretion * weight[:, None])
        dirty = (value[a:b] + bonds.accrued[security[a:b], 0]) * par[a:b] / 100.0
        np.add.at(interest, holding[a:b], dirty * (growth[:, 0] - 1.0))
        growth0[a:b], worst0[a:b] = growth[:, 0], worst[:, 0]
        kept = with_rights[security[a:b]]
        kept_growth.append(growth[kept])
        kept_worst.append(worst[kept].astype(np.int16))
    holdings = Holdings(
        security[starts], frame["g"].to_numpy()[starts], lot_group[starts], total, book, accretion, interest, groups
    )
    return holdings, LotPaths(
        tuple(frame["lot_id"]), security, frame["g"].to_numpy(), par, frame["book"].to_numpy(), growth0, worst0,
        np.flatnonzero(with_rights[security]), np.concatenate(kept_growth), np.concatenate(kept_worst),
    )  # fmt: skip


def survival_table(bonds: MappedBonds, terms: DefaultTerms, last_month: int) -> Array:
    """Share of opening par not defaulted by each month. [-], shape (security, month 0..last)"""
    monthly = np.array([terms.survival[r] for r in bonds.ratings])
    out = np.ones((monthly.size, last_month + 1))
    for m in range(1, last_month + 1):
        out[:, m] = out[:, m - 1] * monthly
    return out


def to_months(table: Array, last_month: int) -> Array:
    """A table by month cut or filled with zeros to 0..last_month, C-contiguous."""
    out = np.zeros((table.shape[0], last_month + 1))
    n = min(last_month + 1, table.shape[1])
    out[:, :n] = table[:, :n]
    return out


def group_items(
    holdings: Holdings, bonds: MappedBonds, terms: DefaultTerms, survival: Array, events: CallEvents, last_month: int
) -> Array:
    """Flows and balances of every sale group at a held share of one. [currency], shape (item, month, group, path)

    Holdings without rights are the same on every path and added once.
    """
    paths = events.start.shape[1] - 1
    rated = bonds.with_rights()[holdings.security]
    recovery = np.array([terms.recovery[r] for r in bonds.ratings])
    coupon, accrued, principal, outstanding = (
        to_months(x, last_month) for x in (bonds.coupon, bonds.accrued, bonds.principal, bonds.outstanding)
    )
    held = HeldTerms(
        bonds.maturity, survival, recovery, coupon, accrued, principal, outstanding, bonds.redemption, bonds.announced
    )
    out = np.zeros((ITEMS, last_month + 1, holdings.groups.count, paths))
    one = np.zeros((ITEMS, last_month + 1, holdings.groups.count, 1))
    no_events = np.zeros((len(bonds.ids), 2), dtype=np.int64)
    for rows, start, target in ((~rated, no_events, one), (rated, events.start, out)):
        n = np.flatnonzero(rows)
        add_holdings(
            last_month, holdings.security[n], holdings.group[n], holdings.par[n], held, holdings.book[n],
            holdings.accretion[n], Left(events.month, events.part, events.kind, events.price, start), target,
        )  # fmt: skip
    return out + one
