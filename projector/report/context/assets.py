"""Section 4: what backs the reserves, and who can take it away early."""

from __future__ import annotations

from dataclasses import dataclass, field
from datetime import date

import pandas as pd

from projector.report import cells, words
from projector.report.charts import holdings
from projector.report.charts.holdings import Ladder
from projector.report.context.reading import Reading, credit_order, total
from projector.report.numbers import as_date, count_of, fixed, share, years_between
from projector.report.parts import Cell, Chart, Column, Row, Table, rows_with_total, told
from projector.report.svg import finished

BOUNDS = (1, 2, 3, 5, 7, 10, 15, 20, 30)
CALLABLE_WITHIN = (1, 3, 5)
SPREAD_FROM = {
    "price": "from the market price",
    "given": "stated by the study",
    "rating_spread": "class spread, fallback",
}


@dataclass(frozen=True, kw_only=True)
class Assets:
    """Section 4."""

    by_class: Table = field(metadata=told("table 4.1"))
    by_rating: Table = field(metadata=told("table 4.2"))
    spreads: Table = field(metadata=told("table 4.3"))
    ladder: Table = field(metadata=told("table 4.4"))
    chart: Chart = field(metadata=told("chart 4.1"))
    callable_text: str = field(metadata=told("share of par callable within one, three and five years"))
    mapping_text: str = field(metadata=told("what placing payments at month ends does to accrued interest and spreads"))


def assets(reading: Reading) -> Assets:
    """Section 4 from the results."""
    frame = _with_years(reading)
    return Assets(
        by_class=_by_class(reading, frame), by_rating=_by_rating(reading, frame), spreads=_spreads(reading, frame),
        ladder=_ladder_table(reading, frame), chart=_chart(reading, frame), callable_text=_callable_text(frame),
        mapping_text=_mapping_text(reading),
    )  # fmt: skip


def _with_years(reading: Reading) -> pd.DataFrame:
    """The securities with years to maturity and to the first stated price, and their kind of callability."""
    frame, start = reading.results.securities, reading.study.valuation_date
    return frame.assign(
        to_maturity=[_years(start, value) for value in frame["maturity_date"]],
        to_call=[_years(start, value) for value in frame["first_call_date"]],
        kind=[_kind(str(form), as_date(day)) for form, day in zip(frame["call_form"], frame["first_call_date"])],
    )


def _years(start: date, value: object) -> float:
    day = as_date(value)
    return years_between(start, day) if day else float("nan")


def _kind(form: str, first: date | None) -> str:
    if first is None:
        return "fixed"
    return "make_whole" if form == "make_whole" else "stated"


def _by_class(reading: Reading, frame: pd.DataFrame) -> Table:
    groups = [(str(name), part) for name, part in frame.groupby("asset_class", sort=True, observed=True)]
    rows = [
        Row(name=name, own_words=True, cells=_class_cells(reading, part, f"asset_class={name}"))
        for name, part in groups
    ]
    whole = Row(name="Total", total=True, cells=_class_cells(reading, frame, "all"))
    adds = ("Securities", "Par", "Statement value", "Market value", "Accrued", "Callable par")
    return Table(
        number="4.1", caption="Holdings by asset class",
        basis=f"{reading.money.unit} at the valuation date; market value = clean price × par, without accrued. Book "
              "yields: lowest and highest of the class, before default cost (table 4.2) and investment expense "
              "(table 8.1).",
        row_head="Asset class", rows=rows_with_total(rows, whole), why_missing="no security of the class has the "
                                                                               "figure",
        columns=(*(Column(name=name, adds=True) for name in adds),
                 Column(name="Book yield, lowest", unit="%"), Column(name="Book yield, highest", unit="%")),
    )  # fmt: skip


def _class_cells(reading: Reading, part: pd.DataFrame, key: str) -> tuple[Cell, ...]:
    def summed(column: str, formula: str, where: pd.DataFrame = part) -> Cell:
        return reading.cell(total(where[column]), f"securities.{column}/{key}", formula)

    can = part[part["kind"] == "stated"]
    callable_par = reading.cell(total(can["par"]), f"securities.callable_par/{key}", "M-31")
    yields = part["book_yield"].dropna()
    ends = [float(yields.min()), float(yields.max())] if len(yields) else [float("nan")] * 2
    return (
        cells.count(len(part), f"securities.count/{key}", "M-31"), summed("par", "M-31"),
        summed("statement_value", "M-14"), summed("market_value", "M-31"), summed("accrued", "M-17"), callable_par,
        cells.yearly_rate(ends[0], f"securities.book_yield.lowest/{key}", "M-15"),
        cells.yearly_rate(ends[1], f"securities.book_yield.highest/{key}", "M-15"),
    )  # fmt: skip


