"""Writes the demo study `harbour_ridge_2022`: everything invented but the starting Treasury curve.

    python scenarios/make_harbour_ridge_2022.py [FOLDER]

One fixed seed; two runs write the same files. Prices are the model's own clean prices at an invented spread, rounded
to a thousandth; the segment's cash is what makes starting assets equal to its reserves, at most half a cent above.
"""

from __future__ import annotations

import csv
import math
import random
import sys
import tempfile
from collections.abc import Iterable
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq
from harbour_ridge_assets import CLASS_SPREADS, DEFAULT_COST, LIVES, Bond, Lot
from harbour_ridge_liabilities import (
    MONTHS,
    NEWER,
    OLDER,
    Stream,
    deferred_stream,
    guaranteed_stream,
    payout_stream,
)
from harbour_ridge_rights import make_bonds, make_lots
from harbour_ridge_terms import notice_days, special_tables
from harbour_ridge_texts import SEGMENTS, study_text

from projector.rates.paths import build_paths
from projector.run.prepare import Prepared, prepare
from projector.study.reading import read_study

SEED = 20221231
CASH_SHARE = 0.005  # of a segment's reserve, before balancing

# United States Department of the Treasury, Daily Treasury Par Yield Curve Rates, 2022-12-30. [percent]
CURVE = {1: 4.12, 2: 4.41, 3: 4.42, 4: 4.69, 6: 4.76, 12: 4.73, 24: 4.41, 36: 4.22, 60: 3.99, 84: 3.96, 120: 3.88,
         240: 4.14, 360: 3.97}  # fmt: skip
FIVE_YEARS = list(CURVE).index(60)

Rows = list[dict[str, Any]]


@dataclass(frozen=True)
class Block:
    """A liability block: its segment and stream; one path means that it serves all of them."""

    segment: str
    name: str
    stream: Stream


def write_csv(path: Path, rows: Rows) -> None:
    with path.open("w", newline="", encoding="utf-8") as target:
        writer = csv.DictWriter(target, fieldnames=list(rows[0]), lineterminator="\n")
        writer.writeheader()
        writer.writerows(rows)


def security_rows(bonds: Iterable[Bond], prices: dict[str, float]) -> Rows:
    """The securities; a stated spread where there is no price yet."""
    return [
        {
            "security_id": b.name,
            "issuer": b.issuer,
            "asset_class": b.recipe.asset_class,
            "sector": b.sector,
            "rating": b.rating,
            "clean_price": f"{prices[b.name]:.3f}" if b.name in prices else "",
            "spread_bp": "" if b.name in prices else b.spread_bp,
            "coupon_rate": f"{b.coupon:.4f}" if b.coupon else "0",
            "coupon_frequency": b.frequency,
            "day_count": b.day_count,
            "end_of_month": "true" if b.month_end else "false",
            "issue_date": b.issue,
            "first_coupon_date": b.first_coupon or "",
            "maturity_date": b.maturity,
            "par_call_date": b.par_call or "",
        }
        for b in bonds
    ]


def right_rows(bonds: Iterable[Bond]) -> Rows:
    return [
        {
            "security_id": b.name,
            "first_date": r.first,
            "last_date": r.last,
            "style": r.style,
            "price": "" if r.price is None else f"{r.price:.3f}",
            "make_whole_spread_bp": "" if r.make_whole_bp is None else r.make_whole_bp,
            "notice_days": notice_days(b),
        }
        for b in bonds
        for r in b.rights
    ]


def lot_rows(lots: Iterable[Lot]) -> Rows:
    return [
        {
            "lot_id": lot.name,
            "security_id": lot.bond.name,
            "segment": lot.segment,
            "par": f"{lot.size:.0f}",
            "book_value": f"{book_value(lot):.2f}",
            "tax_basis": f"{lot.size * lot.tax / 100.0:.2f}",
        }
        for lot in lots
    ]


def book_value(lot: Lot) -> float:
    """Statement value in the ledger, to the cent. [currency]"""
    return round(lot.size * lot.book / 100.0, 2)


