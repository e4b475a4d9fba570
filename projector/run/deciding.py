"""The decision pass of a block, with what a store already knows left out (C8)."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import numpy.typing as npt
import pandas as pd

from projector.bonds.decisions import CallEvents, DecisionPass, DecisionRows, ordered_events, unit_key
from projector.bonds.store import Place, SolveStore, UnitDecisions
from projector.run.prepare import Prepared

Array = npt.NDArray[np.float64]


def decide(
    prepared: Prepared, path_lo: int, path_hi: int, record: str, discounts: Callable[[int], Array],
    store: SolveStore | None,
) -> tuple[CallEvents, pd.DataFrame | None, dict[int, Place]]:  # fmt: skip
    """Calls of a block, rows of decisions when asked for, and each security's place in the store."""
    decision_pass = DecisionPass(prepared.solver, prepared.rule, prepared.months)
    paths = path_hi - path_lo
    if store is None:
        rows = DecisionRows() if record == "detail" else None
        events = decision_pass.run(discounts, paths, rows)
        return events, None if rows is None else rows.frame(), {}
    places = store_places(prepared, path_lo, path_hi)
    units = np.flatnonzero(prepared.bonds.with_rights())
    missing = np.array([u for u in units if places[int(u)] not in store.decisions], dtype=np.int64)
    store.found += units.size - missing.size
    store.solved += missing.size
    if missing.size:
        rows = DecisionRows()
        fresh = decision_pass.run(discounts, paths, rows, missing)
        keep(store, places, missing, fresh, rows.frame())
    known = {int(u): store.decisions[places[int(u)]] for u in units}
    frame = pd.concat([k.rows.assign(unit=u) for u, k in known.items() if k.rows is not None]) if known else None
    return together(known, (len(prepared.bonds.ids), paths)), frame if record == "detail" else None, places


def store_places(prepared: Prepared, path_lo: int, path_hi: int) -> dict[int, Place]:
    """Key and path range of every security."""
    digest = prepared.paths.digest()
    return {
        u: (unit_key(prepared.solver, prepared.rule, u, digest, prepared.months), path_lo, path_hi)
        for u in range(len(prepared.bonds.ids))
    }


def keep(
    store: SolveStore, places: dict[int, Place], units: npt.NDArray[np.int64], events: CallEvents, rows: pd.DataFrame
) -> None:
    """Puts fresh decisions in the store, security by security."""
    by_unit = {int(u): part for u, part in rows.groupby("unit")} if len(rows) else {}
    for u in units:
        start = events.start[u]
        path = np.repeat(np.arange(start.size - 1), np.diff(start))
        span = slice(int(start[0]), int(start[-1]))
        part = by_unit.get(int(u))
        store.decisions[places[int(u)]] = UnitDecisions(
            path, tuple(c[span] for c in (events.month, events.decided, events.share, events.kind, events.price)), part
        )


def together(known: dict[int, UnitDecisions], shape: tuple[int, int]) -> CallEvents:
    """Events of every security in one."""
    parts: list[tuple[npt.NDArray[Any], ...]] = [
        (np.full(k.path.size, u, dtype=np.int64), k.path, *k.columns) for u, k in known.items()
    ]
    return ordered_events(parts, shape)
