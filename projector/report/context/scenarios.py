"""Section 6: what futures were tried."""

from __future__ import annotations

from dataclasses import dataclass, field

from projector.report import cells, words
from projector.report.charts import paths
from projector.report.charts.paths import RatePanel
from projector.report.context.reading import Reading
from projector.report.numbers import count_of, fixed, percent
from projector.report.parts import Chart, Column, Row, Table, told
from projector.report.svg import finished
from projector.study.records import PathSource

YEARS = (0, 1, 5, 10, 20, 30)
LONG, SHORT = 120, 12  # tenors drawn, where quoted [months]
KINDS = {
    "seven_deterministic": "the seven deterministic scenarios", "shift_table": "a table of shifts",
    "history": "replayed history", "imported": "imported paths",
}  # fmt: skip
WORDS = {
    "none": "no floor", "shift": "floor on the parallel shift: the five-year yield keeps half its starting level",
    "every_tenor": "floor on every tenor: each keeps half its starting level",
    "year_end_steps": "steps at year ends", "linear": "straight line within the year",
    "cut": "recovery of the unfloored path, cut at the floor", "from_floor": "recovery starts from the floor",
    "changes": "changes of the history added to the starting curve", "levels": "levels of the history",
}  # fmt: skip


@dataclass(frozen=True, kw_only=True)
class Scenarios:
    """Section 6."""

    long: Table = field(metadata=told("table 6.1"))
    short: Table = field(metadata=told("table 6.2"))
    curve: Table = field(metadata=told("table 6.3"))
    chart: Chart = field(metadata=told("chart 6.1"))
    sources: tuple[str, ...] = field(metadata=told("each source of paths and how it was read"))
    start_source: str = field(metadata=told("source of the starting curve, in the study's words"))
    basis: str = field(metadata=told("rate basis"))
    shown_of: str = field(metadata=told("says that not every scenario is drawn; empty when all are"))


def scenarios(reading: Reading) -> Scenarios:
    """Section 6 from the results."""
    rates = reading.study.rates
    origin = rates.origin
    return Scenarios(
        long=_table(reading, "6.1", _tenor(reading, LONG)), short=_table(reading, "6.2", _tenor(reading, SHORT)),
        curve=_curve(reading), chart=_chart(reading),
        sources=tuple(_source(kind) for kind in rates.paths),
        start_source=f"{origin.source} ({origin.as_of}). {origin.rationale}",
        basis="par yields, bond-equivalent; tenors under half a year are simple yields" if rates.rate_basis == "par"
        else "zero yields, bond-equivalent",
        shown_of=reading.shown_of,
    )  # fmt: skip


def _source(source: PathSource) -> str:
    named = (source.floor, source.within_year, source.recovery, source.replay)
    parts = [WORDS.get(value, value) for value in named if value]
    kind = KINDS.get(source.kind, source.kind)
    return f"{kind}: {'; '.join(parts)}" if parts else kind


def _tenor(reading: Reading, wanted: int) -> int:
    quoted = {int(t) for t in reading.results.rates["tenor_months"].unique()}
    return min(quoted, key=lambda t: (abs(t - wanted), t))


def _tenor_name(tenor: int) -> str:
    return f"{tenor // 12}-year" if tenor % 12 == 0 else f"{tenor}-month"


def _yields(reading: Reading, tenor: int) -> dict[tuple[str, int], float]:
    """Yield by scenario and month; month 0 is the starting curve where the paths do not repeat it."""
    frame = reading.results.rates
    part = frame[frame["tenor_months"] == tenor]
    found = {(str(s), int(m)): float(r) for s, m, r in zip(part["scenario"], part["month"], part["rate"], strict=True)}
    curve = reading.study.tables.yield_curve
    start = curve.loc[curve["tenor_months"] == tenor, "rate"]
    for name in reading.scenarios:
        if (name, 0) not in found and len(start):
            found[name, 0] = float(start.iloc[0])
    return found


def _table(reading: Reading, number: str, tenor: int) -> Table:
    found = _yields(reading, tenor)
    years = [year for year in YEARS if year <= reading.horizon_years]
    rows = tuple(
        Row(name=reading.scenario(name), own_words=True, cells=tuple(
            cells.yearly_rate(found.get((name, 12 * year), float("nan")), f"rates.rate/{tenor} months/{name}/year "
                                                                          f"{year}", "M-18")
            for year in years))
        for name in reading.scenarios
    )  # fmt: skip
    return Table(
        number=number, caption=f"{_tenor_name(tenor)} Treasury yield by scenario",
        basis="% a year on the study's rate basis, at month 0 and at year ends; an immediate shift shows from year 1.",
        row_head="Scenario", columns=tuple(Column(name=f"Year {year}", unit="%") for year in years), rows=rows,
        why_missing="the paths do not quote the tenor at that date",
    )  # fmt: skip


def _curve(reading: Reading) -> Table:
    curve = reading.study.tables.yield_curve
    rows = tuple(
        Row(name=_tenor_name(int(tenor)), cells=(cells.yearly_rate(float(rate), f"yield_curve.rate/{int(tenor)} "
                                                                                "months"),))
        for tenor, rate in zip(curve["tenor_months"], curve["rate"], strict=True)
    )  # fmt: skip
    return Table(
        number="6.3", caption="Starting curve, the same for every scenario",
        basis="% a year on the study's rate basis, at the valuation date; from the study's table.",
        row_head="Tenor", columns=(Column(name="Yield", unit="%"),), rows=rows,
    )  # fmt: skip


def _chart(reading: Reading) -> Chart:
    long, short = _tenor(reading, LONG), _tenor(reading, SHORT)
    by_long, by_short = _yields(reading, long), _yields(reading, short)
    months = sorted({month for _, month in by_long} & {month for _, month in by_short})
    panels = []
    for name in reading.shown:
        of_long = tuple(100 * by_long[name, month] for month in months)
        of_short = tuple(100 * by_short[name, month] for month in months)
        line = f"{percent(of_long[0] / 100, 2)}, end {percent(of_long[-1] / 100, 2)}"
        panels.append(RatePanel(reading.scenario(name), line, of_long, of_short))
    title = words.title_rates([by_long[name, months[-1]] for name in reading.scenarios])
    tabled = [12 * year for year in YEARS if 12 * year in months]
    lows = {name: min(by_long[name, month] for month in tabled) for name in reading.scenarios}
    lowest = min(lows, key=lows.__getitem__)
    text = (
        f"{count_of(len(panels), 'line chart')} on one scale. The {_tenor_name(long)} yield starts at "
        f"{percent(by_long[reading.scenarios[0], months[0]], 2)} everywhere and is lowest in {lowest}, at "
        f"{percent(lows[lowest], 2)}. The {_tenor_name(short)} yield is dashed. Numbers: tables 6.1 and 6.2."
    )
    drawn = paths.draw_rates(panels, [m / 12 for m in months], _tenor_name(long), _tenor_name(short))
    return Chart(
        number="6.1", title=title, text=text, svg=finished(drawn, prefix="c61", title=title, text=text),
        subtitle=f"% a year; {_tenor_name(long)} yield solid, {_tenor_name(short)} dashed, years 0 to "
                 f"{fixed(reading.horizon_years)}",
    )  # fmt: skip
