"""Result arrays to long, tidy tables (columns and units: `results.COLUMNS`)."""

from __future__ import annotations

import hashlib

import numpy as np
import numpy.typing as npt
import pandas as pd

from projector.run.block import BlockResult
from projector.run.measure_table import SurplusTables
from projector.run.prepare import Prepared
from projector.run.results import ALL_SEGMENTS, COLUMNS
from projector.study.clock import year_ends

Array = npt.NDArray[np.float64]

MIX_YEARS = (0, 5, 10, 20, 30, 40, 50)
SETTLED = np.array(["bound", "solve", "second grid", "third grid"])


def scenarios_frame(prepared: Prepared) -> pd.DataFrame:
    paths = prepared.paths
    return pd.DataFrame({"scenario": paths.ids, "title": paths.titles, "kind": paths.kinds})


def rates_frame(prepared: Prepared) -> pd.DataFrame:
    """Quoted yields at month 0, month 1 and the year ends."""
    paths = prepared.paths
    months = np.array([0, 1, *year_ends(prepared.months)])
    tenors = np.array(paths.reading.tenor_months)
    block = paths.yields[months].transpose(2, 0, 1)
    p, m, t = (a.ravel() for a in np.meshgrid(*(np.arange(n) for n in block.shape), indexing="ij"))
    return pd.DataFrame(
        {
            "scenario": np.array(paths.ids)[p],
            "month": months[m],
            "tenor_months": tenors[t],
            "rate": block.ravel(),
        }
    )


def flows_frame(prepared: Prepared, blocks: list[BlockResult]) -> pd.DataFrame:
    """Every flow that is not zero, by scenario, segment, month and category (C12)."""
    parts = []
    segments = np.array(prepared.segment_names)
    for r in blocks:
        ids = np.array(prepared.paths.ids[r.path_lo : r.path_hi])
        for (holding, category), amount in r.flows.items():
            m, s, p = np.nonzero(amount)
            parts.append(
                pd.DataFrame(
                    {
                        "scenario": ids[p], "segment": segments[s], "month": m, "holding": holding,
                        "category": category, "amount": amount[m, s, p], "_p": p + r.path_lo, "_s": s,
                    }
                )
            )  # fmt: skip
    frame = pd.concat(parts, ignore_index=True)
    frame = frame.sort_values(["_p", "_s", "month"], kind="stable")
    return frame[list(COLUMNS["flows"])].reset_index(drop=True)


def balance_frame(prepared: Prepared, blocks: list[BlockResult], tables: list[SurplusTables]) -> pd.DataFrame:
    """Balances of each segment and of all together; market figures at month 0 and the year ends."""
    parts = []
    for r, t in zip(blocks, tables):
        series = {
            name: r.balances[name]
            for name in (
                "cash", "statement_start", "statement_bought", "accrued", "recoveries", "borrowing", "shortfall",
                "reserve",
            )
        }  # fmt: skip
        series["statement_surplus"] = t.statement
        series["market_assets"] = spread_out(t.market_assets, t.months, prepared.months)
        series["market_surplus"] = spread_out(t.market, t.months, prepared.months)
        for p in range(r.path_hi - r.path_lo):
            for s, name in enumerate([*prepared.segment_names, ALL_SEGMENTS]):
                parts.append(balance_part(prepared, r, series, p, s, name))
    return pd.concat(parts, ignore_index=True)[list(COLUMNS["balance"])]


def balance_part(
    prepared: Prepared, r: BlockResult, series: dict[str, Array], p: int, s: int, name: str
) -> pd.DataFrame:
    """One scenario and segment: every month."""
    months = prepared.months + 1
    columns: dict[str, object] = {
        "scenario": np.full(months, prepared.paths.ids[r.path_lo + p]),
        "segment": np.full(months, name),
        "month": np.arange(months),
    }
    for column, values in series.items():
        if name == ALL_SEGMENTS:
            total = np.zeros(months)
            for i in range(values.shape[1]):
                total = total + values[:, i, p]
            columns[column] = total
        else:
            columns[column] = values[:, s, p]
    columns["earned_rate"] = r.balances["earned_rate"][:, s, p] if name != ALL_SEGMENTS else earned_all(r, p)
    return pd.DataFrame(columns)