def _by_rating(reading: Reading, frame: pd.DataFrame) -> Table:
    costs = reading.study.tables.default_costs.set_index("rating")
    net = reading.study.defaults.form == "net_annual_cost"
    heads = (("annual_cost", "Net default cost"),) if net else (
        ("annual_rate", "Default rate"), ("recovery", "Recovery"))  # fmt: skip
    order = sorted(set(frame["rating"].astype(str)), key=credit_order)
    rows = []
    for rating in order:
        part, key = frame[frame["rating"] == rating], f"rating={rating}"
        picked = tuple(
            cells.yearly_rate(_figure(costs, rating, column), f"default_costs.{column}/{rating}", "M-27")
            for column, _ in heads
        )
        rows.append(Row(name=rating, cells=(*_rating_cells(reading, part, key, frame), *picked)))
    return Table(
        number="4.2", caption="Holdings by rating, with the default cost assumed",
        basis=f"{reading.money.unit} at the valuation date; default cost in % a year (M-27), from the study's table. "
              "Share: part of total statement value.",
        row_head="Rating", rows=tuple(rows), why_missing="the study's table has no such rating",
        columns=(Column(name="Securities"), Column(name="Par"), Column(name="Statement value"),
                 Column(name="Market value"), Column(name="Share", unit="%"),
                 *(Column(name=head, unit="%") for _, head in heads)),
    )  # fmt: skip


def _figure(costs: pd.DataFrame, rating: str, column: str) -> float:
    return float(costs[column].to_dict()[rating]) if rating in costs.index else float("nan")


def _rating_cells(reading: Reading, part: pd.DataFrame, key: str, whole: pd.DataFrame) -> tuple[Cell, ...]:
    value = total(part["statement_value"])
    return (
        cells.count(len(part), f"securities.count/{key}", "M-31"),
        reading.cell(total(part["par"]), f"securities.par/{key}", "M-31"),
        reading.cell(value, f"securities.statement_value/{key}", "M-14"),
        reading.cell(total(part["market_value"]), f"securities.market_value/{key}", "M-31"),
        cells.share(value, total(whole["statement_value"]), f"securities.statement_value%/{key}", "M-31"),
    )


def _spreads(reading: Reading, frame: pd.DataFrame) -> Table:
    rows = []
    for code, name in SPREAD_FROM.items():
        part, key = frame[frame["spread_from"] == code], f"spread_from={code}"
        gaps = (part["model_price"] - part["clean_price"]).abs()
        widest = float(gaps.max()) if len(gaps) else float("nan")
        spread = part["valuation_spread_bp"].dropna()
        ends = (float(spread.min()), float(spread.max())) if len(spread) else (float("nan"), float("nan"))
        rows.append(Row(name=name, cells=(
            cells.count(len(part), f"securities.count/{key}", "M-31"),
            reading.cell(total(part["par"]), f"securities.par/{key}", "M-31"),
            cells.basis_points(ends[0], f"securities.valuation_spread_bp.lowest/{key}", "M-23"),
            cells.basis_points(ends[1], f"securities.valuation_spread_bp.highest/{key}", "M-23"),
            cells.per_100(widest, f"securities.price_gap.largest/{key}", "M-23"),
        )))  # fmt: skip
    return Table(
        number="4.3", caption="Where each valuation spread comes from",
        basis=f"Par in {reading.money.unit}; spreads continuously compounded over Treasury (M-23). Price difference: "
              "largest of model price less clean price, either sign.",
        row_head="Spread", rows=tuple(rows), why_missing="no security falls in the line",
        columns=(Column(name="Securities"), Column(name="Par"), Column(name="Lowest", unit="bp"),
                 Column(name="Highest", unit="bp"), Column(name="Price difference", unit="per 100")),
    )  # fmt: skip


def _bin(years: float) -> int:
    return next((k for k, bound in enumerate(BOUNDS) if years <= bound), len(BOUNDS))


