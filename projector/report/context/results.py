"""Section 9: what happened year by year, in each scenario and segment."""

from __future__ import annotations

from dataclasses import dataclass, field

from projector.report import cells, words
from projector.report.charts import mix as mix_chart
from projector.report.charts import paths
from projector.report.charts.mix import MixPanel
from projector.report.charts.paths import SurplusPanel
from projector.report.context import measures
from projector.report.context.reading import MIX_YEARS, Reading, total
from projector.report.numbers import count_of, fixed, listed, percent
from projector.report.parts import Cell, Chart, Column, Row, Table, told
from projector.report.svg import finished
from projector.run.results import ALL_SEGMENTS

CHART_YEARS = (0, 5, 10, 20, 30)
CALLABLE_SHOWN_AT = 10  # the year named in the title of the mix chart
KINDS = ("held, callable", "held, not callable", "bought", "cash")


@dataclass(frozen=True, kw_only=True)
class Results:
    """Section 9."""

    surplus: Table = field(metadata=told("table 9.1"))
    by_year: Table = field(metadata=told("table 9.2"))
    reserve: Table = field(metadata=told("table 9.3"))
    mix: Table = field(metadata=told("table 9.4"))
    gaps: Table = field(metadata=told("table 9.5"))
    cash: Table = field(metadata=told("table 9.6"))
    classes: Table = field(metadata=told("table 9.7"))
    chart: Chart = field(metadata=told("chart 9.1"))
    mix_chart: Chart = field(metadata=told("chart 9.2"))
    lows: tuple[str, ...] = field(metadata=told("each scenario that is below zero on the way or at the end"))
    measure: str = field(metadata=told("the criterion's measure in words"))
    level: str = field(metadata=told("the scenario of table 9.7"))
    single: bool = field(metadata=told("one segment only, so no aggregation"))
    shown_of: str = field(metadata=told("says that not every scenario is drawn; empty when all are"))


def results(reading: Reading) -> Results:
    """Section 9 from the results."""
    (surplus, gaps, cash), _ = measures.tables(reading)
    shares = _shares(reading)
    return Results(
        surplus=surplus, gaps=gaps, cash=cash, by_year=by_year(reading, "9.2", ALL_SEGMENTS), reserve=_reserve(reading),
        mix=_mix(reading, shares), classes=_classes(reading), chart=_chart(reading),
        mix_chart=_mix_chart(reading, shares),
        lows=_lows(reading), measure=reading.surplus_word, level=reading.scenario(reading.scenarios[0]),
        single=len(reading.segments) == 1, shown_of=reading.shown_of,
    )  # fmt: skip


def by_year(reading: Reading, number: str, segment: str) -> Table:
    """The criterion's surplus at month 0 and every year end, one column a scenario."""
    column = "market_surplus" if reading.on_market else "statement_surplus"
    formula = "M-2" if reading.on_market else "M-1"
    series = {name: reading.by_year(column, name, segment) for name in reading.scenarios}
    rows = tuple(
        Row(name=f"Year {fixed(year)}", cells=tuple(
            reading.cell(series[name][year], f"balance.{column}/{segment}/{name}/year {year}", formula)
            for name in reading.scenarios))
        for year in range(reading.horizon_years + 1)
    )  # fmt: skip
    return Table(
        number=number, caption=f"{reading.surplus_word.capitalize()} by year end, {reading.segment(segment)}",
        basis=f"{reading.money.unit}, undiscounted, before tax; year 0 is the valuation date.", row_head="Year end",
        columns=tuple(Column(name=reading.scenario(name)) for name in reading.scenarios), rows=rows,
        why_missing="no market value is calculated at that date",
    )  # fmt: skip