def earned_all(r: BlockResult, p: int) -> Array:
    """Earned rate of all segments: their rates weighted by statement value of bonds and cash at the month end."""
    b = r.balances
    base = b["statement_start"][:, :, p] + b["statement_bought"][:, :, p] + b["cash"][:, :, p]
    weighted, total = np.zeros(base.shape[0]), np.zeros(base.shape[0])
    for s in range(base.shape[1]):
        weighted = weighted + base[:, s] * b["earned_rate"][:, s, p]
        total = total + base[:, s]
    return np.where(total > 0.0, weighted / np.where(total > 0.0, total, 1.0), 0.0)


def spread_out(values: Array, months: list[int], last: int) -> Array:
    """Year-end values on the monthly axis, nan between."""
    out = np.full((last + 1, *values.shape[1:]), np.nan)
    out[months] = values
    return out


def mix_frame(prepared: Prepared, blocks: list[BlockResult]) -> pd.DataFrame:
    """Statement value by asset class at years 0, 5, 10, 20, 30, 40, 50, segments and all."""
    rows = []
    years = [y for y in MIX_YEARS if 12 * y <= prepared.months]
    for r in blocks:
        for p in range(r.path_hi - r.path_lo):
            for s, name in enumerate([*prepared.segment_names, ALL_SEGMENTS]):
                mine = list(range(len(prepared.segment_names))) if name == ALL_SEGMENTS else [s]
                head = (prepared.paths.ids[r.path_lo + p], name)
                rows += [(*head, year, *row) for year in years for row in mix_rows(prepared, r, 12 * year, mine, p)]
    return pd.DataFrame(rows, columns=list(COLUMNS["mix"]))


def mix_rows(prepared: Prepared, r: BlockResult, m: int, segments: list[int], p: int) -> list[tuple[str, bool, float]]:
    """Class, callable or not, and statement value at one month, of some segments together."""
    groups = prepared.holdings.groups
    held: dict[tuple[str, bool], float] = {}
    for g in range(groups.count):
        if int(groups.segment[g]) in segments:
            key = (groups.asset_class[g], bool(groups.callable_[g]))
            held[key] = held.get(key, 0.0) + float(r.group_book[m][g, p])
    for c, label in enumerate(prepared.strategy.mix.names):
        held[(f"bought: {label}", False)] = sum(float(r.class_book[m][c, i, p]) for i in segments)
    held[("cash", False)] = sum(float(r.balances["cash"][m, i, p]) for i in segments)
    return [(*key, value) for key, value in held.items()]


def decisions_frame(prepared: Prepared, blocks: list[BlockResult]) -> pd.DataFrame:
    """Rows of decisions in the order (scenario, security, month)."""
    frame = pd.concat([r.decisions for r in blocks if r.decisions is not None], ignore_index=True)
    frame = frame.astype({"unit": np.int64, "path": np.int64, "month": np.int64, "by": np.int64})
    frame = frame.sort_values(["path", "unit", "month"], kind="stable")
    return pd.DataFrame(
        {
            "scenario": np.array(prepared.paths.ids)[frame["path"]],
            "security_id": np.array(prepared.bonds.ids)[frame["unit"]],
            "month": frame["month"].to_numpy(),
            "upper_bound": frame["upper_bound"].to_numpy(),
            "continuation": frame["continuation"].to_numpy(),
            "bar": frame["bar"].to_numpy(),
            "decided_by": SETTLED[frame["by"].to_numpy()],
            "called": frame["share"].to_numpy() > 0.0,
        }
    )


ROUNDED = {"currency": 2, "1/year": 10, "per 100": 6, "bp": 4}


def canonical_digest(name: str, frame: pd.DataFrame, columns: dict[str, tuple[str, str]] | None = None) -> str:
    """SHA-256 of a table's rounded content: money to 2 decimals, rates to 10, prices to 6 (C15).

    columns  unit and meaning by column, of a table that is not among those of a run
    """
    digest = hashlib.sha256(name.encode())
    for column, (unit, _) in (columns or COLUMNS[name]).items():
        digest.update(column.encode())
        values = frame[column]
        if pd.api.types.is_float_dtype(values):
            rounded = np.round(values.to_numpy(dtype=np.float64), ROUNDED.get(unit, 6)) + 0.0
            digest.update(np.ascontiguousarray(rounded, dtype="<f8").tobytes())
        elif pd.api.types.is_integer_dtype(values) or pd.api.types.is_bool_dtype(values):
            digest.update(values.to_numpy().astype("<i8").tobytes())
        else:
            digest.update("\n".join(map(str, values.tolist())).encode())
    return digest.hexdigest()
