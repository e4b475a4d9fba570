"""Section 5: what is promised, and when it is paid."""

from __future__ import annotations

from dataclasses import dataclass, field

import pandas as pd

from projector.report import words
from projector.report.charts import flows
from projector.report.context.reading import Reading, total
from projector.report.numbers import fixed, listed
from projector.report.parts import Cell, Chart, Column, Row, Table, rows_with_total, told
from projector.report.svg import finished

BENEFITS = ("death_benefit", "surrender_benefit", "withdrawal", "annuity_payment", "maturity_benefit")
RUN_OFF = ("coupon", "principal", "call_par", "call_premium", "put", "recovery")
OUTGO = (*BENEFITS, "premium", "expense", "commission", "loan", "reinsurance")
EVERY_PATH = "all"  # scenario column of a block that does not react to rates


@dataclass(frozen=True, kw_only=True)
class Liabilities:
    """Section 5."""

    blocks: Table = field(metadata=told("table 5.1"))
    by_year: Table = field(metadata=told("table 5.2"))
    chart: Chart = field(metadata=told("chart 5.1"))
    scenario: str = field(metadata=told("the scenario shown"))
    sensitive: str = field(metadata=told("which blocks react to rates"))


def liabilities(reading: Reading) -> Liabilities:
    """Section 5 from the study's streams and the flows of the first scenario."""
    sides = _both_sides(reading)
    return Liabilities(
        blocks=_blocks(reading), by_year=_by_year(reading, sides), chart=_chart(reading, sides),
        scenario=reading.scenario(reading.scenarios[0]), sensitive=_sensitive(reading),
    )  # fmt: skip


def _blocks(reading: Reading) -> Table:
    first = reading.scenarios[0]
    streams = reading.study.tables.liability_streams
    own = streams[streams["scenario"].isin([first, EVERY_PATH])]
    sums: dict[tuple[str, str], dict[str, float]] = {}
    for (segment, block, item), part in own.groupby(["segment", "block", "item"], sort=True, observed=True):
        amounts = part["amount"] if item != "reserve_statutory" else part.loc[part["month"] == 0, "amount"]
        sums.setdefault((str(segment), str(block)), {})[str(item)] = total(amounts)
    order = [key for name in reading.segments for key in sums if key[0] == name]
    rows = [
        Row(name=f"{block}, {reading.segment(segment)}", own_words=True,
            cells=_block_cells(reading, sums[segment, block], f"{segment}/{block}/{first}"))
        for segment, block in order
    ]  # fmt: skip
    keys = {item for items in sums.values() for item in items}
    everything = {item: total(items.get(item, 0.0) for items in sums.values()) for item in keys}
    whole = Row(name="Total", total=True, cells=_block_cells(reading, everything, f"all/{first}"))
    heads = ("Reserve", "Premiums", "Benefits", "Expenses and commissions", "Net outgo")
    return Table(
        number="5.1", caption="Blocks of business: reserve and undiscounted flows to the horizon",
        basis=f"{reading.money.unit}. Reserve at the valuation date; flows are sums of the supplied streams of "
              f"{reading.scenario(first)}. Net outgo = benefits + expenses − premiums, positive = paid out.",
        row_head="Block, segment", columns=tuple(Column(name=head, adds=True) for head in heads),
        rows=rows_with_total(rows, whole),
    )  # fmt: skip


def _block_cells(reading: Reading, items: dict[str, float], key: str) -> tuple[Cell, ...]:
    benefits = total(items.get(item, 0.0) for item in BENEFITS)
    costs = total((items.get("expense", 0.0), items.get("commission", 0.0)))
    premium = items.get("premium", 0.0)
    named = (
        ("reserve_statutory", items.get("reserve_statutory", 0.0)), ("premium", premium), ("benefits", benefits),
        ("expenses", costs), ("net_outgo", total((benefits, costs, -premium))),
    )  # fmt: skip
    return tuple(reading.cell(value, f"liability_streams.{name}/{key}", "M-31") for name, value in named)


def _sensitive(reading: Reading) -> str:
    fixed_blocks = list(reading.study.liabilities.rate_insensitive_blocks)
    if not fixed_blocks:
        return "Every block has its own stream on every path."
    named = listed(fixed_blocks, 8)
    return f"One stream serves every path for {named}, as the study declares; all other blocks have one for each path."


def _both_sides(reading: Reading) -> list[tuple[float, float]]:
    """By year: run-off of the starting holdings received, and net liability outgo paid, of the first scenario."""
    frame = reading.results.flows
    frame = frame[frame["scenario"] == reading.scenarios[0]]
    years = (frame["month"] - 1) // 12 + 1
    start = frame[(frame["holding"] == "start") & frame["category"].isin(RUN_OFF)]
    outgo = frame[frame["category"].isin(OUTGO)]
    assets, paid = (_sums(part, years[part.index]) for part in (start, outgo))
    return [(assets.get(y, 0.0), -paid.get(y, 0.0)) for y in range(1, reading.horizon_years + 1)]


def _sums(part: pd.DataFrame, years: pd.Series) -> dict[int, float]:
    return {int(str(year)): total(amounts) for year, amounts in part["amount"].groupby(years, sort=True)}


def _by_year(reading: Reading, sides: list[tuple[float, float]]) -> Table:
    scenario = reading.scenarios[0]

    def line(name: str, assets: float, outgo: float, key: str) -> tuple[Cell, ...]:
        return (
            reading.cell(assets, f"flows.run_off/{key}/{scenario}", "M-31"),
            reading.cell(outgo, f"flows.liability_outgo/{key}/{scenario}", "M-31"),
            reading.cell(total((assets, -outgo)), f"flows.net/{key}/{scenario}", "M-31"),
        )

    rows = [Row(name=f"Year {fixed(y)}", cells=line("", a, o, f"year {y}")) for y, (a, o) in enumerate(sides, start=1)]
    whole = line("", total(a for a, _ in sides), total(o for _, o in sides), "all")
    return Table(
        number="5.2", caption="Cash flows of both sides by year",
        basis=f"{reading.money.unit}, undiscounted, {reading.scenario(scenario)}, all segments. Assets: coupons, "
              "principal, calls and recoveries of the starting holdings, sales left out. Outgo: benefits and "
              "expenses less premiums.",
        row_head="Year after the valuation date",
        rows=rows_with_total(rows, Row(name="Total", total=True, cells=whole)),
        columns=tuple(Column(name=name, adds=True) for name in ("Assets in", "Liabilities out", "Net")),
    )  # fmt: skip


def _chart(reading: Reading, sides: list[tuple[float, float]]) -> Chart:
    scale, money = reading.money.scale, reading.money
    net = [total((a, -o)) for a, o in sides]
    name = reading.scenario(reading.scenarios[0])
    title = words.title_flows([0.0 if money.is_zero(v) else v for v in net], name)
    most = max(range(len(net)), key=lambda k: sides[k][0])
    text = (
        "Columns by year, assets in above the zero line and liabilities out below, with the net as a dotted line. "
        f"Assets in are largest in year {fixed(most + 1)}, {money.text(sides[most][0])}; the net ends at "
        f"{money.text(net[-1])}. Numbers: table 5.2."
    )
    drawn = flows.draw([a / scale for a, _ in sides], [o / scale for _, o in sides])
    return Chart(
        number="5.1", title=title, text=text, svg=finished(drawn, prefix="c51", title=title, text=text),
        subtitle=f"{reading.money.unit} a year, undiscounted, {name}, all segments; run-off of the starting holdings",
    )  # fmt: skip