def _reserve(reading: Reading) -> Table:
    key = "additional_reserve"
    prior = reading.study.texts.prior_additional_reserve
    rows = (
        Row(
            name="Additional reserve that meets the criterion",
            cells=(cells.quiet("Not calculated in this version", key),),
        ),
        Row(
            name="Re-test with the reserve held",
            cells=(cells.quiet("Not calculated in this version", f"{key}/re-test"),),
        ),
        Row(name="Last year, as the study states it", cells=(cells.said(prior, f"{key}/prior"),)),
    )
    return Table(
        number="9.3", caption="Additional reserve and re-test",
        basis=f"{reading.money.unit} at the valuation date, positive = to be added to reserves.", row_head="Line",
        columns=(Column(name="Amount", words=True),), rows=rows,
    )  # fmt: skip


def _shares(reading: Reading) -> dict[tuple[str, int], list[float]]:
    """Statement value by scenario and year: held callable, held not callable, bought, cash."""
    frame = reading.results.mix
    frame = frame[frame["segment"] == ALL_SEGMENTS]
    found: dict[tuple[str, int], list[list[float]]] = {}
    for scenario, year, name, can, value in zip(
        frame["scenario"], frame["year"], frame["asset_class"], frame["callable"], frame["statement_value"], strict=True
    ):
        kind = 3 if name == "cash" else 2 if str(name).startswith("bought") else 0 if can else 1
        found.setdefault((str(scenario), int(year)), [[], [], [], []])[kind].append(float(value))
    return {key: [total(values) for values in kinds] for key, kinds in found.items()}


def _mix(reading: Reading, shares: dict[tuple[str, int], list[float]]) -> Table:
    first = reading.scenarios[0]
    keys = [(first, 0)] + [(name, year) for name in reading.scenarios for year in CHART_YEARS if year]
    rows = []
    for name, year in keys:
        if (name, year) not in shares:
            continue
        values, key = shares[name, year], f"mix.statement_value/all/{name}/year {year}"
        whole = total(values)
        made: tuple[Cell, ...] = tuple(
            cells.share(value, whole, f"{key}/{kind}%", "M-31") for value, kind in zip(values, KINDS, strict=True)
        )
        label = "All scenarios, year 0" if year == 0 else f"{reading.scenario(name)}, year {fixed(year)}"
        rows.append(Row(name=label, own_words=True, cells=(*made, reading.cell(whole, f"{key}/all", "M-31"))))
    return Table(
        number="9.4", caption="Asset mix at stated years, all segments",
        basis=f"% of statement value and cash; last column in {reading.money.unit}. Held = starting holdings left; "
              "bought = purchases of the projection, none of them callable. Callable: at stated prices.",
        row_head="Scenario, year", rows=tuple(rows),
        columns=(*(Column(name=kind.capitalize(), unit="%") for kind in KINDS), Column(name="Total")),
    )  # fmt: skip


def _classes(reading: Reading) -> Table:
    frame = reading.results.mix
    first = reading.scenarios[0]
    frame = frame[(frame["segment"] == ALL_SEGMENTS) & (frame["scenario"] == first)]
    years = [year for year in MIX_YEARS if (frame["year"] == year).any()]
    keys = sorted(
        {(str(n), bool(c)) for n, c in zip(frame["asset_class"], frame["callable"], strict=True)}, key=_class_key
    )
    values = {
        (str(n), bool(c), int(y)): float(v)
        for n, c, y, v in zip(
            frame["asset_class"], frame["callable"], frame["year"], frame["statement_value"], strict=True
        )
    }
    rows = [
        Row(name=f"{name}, callable" if can else name, own_words=True, cells=tuple(
            reading.cell(values.get((name, can, year), 0.0), f"mix.statement_value/all/{first}/year "
                                                             f"{year}/{name}/{can}", "M-14")
            for year in years))
        for name, can in keys
    ]  # fmt: skip
    whole = tuple(
        reading.cell(total(values.get((n, c, year), 0.0) for n, c in keys), f"mix.statement_value/all/{first}/year "
                                                                            f"{year}", "M-31")
        for year in years)  # fmt: skip
    return Table(
        number="9.7", caption=f"Assets by class, {reading.scenario(first)}",
        basis=f"Statement value in {reading.money.unit}, all segments, at the year ends named.", row_head="Class",
        columns=tuple(Column(name=f"Year {year}", adds=True) for year in years),
        rows=(*rows, Row(name="Total", total=True, cells=whole)),
    )  # fmt: skip


