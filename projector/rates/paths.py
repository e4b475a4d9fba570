"""The set of rate paths of a study: sources in the order written, one array, one digest (C14)."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
import pandas as pd

from projector.rates.curve import CurveReading
from projector.rates.presets.seven import TITLES, seven_paths
from projector.rates.tabled import history_paths, imported_paths, shift_paths
from projector.study.records import PathSource, Study

Array = npt.NDArray[np.float64]


@dataclass(frozen=True, kw_only=True)
class PathSet:
    """Rate paths on the study's rate basis.

    yields  [1/year], shape (month 0..M, tenor, path); month 0 is the starting curve on every path
    """

    ids: tuple[str, ...]
    titles: tuple[str, ...]
    kinds: tuple[str, ...]
    files: tuple[str, ...]  # table each path was read from, empty for presets
    reading: CurveReading
    yields: Array
    measure: str  # "deterministic": neither a real-world nor a pricing distribution

    @property
    def count(self) -> int:
        return len(self.ids)

    def digest(self) -> str:
        """SHA-256 over the canonical little-endian arrays, the tenors and the rate basis (C14)."""
        digest = hashlib.sha256()
        digest.update(("par" if self.reading.par_basis else "zero").encode())
        digest.update(np.array(self.reading.tenor_months, dtype="<i8").tobytes())
        digest.update("\n".join(self.ids).encode())
        digest.update(np.array(self.yields.shape, dtype="<i8").tobytes())
        digest.update(np.ascontiguousarray(self.yields, dtype="<f8").tobytes())
        return digest.hexdigest()

    def part(self, path_lo: int, path_hi: int) -> Array:
        """Yields of the paths path_lo..path_hi-1, C-contiguous."""
        return np.ascontiguousarray(self.yields[:, :, path_lo:path_hi])


def curve_reading(study: Study) -> CurveReading:
    """How the study's quoted tenors become a curve."""
    tenors = tuple(int(t) for t in study.tables.yield_curve["tenor_months"])
    return CurveReading(tenors, study.rates.rate_basis == "par", study.numerics.interpolation == "linear")


def five_year_yield(tenors: tuple[int, ...], start: Array) -> float:
    """Starting yield at five years, linear between the neighbouring quoted tenors. [1/year]"""
    return float(np.interp(60.0, np.array(tenors, dtype=np.float64), start))


def source_paths(source: PathSource, study: Study, start: Array) -> tuple[tuple[str, ...], Array]:
    """Titles and yields [month, tenor, path] of one source."""
    tenors = tuple(int(t) for t in study.tables.yield_curve["tenor_months"])
    months = study.horizon.months
    if source.kind == "seven_deterministic":
        five = five_year_yield(tenors, start)
        return TITLES, seven_paths(
            start, five, months, str(source.floor), str(source.within_year), str(source.recovery)
        )
    table: pd.DataFrame = study.tables.rate_tables[str(source.file)]
    if source.kind == "shift_table":
        return shift_paths(table, tenors, start, months, str(source.within_year))
    if source.kind == "history":
        return history_paths(table, tenors, start, months, str(source.replay))
    return imported_paths(table, tenors, start, months)


def build_paths(study: Study) -> PathSet:
    """Every path of the study, numbered S1, S2, ... in the order written (imported sets keep their names as titles)."""
    start = study.tables.yield_curve["rate"].to_numpy(dtype=np.float64)
    titles: list[str] = []
    kinds: list[str] = []
    files: list[str] = []
    parts: list[Array] = []
    for source in study.rates.paths:
        names, yields = source_paths(source, study, start)
        titles.extend(names)
        kinds.extend([source.kind] * len(names))
        files.extend([source.file or ""] * len(names))
        parts.append(yields)
    return PathSet(
        ids=tuple(f"S{i + 1}" for i in range(len(titles))),
        titles=tuple(titles),
        kinds=tuple(kinds),
        files=tuple(files),
        reading=curve_reading(study),
        yields=np.ascontiguousarray(np.concatenate(parts, axis=2)),
        measure="deterministic",
    )
