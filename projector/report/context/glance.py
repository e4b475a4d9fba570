"""Page 1: the verdict, three facts, the result by scenario, what would break it."""

from __future__ import annotations

from dataclasses import dataclass, field

from projector.report import cells, words
from projector.report.charts import result
from projector.report.context.reading import Reading, total
from projector.report.numbers import count_of, fixed, listed, percent
from projector.report.parts import Cell, Chart, Column, Row, Table, told
from projector.report.svg import finished
from projector.report.words import Outcome


@dataclass(frozen=True, kw_only=True)
class Fact:
    """One of three facts beside the verdict."""

    name: str = field(metadata=told("what it is"))
    text: str = field(metadata=told("the figure, with its unit"))
    where: str = field(metadata=told("where it stands in the report"))


@dataclass(frozen=True, kw_only=True)
class Glance:
    """Section 1."""

    verdict: str = field(metadata=told("met or not, where not, by how much"))
    criterion_head: str = field(metadata=told("where the criterion comes from and when it was fixed"))
    criterion: str = field(metadata=told("the study's own sentence"))
    segments: str = field(
        metadata=told("segments that do not meet the criterion's measure alone; empty when there are none")
    )
    shortfall: str = field(metadata=told("scenarios in which assets and borrowing ran out; empty when there are none"))
    prior: str = field(
        metadata=told("last year's additional reserve in the study's words; empty when the study states none")
    )
    facts: tuple[Fact, ...] = field(metadata=told("three facts"))
    table: Table = field(metadata=told("table 1.1"))
    chart: Chart = field(metadata=told("chart 1.1"))
    breaks: tuple[str, ...] = field(metadata=told("three lines, each with amount and table"))
    shown_of: str = field(metadata=told("says that not every scenario is shown; empty when all are"))


def glance(reading: Reading) -> Glance:
    """Section 1 from the results."""
    criterion = reading.study.criterion
    outcomes = [_outcome(reading, name) for name in reading.scenarios]
    return Glance(
        verdict=words.verdict(outcomes, criterion.scenarios_allowed_below, criterion.limit, reading.money),
        criterion_head=f"Criterion (study file, fixed on {criterion.fixed_on.isoformat()} before the results)",
        criterion=criterion.sentence,
        segments=_segments(reading),
        shortfall=_shortfall(reading),
        prior=reading.study.texts.prior_additional_reserve.strip(),
        facts=_facts(reading),
        table=_table(reading),
        chart=_chart(reading),
        breaks=(_lowest(reading), _calls(reading), _borrowing(reading)),
        shown_of=reading.shown_of,
    )


def _outcome(reading: Reading, name: str) -> Outcome:
    row = reading.measures(name)
    return Outcome(reading.scenario(name), float(row["criterion_value"]), bool(row["criterion_met"]))


def _segments(reading: Reading) -> str:
    if len(reading.segments) < 2:
        return ""
    parts = []
    for segment in reading.segments:
        below = [s for s in reading.scenarios if not reading.measures(s, segment)["criterion_met"]]
        if below:
            parts.append(f"{reading.segment(segment)} in {listed(below, 8)}")
    return f"Alone, not meeting the same measure: {'; '.join(parts)} (table {reading.segment_table})." if parts else ""


def _shortfall(reading: Reading) -> str:
    parts = []
    for name in reading.scenarios:
        for segment in reading.segments:
            month = int(reading.measures(name, segment)["first_shortfall_month"])
            if month >= 0:
                place = f"{reading.segment(segment)} in {reading.scenario(name)}"
                parts.append(f"{place} from month {fixed(month)} ({reading.month(month)})")
    if not parts:
        return ""
    apart = " No cash moves between segments; their surpluses are added." if len(reading.segments) > 1 else ""
    return f"Assets and borrowing ran out in {listed(parts)} (table 9.6).{apart}"


def _facts(reading: Reading) -> tuple[Fact, ...]:
    reserve = total(reading.opening[s]["reserve"] for s in reading.segments)
    identities = reading.results.identities
    hold = int(identities["holds"].sum())
    return (
        Fact(name="Reserves tested", text=reading.money.phrase(reserve),
             where=f"in {count_of(len(reading.segments), 'segment')}, table 3.2"),
        Fact(name="Random paths", text="none run", where="the criterion is deterministic, section 12"),
        Fact(name="Identities checked", text=f"{fixed(hold)} of {fixed(len(identities))} hold", where="table 15.1"),
    )  # fmt: skip