def _class_key(key: tuple[str, bool]) -> tuple[int, str, bool]:
    name, can = key
    return (2 if name == "cash" else 1 if name.startswith("bought") else 0, name, not can)


def _lows(reading: Reading) -> tuple[str, ...]:
    lines = []
    for name in reading.scenarios:
        row = reading.measures(name)
        low = float(row[reading.lowest])
        if not reading.money.is_negative(low):
            continue
        borrowed = (reading.results.balance["scenario"] == name) & (reading.results.balance["segment"] == ALL_SEGMENTS)
        months = int((reading.results.balance.loc[borrowed, "borrowing"] > 0).sum())
        lines.append(
            f"{reading.scenario(name)}: lowest {reading.money.phrase(low)} in year {fixed(row[reading.lowest_year])}; "
            f"{count_of(months, 'month')} with borrowing; {reading.money.phrase(row['par_called'])} of par called "
            "over the horizon."
        )
    return tuple(lines)


def _chart(reading: Reading) -> Chart:
    column = "market_surplus" if reading.on_market else "statement_surplus"
    money, panels = reading.money, []
    for name in reading.shown:
        row = reading.measures(name)
        label = words.low_label(row[reading.lowest], int(row[reading.lowest_year]), row[reading.ending], money)
        values = tuple(value / money.scale for value in reading.by_year(column, name))
        panels.append(SurplusPanel(reading.scenario(name), label, values))
    lows = [(name, float(reading.measures(name)[reading.lowest])) for name in reading.scenarios]
    title = words.title_surplus([low for _, low in lows], reading.surplus_word.capitalize(), money)
    below = sorted((pair for pair in lows if money.is_negative(pair[1])), key=lambda pair: pair[1])
    named = listed(
        [f"{n} {money.text(low)} in year {fixed(reading.measures(n)[reading.lowest_year])}" for n, low in below]
    )
    said = f"Lowest points below zero: {named}" if below else "No scenario is below zero at a year end"
    text = f"{count_of(len(panels), 'line chart')} of {reading.surplus_word} on one scale. {said}. Numbers: table 9.2."
    drawn = paths.draw_surplus(panels, money.unit, "below zero")
    return Chart(
        number="9.1", title=title, text=text, svg=finished(drawn, prefix="c91", title=title, text=text),
        subtitle=f"{money.unit}, {reading.surplus_word} at year ends, all segments, undiscounted, before tax",
    )  # fmt: skip


def _mix_chart(reading: Reading, shares: dict[tuple[str, int], list[float]]) -> Chart:
    years = [year for year in CHART_YEARS if all((name, year) in shares for name in reading.shown)]
    panels = []
    for name in reading.shown:
        parts = tuple(_percentages(shares[name, year]) for year in years)
        panels.append(
            MixPanel(
                reading.scenario(name), f"total at end {reading.money.text(total(shares[name, years[-1]]))}", parts
            )
        )
    at = CALLABLE_SHOWN_AT if CALLABLE_SHOWN_AT in years else years[-1]
    later = [_percentages(shares[name, at])[0] / 100 for name in reading.scenarios if (name, at) in shares]
    opening = _percentages(shares[reading.scenarios[0], years[0]])[0] / 100
    title = words.title_mix(opening, later, at)
    text = (
        f"Stacked columns of shares at years {listed([fixed(y) for y in years], 9)}, callable holdings at the bottom: "
        f"{percent(opening, 0)} at the start, {percent(min(later), 0)} to {percent(max(later), 0)} in year "
        f"{fixed(at)} by scenario. Numbers: table 9.4."
    )
    return Chart(
        number="9.2", title=title, text=text, subtitle="% of statement value and cash, all segments, at the years "
                                                       "named",
        svg=finished(mix_chart.draw(panels, years), prefix="c92", title=title, text=text),
    )  # fmt: skip


def _percentages(values: list[float]) -> tuple[float, ...]:
    whole = total(values)
    return tuple(100 * value / whole if whole else 0.0 for value in values)