def _ladder(frame: pd.DataFrame, column: str, kinds: tuple[str, ...]) -> list[list[float]]:
    """Par by kind and bin of years in `column`."""
    sums: list[list[list[float]]] = [[[] for _ in range(len(BOUNDS) + 1)] for _ in kinds]
    for years, kind, par in zip(frame[column], frame["kind"], frame["par"]):
        if kind in kinds and years == years:
            sums[kinds.index(kind)][_bin(float(years))].append(float(par))
    return [[total(parts) for parts in by_bin] for by_bin in sums]


LADDERS = (
    ("to_maturity", "fixed", "By maturity: not callable"), ("to_maturity", "make_whole", "By maturity: make-whole, "
                                                                                         "then par"),
    ("to_maturity", "stated", "By maturity: stated prices"), ("to_call", "make_whole", "By first call: make-whole, "
                                                                                       "then par"),
    ("to_call", "stated", "By first call: stated prices"),
)  # fmt: skip


def _ladder_table(reading: Reading, frame: pd.DataFrame) -> Table:
    by_column = [_ladder(frame, column, (kind,))[0] for column, kind, _ in LADDERS]
    names = [f"up to {bound}" for bound in BOUNDS] + [f"over {BOUNDS[-1]}"]
    rows = [
        Row(name=name, cells=tuple(
            reading.cell(values[k], f"securities.par/{column}/{kind}/{name}", "M-31")
            for values, (column, kind, _) in zip(by_column, LADDERS)))
        for k, name in enumerate(names)
    ]  # fmt: skip
    whole = Row(name="Total", total=True, cells=tuple(
        reading.cell(total(values), f"securities.par/{column}/{kind}/all", "M-31")
        for values, (column, kind, _) in zip(by_column, LADDERS)))  # fmt: skip
    return Table(
        number="4.4", caption="Par by years to maturity and to the first call at a stated price",
        basis=f"{reading.money.unit} of par at the valuation date; years from the valuation date in whole months.",
        row_head="Years", rows=rows_with_total(rows, whole),
        columns=tuple(Column(name=n, adds=True) for *_, n in LADDERS),
    )  # fmt: skip


def _chart(reading: Reading, frame: pd.DataFrame) -> Chart:
    kinds, scale = ("fixed", "make_whole", "stated"), reading.money.scale
    labels = (*(str(b) for b in BOUNDS), f"{BOUNDS[-1]}+")
    ladders = []
    for column, title in (("to_maturity", "By maturity"), ("to_call", "By first date at a stated price")):
        a, b, c = ([v / scale for v in values] for values in _ladder(frame, column, kinds))
        ladders.append(Ladder(title, labels, tuple(a), tuple(b), tuple(c)))
    stated = frame[frame["kind"] == "stated"]
    par, can = total(frame["par"]), total(stated["par"])
    soon = total(stated.loc[stated["to_call"] <= CALLABLE_WITHIN[-1], "par"])
    title = words.title_callability(soon, can, par)
    text = (
        f"Two panels of stacked columns of par, by maturity and by first call date. {share(can, par, 0)} of par can "
        f"be called at a stated price, {share(soon, par, 0)} within five years, par calls of make-whole apart. "
        "Numbers: table 4.4."
    )
    return Chart(
        number="4.1", title=title, text=text, subtitle=f"{reading.money.unit} of par at the valuation date",
        svg=finished(holdings.draw(ladders), prefix="c41", title=title, text=text),
    )  # fmt: skip


def _callable_text(frame: pd.DataFrame) -> str:
    par, stated = total(frame["par"]), frame[frame["kind"] == "stated"]
    parts = [
        f"{share(total(stated.loc[stated['to_call'] <= years, 'par']), par, 0)} within {count_of(years, 'year')}"
        for years in CALLABLE_WITHIN
    ]
    return f"Share of par that can be called at a stated price, par calls of make-whole apart: {', '.join(parts)}."


def _mapping_text(reading: Reading) -> str:
    frame, money = reading.results.securities, reading.money
    moved = frame["mapping_bp"].abs()
    largest = frame.loc[moved.idxmax()] if moved.notna().any() else None
    spread = ""
    if largest is not None:
        spread = (
            f" It moves the spread that promised payments need for the same price by {fixed(float(moved.median()), 1)} "
            f"bp in the median and {fixed(float(moved.max()), 1)} bp at most ({largest['security_id']})."
        )
    return (
        f"Payments stand at month ends (M-17): accrued interest is {money.phrase(total(frame['accrued']))} on mapped "
        f"months, as used here and in table 3.2, and {money.phrase(total(frame['accrued_dated']))} on their own "
        f"dates.{spread}"
    )
