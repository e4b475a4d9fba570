"""The whole page: masthead, sections in order, and the list of every table it prints."""

from __future__ import annotations

from dataclasses import dataclass, field, fields, is_dataclass
from typing import TypeVar

from projector.report import cells
from projector.report.context import assets, assumptions, calls, closing, glance, liabilities, results, scenarios, scope
from projector.report.context.reading import Reading
from projector.report.glossary import TERMS, Term
from projector.report.method import CALL_RULE, FORMULAS, LIMITS, ORDER_OF_EVENTS, THREE_SPREADS, Limit
from projector.report.numbers import MINUS, NOT_AVAILABLE, count_of, date_words, fixed, percent
from projector.report.parts import Chart, Column, Row, Table, told
from projector.report.sections import HEADINGS, REQUIREMENTS, Heading, Placed
from projector.report.words import NOT_CALCULATED
from projector.run.results import RunResults

STATUS = {"invented": "INVENTED DATA", "draft": "DRAFT", "final": ""}


@dataclass(frozen=True, kw_only=True)
class Masthead:
    """What stands above page 1, in the page margins and at the end."""

    company: str = field(metadata=told("company, in the study's words"))
    business: str = field(metadata=told("business covered, in the study's words"))
    study: str = field(metadata=told("name of the study, in its words"))
    valuation_date: str = field(metadata=told("valuation date in words"))
    information_date: str = field(metadata=told("information date in words"))
    valued: str = field(metadata=told("valuation date as in tables"))
    unit: str = field(metadata=told("the report's unit of money"))
    status: str = field(metadata=told("INVENTED DATA or DRAFT; empty for final data"))
    digest: str = field(metadata=told("input digest, first 12 digits"))


@dataclass(frozen=True, kw_only=True)
class Guide:
    """Section 2, with an example taken from the report itself."""

    example: str = field(metadata=told("an address"))
    example_shown: str = field(metadata=told("the figure printed there"))
    example_means: str = field(metadata=told("what it is"))
    minus: str = field(metadata=told("the minus sign"))
    missing: str = field(metadata=told("what is printed where there is no figure"))
    scenario: str = field(metadata=told("how a scenario is named"))
    decimals: str = field(metadata=told("decimals of money"))


@dataclass(frozen=True, kw_only=True)
class Method:
    """Section 7."""

    formulas: Table = field(metadata=told("table 7.1"))
    events: tuple[str, ...] = field(metadata=told("order of events in a month"))
    rule: tuple[str, ...] = field(metadata=told("the call rule as a numbered list"))
    spreads: tuple[tuple[str, str], ...] = field(metadata=told("the three spreads"))
    limits: tuple[Limit, ...] = field(metadata=told("limits of the model with direction"))
    mean_reversion: str = field(metadata=told("mean reversion used", "% a year"))
    volatility: str = field(metadata=told("normal volatility used", "bp a year"))
    issuer_cost: str = field(metadata=told("issuer's cost used", "% of par"))
    default_form: str = field(metadata=told("default form used, in words"))


@dataclass(frozen=True, kw_only=True)
class Page:
    """Everything the templates may print."""

    head: Masthead = field(metadata=told("masthead"))
    headings: dict[str, Heading] = field(metadata=told("headings by section number"))
    placed: tuple[Placed, ...] = field(metadata=told("memorandum items and where they are"))
    glance: glance.Glance = field(metadata=told("section 1"))
    guide: Guide = field(metadata=told("section 2"))
    scope: scope.Scope = field(metadata=told("section 3"))
    assets: assets.Assets = field(metadata=told("section 4"))
    liabilities: liabilities.Liabilities = field(metadata=told("section 5"))
    scenarios: scenarios.Scenarios = field(metadata=told("section 6"))
    method: Method = field(metadata=told("section 7"))
    assumptions: assumptions.Assumptions = field(metadata=told("section 8"))
    results: results.Results = field(metadata=told("section 9"))
    calls: calls.Calls = field(metadata=told("section 10"))
    not_calculated: str = field(metadata=told("the fixed reason of sections this version does not calculate"))
    checks: closing.Checks = field(metadata=told("section 15"))
    reproduce: closing.Reproduce = field(metadata=told("section 16"))
    cautions: closing.Cautions = field(metadata=told("section 17"))
    terms: tuple[Term, ...] = field(metadata=told("section 18"))
    appendix: closing.Appendix = field(metadata=told("appendix A"))

    def tables(self) -> list[Table]:
        """Every table, in the order of its number."""
        return sorted(_found(self, Table), key=lambda table: _order(table.number))

    def charts(self) -> list[Chart]:
        """Every chart, in the order of its number."""
        return sorted(_found(self, Chart), key=lambda chart: _order(chart.number))


