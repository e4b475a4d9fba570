"""Paths written in the study's own tables: shifts by year and tenor, historical replay, imported sets."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
import pandas as pd

Array = npt.NDArray[np.float64]


def in_order(names: pd.Series) -> tuple[str, ...]:
    """Distinct names, shorter first, then by spelling: "2" before "10", whatever the order of the rows."""
    return tuple(sorted(set(names), key=lambda name: (len(name), name)))


def by_tenor(quoted: Array, values: Array, tenors: tuple[int, ...]) -> Array:
    """Values at the curve's tenors, linear between those quoted and flat outside. [1/year]"""
    return np.interp(np.array(tenors, dtype=np.float64), quoted, values)


def year_at(month: int, within_year: str) -> float:
    """Years read at a month: evenly within the year, or whole years passed."""
    return month / 12.0 if within_year == "linear" else float(month // 12)


def shift_paths(
    table: pd.DataFrame, tenors: tuple[int, ...], start: Array, months: int, within_year: str
) -> tuple[tuple[str, ...], Array]:
    """Starting curve plus shifts by year and tenor; the year 0 row applies from month 1. [month, tenor, path]

    A twist is a table whose shift differs by tenor. After the last year the shift stays.
    """
    titles = in_order(table["title"])
    out = np.empty((months + 1, len(tenors), len(titles)))
    for p, title in enumerate(titles):
        rows = table[table["title"] == title]
        years = np.array(sorted(set(rows["year"].astype(float))))
        grid = np.stack(
            [
                by_tenor(part["tenor_months"].to_numpy(float), part["shift"].to_numpy(float), tenors)
                for _, part in rows.sort_values(["year", "tenor_months"]).groupby("year", sort=True)
            ]
        )
        for m in range(months + 1):
            at = year_at(m, within_year)
            shift = np.array([np.interp(at, years, grid[:, j]) for j in range(len(tenors))])
            out[m, :, p] = start + (shift if m > 0 else 0.0)
    return titles, out


def history_paths(
    table: pd.DataFrame, tenors: tuple[int, ...], start: Array, months: int, replay: str
) -> tuple[tuple[str, ...], Array]:
    """Past yields replayed from the valuation date: their changes on the starting curve, or their levels.

    After the table's last month the curve stays. [month, tenor, path]
    """
    titles = in_order(table["title"])
    out = np.empty((months + 1, len(tenors), len(titles)))
    for p, title in enumerate(titles):
        rows = table[table["title"] == title].sort_values(["month", "tenor_months"])
        past = np.stack(
            [
                by_tenor(part["tenor_months"].to_numpy(float), part["rate"].to_numpy(float), tenors)
                for _, part in rows.groupby("month", sort=True)
            ]
        )
        for m in range(months + 1):
            seen = past[min(m, past.shape[0] - 1)]
            out[m, :, p] = start + (seen - past[0]) if replay == "changes" or m == 0 else seen
    return titles, out


def imported_paths(
    table: pd.DataFrame, tenors: tuple[int, ...], start: Array, months: int
) -> tuple[tuple[str, ...], Array]:
    """Yields as supplied, month 0 taken from the starting curve with which the door has compared it."""
    titles = in_order(table["scenario"])
    order = {title: p for p, title in enumerate(titles)}
    column = {tenor: j for j, tenor in enumerate(tenors)}
    out = np.empty((months + 1, len(tenors), len(titles)))
    path = table["scenario"].map(order).to_numpy(dtype=np.int64)
    tenor = table["tenor_months"].astype(int).map(column).to_numpy(dtype=np.int64)
    month = table["month"].to_numpy(dtype=np.int64)
    inside = month <= months
    out[month[inside], tenor[inside], path[inside]] = table["rate"].to_numpy(dtype=np.float64)[inside]
    out[0] = start[:, None]
    return titles, out