def _table(reading: Reading) -> Table:
    measure = reading.surplus_word
    columns = (
        Column(name="PV of ending surplus"),
        Column(name="Ending surplus"),
        Column(name="Lowest at a year end"),
        Column(name="In year"),
        Column(name="Callable par called", unit="%"),
        Column(name="Criterion", words=True),
    )
    return Table(
        number="1.1", caption="Result by scenario, all segments together",
        basis=f"{reading.money.unit}, before tax. PV: statement surplus discounted at net earned rates (M-3). Ending "
              f"and lowest: {measure}, undiscounted.",
        row_head="Scenario", why_missing="the results hold no such figure for the scenario", columns=columns,
        rows=tuple(Row(name=reading.scenario(s), own_words=True, cells=_cells(reading, s)) for s in reading.shown),
    )  # fmt: skip


def _cells(reading: Reading, name: str) -> tuple[Cell, ...]:
    row, money, key = reading.measures(name), reading.cell, f"/all/{name}"
    surplus = "M-2" if reading.on_market else "M-1"
    return (
        money(row["pv_ending_earned_rate"], f"measures.pv_ending_earned_rate{key}", "M-3"),
        money(row[reading.ending], f"measures.{reading.ending}{key}", surplus),
        money(row[reading.lowest], f"measures.{reading.lowest}{key}", "M-5"),
        cells.year(row[reading.lowest_year], f"measures.{reading.lowest_year}{key}", "M-5"),
        cells.share(
            row["stated_par_called"],
            row["stated_callable_par"],
            f"measures.stated_par_called%stated_callable_par{key}",
            "M-31",
            0,
        ),
        cells.word("met" if row["criterion_met"] else "not met", f"measures.criterion_met{key}"),
    )


def _chart(reading: Reading) -> Chart:
    names = [reading.scenario(s) for s in reading.shown]
    scale = reading.money.scale
    values = [float(reading.measures(s)["pv_ending_earned_rate"]) for s in reading.shown]
    lows = [float(reading.measures(s)[reading.lowest]) for s in reading.shown]
    endings = [float(reading.measures(s)[reading.ending]) for s in reading.scenarios]
    every_low = [float(reading.measures(s)[reading.lowest]) for s in reading.scenarios]
    title = words.title_result(endings, every_low, reading.surplus_word.capitalize(), reading.money)
    heads = ("PV of ending surplus", "Lowest surplus at a year end")
    drawn = result.draw(names, [v / scale for v in values], [v / scale for v in lows], heads)
    text = (
        "Two panels of dots on one scale, one row a scenario. Present value of ending surplus: "
        f"{_span(reading, values)}. Lowest surplus at a year end: {_span(reading, lows)}. Numbers: table 1.1."
    )
    return Chart(
        number="1.1", title=title, text=text, svg=finished(drawn, prefix="c11", title=title, text=text),
        subtitle=f"{reading.money.unit}, all segments; left discounted at net earned rates, right undiscounted",
    )  # fmt: skip


def _span(reading: Reading, values: list[float]) -> str:
    low, high = min(range(len(values)), key=values.__getitem__), max(range(len(values)), key=values.__getitem__)
    text = reading.money.text
    names = reading.shown
    if text(values[low]) == text(values[high]):
        return f"{text(values[low])} in every scenario shown"
    return f"from {text(values[low])} in {names[low]} to {text(values[high])} in {names[high]}"


def _lowest(reading: Reading) -> str:
    name = min(reading.scenarios, key=lambda s: float(reading.measures(s)[reading.lowest]))
    row = reading.measures(name)
    year = fixed(row[reading.lowest_year])
    return (
        f"Lowest {reading.surplus_word} at a year end: {reading.money.phrase(row[reading.lowest])} in "
        f"{reading.scenario(name)}, year {year} (table 9.1)."
    )


def _calls(reading: Reading) -> str:
    name = max(reading.scenarios, key=lambda s: float(reading.measures(s)["yield_given_up"]))
    row = reading.measures(name)
    if not row["par_called"]:
        return "Calls: no scenario in which calls give up yield (table 10.1)."
    callable_par = row["stated_callable_par"]
    called = percent(row["stated_par_called"] / callable_par, 0) if callable_par else "none"
    return (
        f"Calls: most yield given up in {reading.scenario(name)}, {reading.money.phrase(row['yield_given_up'])} "
        f"before discounting, with {called} of callable par called (table 10.1)."
    )


def _borrowing(reading: Reading) -> str:
    name = max(reading.scenarios, key=lambda s: float(reading.measures(s)["peak_borrowing"]))
    row = reading.measures(name)
    if reading.money.is_zero(row["peak_borrowing"]):
        return f"Cash: no borrowing in any scenario, {reading.money.phrase(0.0)} (table 9.6)."
    return (
        f"Cash: largest borrowing {reading.money.phrase(row['peak_borrowing'])} in {reading.scenario(name)}, par sold "
        f"{reading.money.phrase(row['par_sold'])} (table 9.6)."
    )
