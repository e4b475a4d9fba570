"""Sizes by arithmetic, before anything is laid out: memory of a run, and the limit it is held to."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from projector.balance.holdings_kernels import ITEMS
from projector.study.clock import month_of
from projector.study.errors import LocatedError, StudyTooLarge
from projector.study.records import Study

MEMORY_LIMIT = 8_000_000_000  # bytes
WORDS_PER_CELL = 60  # arrays [month, segment, path] a block keeps
TABLES_PER_SECURITY = 14  # arrays [security, month]


@dataclass(frozen=True)
class Sizes:
    """Counts of a run and the bytes they ask for."""

    securities: int
    lots: int
    paths: int
    months: int
    segments: int
    groups: int
    security_months: int

    @property
    def security_bytes(self) -> int:
        return 8 * TABLES_PER_SECURITY * self.securities * self.security_months

    @property
    def path_bytes(self) -> int:
        cells = self.months * self.segments * self.paths
        return 8 * (WORDS_PER_CELL * cells + 2 * ITEMS * self.months * self.groups * self.paths)

    @property
    def total(self) -> int:
        return self.security_bytes + self.path_bytes

    def sentence(self) -> str:
        """The arithmetic in words."""
        return (
            f"{self.securities:,} securities x {self.security_months:,} months x {TABLES_PER_SECURITY} tables x 8"
            f" bytes = {self.security_bytes / 1e6:,.0f} MB; {self.paths:,} paths x {self.months:,} months x"
            f" ({self.segments} segments x {WORDS_PER_CELL} + {self.groups} sale groups x {2 * ITEMS}) x 8 bytes ="
            f" {self.path_bytes / 1e6:,.0f} MB; together {self.total / 1e6:,.0f} MB"
        )


def path_count(study: Study) -> int:
    """Paths the study's sources will give."""
    total = 0
    for source in study.rates.paths:
        if source.kind == "seven_deterministic":
            total += 7
        else:
            table = study.tables.rate_tables[str(source.file)]
            total += table["scenario" if "scenario" in table.columns else "title"].nunique()
    return total


def sizes(study: Study) -> Sizes:
    """Counts from the tables alone."""
    securities, lots = study.tables.securities, study.tables.lots
    last = max(month_of(d.date(), study.valuation_date) for d in securities["maturity_date"])
    pairs = lots.merge(securities[["security_id", "asset_class"]], on="security_id", how="left")
    groups = 2 * len(pairs[["segment", "asset_class"]].drop_duplicates())
    return Sizes(
        securities=len(securities),
        lots=len(lots),
        paths=path_count(study),
        months=study.horizon.months + 1,
        segments=len(study.segments),
        groups=groups,
        security_months=int(np.int64(last)) + 1,
    )


def refuse_too_large(study: Study, limit: int = MEMORY_LIMIT) -> None:
    """Raises StudyTooLarge with the arithmetic when a run would pass the memory limit."""
    size = sizes(study)
    if size.total > limit:
        raise StudyTooLarge(
            [
                LocatedError(
                    code="E120",
                    file="study.toml",
                    problem=f"the run would pass the memory limit of {limit / 1e6:,.0f} MB: {size.sentence()}",
                    remedy="use fewer paths, a shorter horizon or fewer securities",
                )
            ]
        )
