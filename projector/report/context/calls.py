"""Section 10: who was called, when, why, at what cost."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, field, replace
from functools import cached_property

import pandas as pd

from projector.report import cells, words
from projector.report.context.call_charts import call_map, par_called
from projector.report.context.reading import Reading, total
from projector.report.numbers import as_date, count_of, fixed
from projector.report.parts import LARGEST_SHOWN, LONG_TABLE, Cell, Chart, Column, Row, Table, told
from projector.report.words import explained_call

NO_CALL = "not called"
DOUBLED, ANNOUNCED = "sinking payment doubled", "announced before"
DECIDED_BY = ("bound", "solve", "second grid", "third grid")


@dataclass(frozen=True, kw_only=True)
class Calls:
    """Section 10."""

    any_callable: bool = field(metadata=told("whether a callable security is held"))
    largest: Table = field(metadata=told("table 10.2"))
    given_up: Table = field(metadata=told("table 10.1"))
    explained: Table = field(metadata=told("table 10.4"))
    decided: Table = field(metadata=told("table 10.5"))
    other: Table = field(metadata=told("table 10.6"))
    par: Chart = field(metadata=told("chart 10.1"))
    map: Chart = field(metadata=told("chart 10.2"))
    sentences: tuple[str, ...] = field(metadata=told("three decisions in words"))
    shown_of: str = field(metadata=told("says that not every scenario is drawn; empty when all are"))


@dataclass(frozen=True)
class CallReading:
    """The calls of the results, by security and scenario."""

    reading: Reading

    @cached_property
    def securities(self) -> pd.DataFrame:
        """Callable securities, largest par first."""
        frame = self.reading.results.securities
        frame = frame[frame["security_id"].isin(self.reading.callable_ids)]
        return frame.sort_values(["par", "security_id"], ascending=[False, True], kind="stable")

    @cached_property
    def months(self) -> dict[tuple[str, str], int]:
        """Month of the first payment by security and scenario."""
        frame = self.reading.results.calls
        frame = frame[frame["right"] != DOUBLED]
        found: dict[tuple[str, str], int] = {}
        for security, scenario, month in zip(frame["security_id"], frame["scenario"], frame["month"], strict=True):
            key = str(security), str(scenario)
            found[key] = min(int(month), found.get(key, int(month)))
        return found

    def called(self, security: str, scenario: str) -> Cell:
        """The month called, or not called in grey."""
        month, key = self.months.get((security, scenario)), f"calls.month/{security}/{scenario}"
        if month is None:
            return cells.quiet(NO_CALL, key)
        return replace(cells.word(self.reading.month(month), key), formula="M-22")


def calls(reading: Reading) -> Calls:
    """Section 10 from the results."""
    found = CallReading(reading)
    chosen = _chosen(reading, found)
    return Calls(
        any_callable=bool(reading.callable_ids), largest=_largest(found), given_up=_given_up(found),
        explained=_explained(reading, chosen), decided=_decided(reading), other=_other(reading),
        map=call_map(reading, found.months), par=par_called(reading),
        sentences=tuple(_sentence(reading, *item) for item in chosen),
        shown_of=reading.shown_of,
    )  # fmt: skip


def _largest(found: CallReading) -> Table:
    return call_table(found, "10.2", f"The {fixed(LARGEST_SHOWN)} largest callable securities: month called by "
                                     "scenario",
                      LARGEST_SHOWN)  # fmt: skip


def call_table(found: CallReading, number: str, caption: str, at_most: int | None) -> Table:
    """Callable securities by par, with the month in which each is called in every scenario."""
    reading = found.reading
    frame = found.securities if at_most is None else found.securities.head(at_most)
    rows = []
    for bond in frame.to_dict("records"):
        name = str(bond["security_id"])
        first = as_date(bond["first_call_date"])
        rows.append(Row(name=name, own_words=True, cells=(
            reading.cell(float(bond["par"]), f"securities.par/{name}"),
            cells.yearly_rate(float(bond["coupon_rate"]), f"securities.coupon_rate/{name}"),
            cells.word(first.isoformat()[:7] if first else "none", f"securities.first_call_date/{name}"),
            *(found.called(name, scenario) for scenario in reading.scenarios),
        )))  # fmt: skip
    columns = (
        Column(name="Par"), Column(name="Coupon", unit="%"), Column(name="First call", words=True),
        *(Column(name=scenario, words=True) for scenario in reading.scenarios),
    )  # fmt: skip
    rows = rows or [
        Row(
            name="No callable security held",
            cells=tuple(cells.quiet("none", f"securities/none/{k}") for k in range(len(columns))),
        )
    ]
    rest = ""
    if len(rows) > LONG_TABLE:
        par = reading.money.phrase(total(frame["par"]))
        rest = f"All {fixed(len(rows))} lines are in the workbook, sheet {number}; their par is {par}."
    return Table(
        number=number, caption=caption, row_head="Security", columns=columns, rows=tuple(rows), most_columns=10,
        rest=rest,
        basis=f"Par in {reading.money.unit} at the valuation date, largest first. Months of payment on the scenario's "
              "path; model calls, not a forecast.",
    )  # fmt: skip


def _given_up(found: CallReading) -> Table:
    reading = found.reading
    rows = []
    for name in reading.scenarios:
        row, key = reading.measures(name), f"/all/{name}"
        count = sum(1 for _, scenario in found.months if scenario == name)
        rows.append(Row(name=reading.scenario(name), own_words=True, cells=(
            cells.count(count, f"calls.securities{key}", "M-31"),
            reading.cell(float(row["par_called"]), f"measures.par_called{key}", "M-31"),
            reading.cell(float(row["stated_par_called"]), f"measures.stated_par_called{key}", "M-31"),
            cells.share(
                row["stated_par_called"], row["stated_callable_par"],
                f"measures.stated_par_called%stated_callable_par{key}", "M-31",
            ),
            reading.cell(float(row["call_premium"]), f"measures.call_premium{key}", "M-31"),
            reading.cell(float(row["yield_given_up"]), f"measures.yield_given_up{key}", "M-12"),
            cells.word(words.effect_of_later_calls(row["yield_given_up"], reading.money), f"calls.later{key}"),
        )))  # fmt: skip
    first = reading.measures(reading.scenarios[0])
    callable_par = reading.money.phrase(first["stated_callable_par"])
    window_par = reading.money.phrase(float(first["callable_par"]) - float(first["stated_callable_par"]))
    return Table(
        number="10.1", caption="Par called and yield given up by scenario",
        basis=f"{reading.money.unit} over the horizon, undiscounted, all segments. Callable par: {callable_par} "
              f"at stated prices; beside it {window_par} in par calls of make-whole securities. "
              "Premium: paid to the holder above par. Yield given up (M-12): positive = income lost.",
        row_head="Scenario", rows=tuple(rows), why_missing="the results hold no such figure for the scenario",
        columns=(Column(name="Securities called"), Column(name="Par called"),
                 Column(name="Of it at stated prices"), Column(name="Of callable par", unit="%"),
                 Column(name="Premium"), Column(name="Yield given up"), Column(name="Later calls would", words=True)),
    )  # fmt: skip


def _other(reading: Reading) -> Table:
    """Par that left by a put, a doubled sinking payment, or a call announced before the valuation date."""
    calls, puts = reading.results.calls, reading.results.puts
    rows = []
    for name in reading.scenarios:
        called, put = calls[calls["scenario"] == name], puts[puts["scenario"] == name]
        doubled, before = (called.loc[called["right"] == right, "par_called"] for right in (DOUBLED, ANNOUNCED))
        rows.append(Row(name=reading.scenario(name), own_words=True, cells=(
            reading.cell(total(put["par_put"]), f"puts.par_put/all/{name}", "M-31"),
            reading.cell(total(put["received"]), f"puts.received/all/{name}", "M-31"),
            reading.cell(total(doubled), f"calls.par_called/doubled/{name}", "M-31"),
            reading.cell(total(before), f"calls.par_called/announced/{name}", "M-31"),
        )))  # fmt: skip
    return Table(
        number="10.6", caption="Par that left by other rights",
        basis=f"{reading.money.unit} over the horizon, all segments. Puts are the holder's decision: going on is worth "
              "at most the put price to him. Doubled: as much again as a sinking payment, retired at 100. Announced: "
              "called by the valuation date, paid after it; it stands in table 10.1 too, as doubled par does.",
        row_head="Scenario", rows=tuple(rows), why_missing="the results hold no such figure for the scenario",
        columns=(Column(name="Par put"), Column(name="Received for it"), Column(name="Sinking payments doubled"),
                 Column(name="Calls announced before")),
    )  # fmt: skip


Chosen = tuple[str, dict[str, object]]


def _chosen(reading: Reading, found: CallReading) -> list[Chosen]:
    """Three decisions picked by rule: the largest call solved, the nearest miss, the surest keep."""
    frame = reading.results.decisions
    par = dict(zip(reading.results.securities["security_id"], reading.results.securities["par"], strict=True))
    solved = frame[frame["continuation"].notna()]
    solved = solved.assign(
        par=solved["security_id"].map(par).fillna(0.0), gap=solved["bar"] - solved["continuation"].astype(float)
    )
    called, kept = solved[solved["called"].astype(bool)], solved[~solved["called"].astype(bool)]
    never = kept[
        [(str(i), str(s)) not in found.months for i, s in zip(kept["security_id"], kept["scenario"], strict=True)]
    ]
    picks: list[Chosen] = []
    for what, part, by in (
        ("called", called, ["par"]),
        ("nearly called", kept, ["gap"]),
        ("never called", never, ["par"]),
    ):
        if len(part):
            keys = [*by, "scenario", "month", "security_id"]
            order = part.sort_values(keys, ascending=[by == ["gap"], True, True, True], kind="stable")
            picks.append((what, {str(k): v for k, v in order.iloc[0].to_dict().items()}))
    return picks


def _sentence(reading: Reading, what: str, row: dict[str, object]) -> str:
    month = reading.month(float(str(row["month"])))
    continuation, bar = (fixed(float(str(row[name])), 4) for name in ("continuation", "bar"))
    text = explained_call(what, month, continuation, bar)
    return f"{row['security_id']}, {reading.scenario(str(row['scenario']))}, {what}. {text}"


def _explained(reading: Reading, chosen: list[Chosen]) -> Table:
    rows = []
    for what, row in chosen:
        security, scenario, month = str(row["security_id"]), str(row["scenario"]), int(float(str(row["month"])))
        key = f"/{security}/{scenario}/month {month}"
        rows.append(Row(name=f"{security}, {what}", own_words=True, cells=(
            cells.word(scenario, f"decisions.scenario{key}"), cells.word(reading.month(month), f"decisions.month{key}"),
            *(cells.per_100(float(str(row[name])), f"decisions.{name}{key}", formula)
              for name, formula in (("upper_bound", "M-20"), ("continuation", "M-20"), ("bar", "M-21"))),
            cells.word(str(row["decided_by"]), f"decisions.decided_by{key}"),
        )))  # fmt: skip
    none = tuple(cells.quiet("none", f"decisions/none/{k}") for k in range(6))
    return Table(
        number="10.4", caption="Decisions explained",
        basis="Per 100 of par, with accrued interest. Month of the decision; where notice is due the payment follows "
              "and the bar is seen from the decision. Upper bound: cost of the best policy fixed in advance. The "
              "largest solved call, the kept decision nearest to its bar, and the largest security never called, by "
              "rule.",
        row_head="Security", rows=tuple(rows) or (Row(name="No decision to explain", cells=none),),
        why_missing="the bound settled the decision",
        columns=(Column(name="Scenario", words=True), Column(name="Month", words=True),
                 Column(name="Upper bound", unit="per 100"), Column(name="Continuation", unit="per 100"),
                 Column(name="Bar", unit="per 100"), Column(name="Decided by", words=True)),
    )  # fmt: skip


def _decided(reading: Reading) -> Table:
    frame = reading.results.decisions
    found = Counter(zip(frame["scenario"].astype(str), frame["decided_by"].astype(str), strict=True))
    called = frame.groupby("scenario", sort=False)["called"].sum()
    rows = []
    for name in reading.scenarios:
        made = tuple(cells.count(found[name, how], f"decisions.count/{how}/{name}", "M-31") for how in DECIDED_BY)
        calls_made = int(called.get(name, 0))
        rows.append(Row(name=reading.scenario(name), own_words=True, cells=(
            *made, cells.count(calls_made, f"decisions.called/{name}", "M-22"))))  # fmt: skip
    return Table(
        number="10.5", caption="How decisions were settled",
        basis="Count of decisions, one for each security, month with a right and scenario, until "
              "called.", row_head="Scenario",
        columns=(*(Column(name=how.capitalize()) for how in DECIDED_BY), Column(name="Called")),
        rows=tuple(rows),
    )  # fmt: skip


def callable_count(reading: Reading) -> str:
    """How many securities can be called, in words."""
    return count_of(len(reading.callable_ids), "callable security", "callable securities")
