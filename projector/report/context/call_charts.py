"""Charts of section 10: the call map, by security or by year of first call, and par called by year."""

from __future__ import annotations

from projector.report import words
from projector.report.charts import calls as drawing
from projector.report.charts.calls import MOST_ROWS, CallGroup, CallRow
from projector.report.context.reading import Reading, total
from projector.report.numbers import as_date, count_of, fixed, percent, share, years_between
from projector.report.parts import Chart
from projector.report.svg import finished

Months = dict[tuple[str, str], int]


def call_map(reading: Reading, months: Months) -> Chart:
    """C8 up to 300 callable securities, C8b above."""
    count = len(reading.callable_ids)
    called = {name: sum(1 for _, scenario in months if scenario == name) for name in reading.scenarios}
    title = words.title_call_map([(reading.scenario(name), n) for name, n in called.items()], count)
    heads = [f"{fixed(called[name])} of {fixed(count)}" for name in reading.shown]
    names = [reading.scenario(name) for name in reading.shown]
    if count > MOST_ROWS:
        form, drawn = (
            "one row for each year of first call date",
            drawing.draw_groups(names, heads, _groups(reading, months)),
        )
    else:
        rows = _rows(reading, months)
        form = "one row a security, a line from first call date to maturity and a dot at the month called"
        drawn = (
            drawing.draw_map(names, heads, rows, float(reading.horizon_years))
            if rows
            else drawing.draw_groups(names, heads, [])
        )
    most, least = max(called, key=called.__getitem__), min(called, key=called.__getitem__)
    text = (
        f"One column a scenario, {form}. {fixed(called[most])} of {count_of(count, 'security', 'securities')} called "
        f"in {most}, {fixed(called[least])} in {least}. Numbers: tables 10.1, 10.2 and A.3."
    )
    return Chart(
        number="10.2", title=title, text=text, svg=finished(drawn, prefix="c102", title=title, text=text),
        subtitle=f"callable securities by year of first call date, years 0 to {fixed(reading.horizon_years)}; model "
                 "calls on this path, not a forecast",
    )  # fmt: skip


def _rows(reading: Reading, months: Months) -> list[CallRow]:
    start, rows = reading.study.valuation_date, []
    for bond in reading.results.securities.to_dict("records"):
        first, maturity, name = (
            as_date(bond["first_call_date"]),
            as_date(bond["maturity_date"]),
            str(bond["security_id"]),
        )
        if first is None or maturity is None:
            continue
        called = tuple(months[name, s] / 12 if (name, s) in months else None for s in reading.shown)
        opens = max(years_between(start, first), 0.0)
        rows.append(CallRow(first.year, float(bond["coupon_rate"]), opens, years_between(start, maturity), called))
    return rows


def _groups(reading: Reading, months: Months) -> list[CallGroup]:
    group_of, par_of = {}, {}
    for bond in reading.results.securities.to_dict("records"):
        first = as_date(bond["first_call_date"])
        if first is not None:
            group_of[str(bond["security_id"])], par_of[str(bond["security_id"])] = first.year, float(bond["par"])
    frame, years = reading.results.calls, reading.horizon_years
    sums: dict[tuple[int, str], list[list[float]]] = {}
    for name, scenario, month, par in zip(
        frame["security_id"], frame["scenario"], frame["month"], frame["par_called"], strict=True
    ):
        slot = sums.setdefault((group_of[str(name)], str(scenario)), [[] for _ in range(years)])
        slot[min((int(month) - 1) // 12, years - 1)].append(float(par))
    groups = []
    for year in sorted(set(group_of.values())):
        members = [name for name, group in group_of.items() if group == year]
        by_year = [
            tuple(total(v) / reading.money.scale for v in sums.get((year, s), [[]] * years)) for s in reading.shown
        ]
        whole = total(par_of[name] for name in members) / reading.money.scale
        shares = tuple(share(total(values), whole, 0) for values in by_year)
        groups.append(CallGroup(year, len(members), tuple(by_year), shares))
    return groups


def par_called(reading: Reading) -> Chart:
    """C9: par called by year."""
    frame, scale, years = reading.results.calls, reading.money.scale, reading.horizon_years
    sums: dict[str, list[list[float]]] = {name: [[] for _ in range(years)] for name in reading.scenarios}
    for scenario, month, par in zip(frame["scenario"], frame["month"], frame["par_called"], strict=True):
        sums[str(scenario)][min((int(month) - 1) // 12, years - 1)].append(float(par))
    by_year = {name: [total(values) / scale for values in parts] for name, parts in sums.items()}
    rows = {name: reading.measures(name) for name in reading.scenarios}
    callable_par = float(rows[reading.scenarios[0]]["stated_callable_par"])
    title = words.title_par_called(
        [(reading.scenario(n), float(rows[n]["stated_par_called"])) for n in reading.scenarios], callable_par
    )
    lines = [
        f"{reading.money.text(rows[n]['par_called'])}, {share(rows[n]['stated_par_called'], callable_par, 0)}"
        for n in reading.shown
    ]
    most = max(reading.scenarios, key=lambda n: float(rows[n]["par_called"]))
    least = min(reading.scenarios, key=lambda n: float(rows[n]["par_called"]))
    part = rows[most]["stated_par_called"] / callable_par if callable_par else 0.0
    of = f" ({percent(part, 0)} of par callable at stated prices)" if callable_par else ""
    text = (
        f"Columns of par called by year, one panel a scenario on one scale. Most in {most}, "
        f"{reading.money.text(rows[most]['par_called'])}{of}; least in {least}, "
        f"{reading.money.text(rows[least]['par_called'])}. Numbers: table 10.1."
    )
    drawn = drawing.draw_par(
        [reading.scenario(n) for n in reading.shown], lines, [by_year[n] for n in reading.shown], reading.money.unit
    )
    return Chart(
        number="10.1", title=title, text=text, svg=finished(drawn, prefix="c101", title=title, text=text),
        subtitle=f"{reading.money.unit} a year, all segments; under each name: total, and share called of callable par",
    )  # fmt: skip