def stream_frame(blocks: Iterable[Block], ids: tuple[str, ...]) -> pd.DataFrame:
    """The streams as a long table; state items from month 0, flows from month 1."""
    parts = []
    for block in blocks:
        for item, amounts in block.stream.items():
            first = 0 if item in ("reserve_statutory", "account_value", "surrender_value") else 1
            names = ("all",) if amounts.shape[1] == 1 else ids
            for p, scenario in enumerate(names):
                parts.append(
                    pd.DataFrame(
                        {
                            "segment": block.segment,
                            "block": block.name,
                            "scenario": scenario,
                            "month": np.arange(first, MONTHS + 1, dtype=np.int64),
                            "item": item,
                            "amount": amounts[first:, p],
                        }
                    )
                )
    return pd.concat(parts, ignore_index=True)


def write_parquet(path: Path, frame: pd.DataFrame) -> None:
    schema = pa.schema(
        [(name, pa.string()) for name in ("segment", "block", "scenario")]
        + [("month", pa.int64()), ("item", pa.string()), ("amount", pa.float64())]
    )
    table = pa.Table.from_pandas(frame, schema=schema, preserve_index=False).replace_schema_metadata(None)
    pq.write_table(table, path, compression="zstd")


def control_rows(lots: list[Lot], blocks: list[Block], cash: dict[str, float]) -> Rows:
    """Ledger totals by segment, and of everything."""
    reserves = reserves_at_start(blocks)
    rows: Rows = []
    totals: dict[str, float] = {}
    for name in SEGMENTS:
        mine = [lot for lot in lots if lot.segment == name]
        amounts = {
            "lots_count": len(mine),
            "par": sum(lot.size for lot in mine),
            "book_value": sum(book_value(lot) for lot in mine),
            "reserve_statutory": reserves[name],
            "cash": cash[name],
        }
        for item, amount in amounts.items():
            totals[item] = totals.get(item, 0.0) + amount
            rows.append({"item": item, "segment": name, "amount": f"{amount:.{0 if item == 'lots_count' else 2}f}"})
    for item, amount in totals.items():
        rows.append({"item": item, "segment": "all", "amount": f"{amount:.{0 if item == 'lots_count' else 2}f}"})
    return rows


def reserves_at_start(blocks: Iterable[Block]) -> dict[str, float]:
    """Reserve at the valuation date by segment. [currency]"""
    out = dict.fromkeys(SEGMENTS, 0.0)
    for block in blocks:
        out[block.segment] += float(block.stream["reserve_statutory"][0, 0])
    return out


@dataclass(frozen=True)
class Demo:
    """Everything that goes into the folder."""

    bonds: list[Bond]
    lots: list[Lot]
    blocks: list[Block]
    ids: tuple[str, ...]
    digest: str
    cash: dict[str, float]
    prices: dict[str, float]

    def write(self, folder: Path) -> None:
        folder.mkdir(parents=True, exist_ok=True)
        write_csv(folder / "securities.csv", security_rows(self.bonds, self.prices))
        write_csv(folder / "lots.csv", lot_rows(self.lots))
        write_csv(folder / "call_rights.csv", right_rows(self.bonds))
        write_csv(folder / "yield_curve.csv", [{"tenor_months": t, "rate": f"{y / 100:.4f}"} for t, y in CURVE.items()])
        write_csv(
            folder / "class_spreads.csv",
            [
                {"rating": rating, "life_years": life, "spread_bp": spread}
                for rating, spreads in CLASS_SPREADS.items()
                for life, spread in zip(LIVES, spreads)
            ],
        )
        write_csv(
            folder / "default_costs.csv", [{"rating": r, "annual_cost": f"{c:.4f}"} for r, c in DEFAULT_COST.items()]
        )
        for name, rows in special_tables(self.bonds).items():
            write_csv(folder / f"{name}.csv", rows)
        write_parquet(folder / "liability_streams.parquet", stream_frame(self.blocks, self.ids))
        write_csv(folder / "control_totals.csv", control_rows(self.lots, self.blocks, self.cash))
        (folder / "study.toml").write_text(study_text(self.cash, self.digest), encoding="utf-8", newline="\n")