def _order(number: str) -> tuple[bool, int, int, str]:
    """Sections before the appendix, numbers as numbers: 9.2 before 10.1, A.1 before A.1a."""
    section, _, rest = number.partition(".")
    digits = "".join(c for c in rest if c.isdigit())
    return section == "A", 0 if section == "A" else int(section), int(digits), rest.removeprefix(digits)


Found = TypeVar("Found")


def _found(record: object, kind: type[Found]) -> list[Found]:
    """Every part of that kind held by the fields of a record, at any depth."""
    if isinstance(record, kind):
        return [record]
    if is_dataclass(record):
        return [part for f in fields(record) for part in _found(getattr(record, f.name), kind)]
    if isinstance(record, tuple):
        return [part for item in record for part in _found(item, kind)]
    return []


def _head(reading: Reading) -> Masthead:
    study = reading.study
    return Masthead(
        company=study.company, business=study.business, study=study.name,
        valuation_date=date_words(study.valuation_date),
        information_date=date_words(study.information_date), valued=study.valuation_date.isoformat(),
        unit=reading.money.unit, status=STATUS.get(study.data_status, study.data_status.upper()),
        digest=study.input_digest[:12],
    )  # fmt: skip


def _guide(reading: Reading, table: Table) -> Guide:
    address, row, column, cell = next(table.addressed())
    return Guide(
        example=address, example_shown=cell.shown, example_means=f"{column.name}, {row.name}, {reading.money.unit}",
        minus=MINUS, missing=NOT_AVAILABLE, scenario=row.name, decimals="one decimal",
    )  # fmt: skip


DEFAULT_FORMS = {
    "net_annual_cost": "a net annual cost by rating: par decays by it, without recovery",
    "rate_recovery_lag": "a default rate by rating, with recovery paid after a lag of",
}


def _formulas() -> Table:
    rows = tuple(
        Row(name=f"{f.id} {f.name}", anchor=f.id, cells=tuple(
            cells.word(text, f"formulas/{f.id}/{part}")
            for part, text in (("words", f.words), ("symbols", f.symbols), ("source", f.source))))
        for f in FORMULAS
    )  # fmt: skip
    return Table(
        number="7.1", caption="Formulas and their sources",
        basis="Each figure of this report names its formula by number. “Cited from memory”: the source was not open "
              "when this text was written.",
        row_head="Formula", prose=True, rows=rows,
        columns=tuple(Column(name=name, words=True) for name in ("In words", "In symbols", "Source")),
    )  # fmt: skip


def _method(reading: Reading) -> Method:
    model, form = reading.study.call_model, reading.study.defaults
    lag = f" {count_of(form.recovery_lag_months, 'month')}" if form.form == "rate_recovery_lag" else ""
    return Method(
        formulas=_formulas(), events=ORDER_OF_EVENTS, rule=CALL_RULE, spreads=THREE_SPREADS, limits=LIMITS,
        mean_reversion=f"{percent(model.mean_reversion, 2)} a year", default_form=f"{DEFAULT_FORMS[form.form]}{lag}",
        volatility=f"{fixed(model.normal_volatility * 1e4, 1)} bp a year",
        issuer_cost=f"{percent(model.issuer_cost_share_of_par, 2)} of par",
    )  # fmt: skip


def page(run: RunResults, run_command: str) -> Page:
    """The context of the page: a function of the results and the command alone."""
    reading = Reading(run)
    first = glance.glance(reading)
    return Page(
        head=_head(reading), headings={h.number: h for h in HEADINGS}, placed=REQUIREMENTS, glance=first,
        guide=_guide(reading, first.table), scope=scope.scope(reading), assets=assets.assets(reading),
        liabilities=liabilities.liabilities(reading), scenarios=scenarios.scenarios(reading), method=_method(reading),
        assumptions=assumptions.assumptions(reading), results=results.results(reading), calls=calls.calls(reading),
        not_calculated=NOT_CALCULATED, checks=closing.checks(reading),
        reproduce=closing.reproduce(reading, run_command),
        cautions=closing.caution_section(reading), terms=TERMS, appendix=closing.appendix(reading),
    )  # fmt: skip
