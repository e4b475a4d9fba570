"""One reading of the results: names, units and picks that every section shares. Nothing is computed but sums."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import pandas as pd

from projector.report import numbers
from projector.report.cells import MoneyCells
from projector.report.numbers import Money
from projector.run.results import ALL_SEGMENTS, RunResults
from projector.study.records import Study

MOST_SCENARIOS = 8  # shown by name on page 1 and in the charts; all of them stand in the tables
SHOWN_OF_MANY = 7
LONGEST_IN_TEXT = 40  # rows of measures; longer tables leave the segments to the appendix
MIX_YEARS = (0, 5, 10, 20, 30, 40)


def total(values: Iterable[float]) -> float:
    """The sum of full values, the same in any order."""
    return math.fsum(float(value) for value in values)


@dataclass(frozen=True)
class Reading:
    """The results with their names and units; every section is built from it."""

    results: RunResults

    @property
    def study(self) -> Study:
        """The study asked."""
        return self.results.study

    @cached_property
    def money(self) -> Money:
        """The report's unit of money, by the size of the reserves."""
        return numbers.money_for(self.study.currency, total(self.opening[s]["reserve"] for s in self.segments))

    @cached_property
    def cell(self) -> MoneyCells:
        """The maker of money cells."""
        return MoneyCells(self.money)

    @cached_property
    def scenarios(self) -> tuple[str, ...]:
        """Scenario identifiers in the study's order."""
        return tuple(str(name) for name in self.results.scenarios["scenario"])

    @cached_property
    def _titles(self) -> dict[str, str]:
        frame = self.results.scenarios
        return {str(name): numbers.clean(str(title)) for name, title in zip(frame["scenario"], frame["title"])}

    def scenario(self, name: str) -> str:
        """How a scenario is always written: S7 Pop down."""
        title = self._titles[name]
        return name if title in ("", name) else f"{name} {title}"

    @cached_property
    def segments(self) -> tuple[str, ...]:
        """Segment identifiers in the study's order."""
        return tuple(segment.name for segment in self.study.segments)

    def segment(self, name: str) -> str:
        """A segment's title; All segments for the aggregate."""
        if name == ALL_SEGMENTS:
            return "All segments"
        return next((numbers.clean(s.title or s.name) for s in self.study.segments if s.name == name), name)

    @cached_property
    def segment_order(self) -> tuple[str, ...]:
        """The aggregate first; alone when there is one segment, because it is the aggregate."""
        return (ALL_SEGMENTS, *self.segments) if len(self.segments) > 1 else (ALL_SEGMENTS,)

    @cached_property
    def _measures(self) -> dict[tuple[str, str], dict[str, Any]]:
        records = self.results.measures.to_dict("records")
        return {(str(row["scenario"]), str(row["segment"])): {str(k): v for k, v in row.items()} for row in records}

    def measures(self, scenario: str, segment: str = ALL_SEGMENTS) -> dict[str, Any]:
        """The row of measures of one scenario and segment."""
        return self._measures[scenario, segment]

    @property
    def segments_apart(self) -> bool:
        """Whether the lines of the segments are too many for the text and stand in the appendix."""
        return len(self.segment_order) * len(self.scenarios) > LONGEST_IN_TEXT

    @property
    def segment_table(self) -> str:
        """The table that lists surplus by scenario and segment."""
        return "A.4" if self.segments_apart else "9.1"

    @cached_property
    def on_market(self) -> bool:
        """Whether the criterion reads market surplus; tables of page 1 and the surplus charts follow it."""
        return self.study.criterion.measure == "market_surplus"

    @property
    def surplus_word(self) -> str:
        """The criterion's measure in words."""
        return "market surplus" if self.on_market else "statement surplus"

    @property
    def lowest(self) -> str:
        """The column with the lowest of the criterion's measure."""
        return "lowest_market_surplus" if self.on_market else "lowest_statement_surplus"

    @property
    def lowest_year(self) -> str:
        """The column with its year end."""
        return "lowest_market_year" if self.on_market else "lowest_statement_year"

    @property
    def ending(self) -> str:
        """The column with the criterion's measure at the horizon."""
        return "ending_market_surplus" if self.on_market else "ending_statement_surplus"

    @cached_property
    def shown(self) -> tuple[str, ...]:
        """Scenarios named on page 1 and in charts: all up to eight, else the seven with the lowest criterion value."""
        if len(self.scenarios) <= MOST_SCENARIOS:
            return self.scenarios
        by_value = sorted(self.scenarios, key=lambda name: float(self.measures(name)["criterion_value"]))
        chosen = set(by_value[:SHOWN_OF_MANY])
        return tuple(name for name in self.scenarios if name in chosen)

    @property
    def shown_of(self) -> str:
        """The sentence that says that not every scenario is shown; empty when all are."""
        if len(self.shown) == len(self.scenarios):
            return ""
        return (
            f"The {numbers.fixed(len(self.shown))} scenarios with the lowest criterion values are shown; all "
            f"{numbers.fixed(len(self.scenarios))} are in table 9.1."
        )

    @cached_property
    def year_ends(self) -> pd.DataFrame:
        """The balance at month 0 and the year ends."""
        balance = self.results.balance
        return balance[balance["month"] % 12 == 0]

    @cached_property
    def opening(self) -> dict[str, dict[str, float]]:
        """The balance at month 0 of the first scenario, by segment: the same in all of them."""
        balance = self.results.balance
        rows = balance[(balance["month"] == 0) & (balance["scenario"] == self.scenarios[0])]
        return {str(row["segment"]): {str(k): v for k, v in row.items()} for row in rows.to_dict("records")}

    def by_year(self, column: str, scenario: str, segment: str = ALL_SEGMENTS) -> list[float]:
        """A balance column at month 0 and every year end, in order."""
        frame = self._ends[scenario, segment]
        return [float(value) for value in frame[column]]

    @cached_property
    def _ends(self) -> dict[tuple[str, str], pd.DataFrame]:
        groups = self.year_ends.sort_values("month").groupby(["scenario", "segment"], sort=False, observed=True)
        return {(str(a), str(b)): frame for (a, b), frame in groups}

    @property
    def horizon_years(self) -> int:
        """Years projected."""
        return self.study.horizon.months // 12

    def month(self, months: float) -> str:
        """A month after the valuation date as YYYY-MM."""
        return numbers.month_label(self.study.valuation_date, int(months))

    @cached_property
    def callable_ids(self) -> tuple[str, ...]:
        """Securities with a right at a stated price, make-whole with a par call included."""
        frame = self.results.securities
        return tuple(
            str(i) for i, day in zip(frame["security_id"], frame["first_call_date"]) if numbers.as_date(day) is not None
        )


LETTERS = ("AAA", "AA", "A", "BBB", "BB", "B", "CCC", "CC", "C", "D")


def credit_order(rating: str) -> tuple[int, int, str]:
    """Best first: AAA, AA+, AA, AA-, A+, ...; names of another kind at the end."""
    letters = rating.rstrip("+-")
    grade = LETTERS.index(letters) if letters in LETTERS else len(LETTERS)
    return grade, {"+": 0, "-": 2}.get(rating[-1:], 1), rating