def scaled(lots: list[Lot], target: dict[str, float], accrued: dict[str, float]) -> list[Lot]:
    """Par in thousands, so that statement value and accrued interest of a segment come to about the target.

    accrued  per 100 of par by security
    """
    out = []
    for name in SEGMENTS:
        mine = [lot for lot in lots if lot.segment == name]
        now = sum(lot.size * (lot.book + accrued.get(lot.bond.name, 0.0)) / 100.0 for lot in mine)
        out += [replace(lot, size=round(lot.size * target[name] / now / 1000.0) * 1000.0) for lot in mine]
    return sorted(out, key=lambda lot: lot.name)


def accrued_of(prepared: Prepared) -> dict[str, float]:
    """Accrued interest on mapped months at the valuation date. [per 100]"""
    return {name: float(a) for name, a in zip(prepared.bonds.ids, prepared.bonds.accrued[:, 0])}


def other_assets(lots: Iterable[Lot], accrued: dict[str, float]) -> float:
    """Statement value and accrued interest. [currency]"""
    return math.fsum(book_value(lot) + lot.size * accrued[lot.bond.name] / 100.0 for lot in lots)


def balanced(
    lots: list[Lot], reserves: dict[str, float], accrued: dict[str, float]
) -> tuple[list[Lot], dict[str, float]]:
    """Cash in whole cents that makes starting assets the reserve, at most half a cent above it and never below.

    Accrued interest has fractions of a cent: lots of the segment grow by a thousand of par, one after the other, until
    they fit, so that surplus at the valuation date is nothing and not a fraction of a cent below.
    """
    out: list[Lot] = []
    cash = {}
    for name in SEGMENTS:
        mine = [lot for lot in lots if lot.segment == name]
        for i in range(len(mine)):
            gap = reserves[name] - other_assets(mine, accrued)
            cash[name] = math.ceil(gap * 100.0) / 100.0
            if 0.0005 <= cash[name] - gap <= 0.0045:
                break
            mine[i] = replace(mine[i], size=mine[i].size + 1000.0)
        else:
            raise ValueError(f"no cash in whole cents balances {name}")
        if not 0.002 <= cash[name] / reserves[name] <= 0.01:
            raise ValueError(f"cash of {name} is not a small part of its reserve: {cash[name]:.2f}")
        out += mine
    return sorted(out, key=lambda lot: lot.name), cash


def first_draft() -> Demo:
    """Securities at spreads, lots of provisional size, and the blocks that do not depend on paths."""
    bonds = make_bonds(random.Random(SEED))
    lots = make_lots(random.Random(SEED + 1), bonds)
    blocks = [
        Block("payout", "payout_annuities", payout_stream()),
        Block("guaranteed_interest", "guaranteed_contracts", guaranteed_stream()),
    ]
    small = dict.fromkeys(SEGMENTS, 100e6)
    return Demo(bonds, scaled(lots, small, {}), blocks, (), "", dict.fromkeys(SEGMENTS, 0.0), {})


def make_demo() -> Demo:
    """In three steps: the paths and the streams made on them; prices and accrued interest; par and cash."""
    demo = first_draft()
    with tempfile.TemporaryDirectory() as scratch:
        demo.write(Path(scratch))
        paths = build_paths(read_study(Path(scratch))[0])
        five_year = paths.yields[:, FIVE_YEARS, :]
        deferred = [
            Block("deferred_annuities", "deferred_older", deferred_stream(OLDER, five_year)),
            Block("deferred_annuities", "deferred_newer", deferred_stream(NEWER, five_year)),
        ]
        demo = replace(demo, blocks=[*deferred, *demo.blocks], ids=paths.ids, digest=paths.digest())
        demo.write(Path(scratch))
        prepared = prepare(read_study(Path(scratch))[0])
    clean = prepared.calibrated.clean_price
    prices = {name: round(float(price), 3) for name, price in zip(prepared.bonds.ids, clean)}
    accrued, reserves = accrued_of(prepared), reserves_at_start(demo.blocks)
    target = {name: reserve * (1.0 - CASH_SHARE) for name, reserve in reserves.items()}
    lots, cash = balanced(scaled(demo.lots, target, accrued), reserves, accrued)
    return replace(demo, lots=lots, prices=prices, cash=cash)


def main(folder: Path) -> None:
    make_demo().write(folder)
    read_study(folder)  # the door must accept it


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).parent / "harbour_ridge_2022")
