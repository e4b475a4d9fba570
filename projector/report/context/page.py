"""The whole page: masthead, sections in order, and the list of every table it prints."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, fields, is_dataclass
from typing import TypeVar

from projector.report.context import assets, assumptions, calls, closing, glance, liabilities, results, scenarios, scope
from projector.report.context.reading import Reading
from projector.report.glossary import TERMS, Term
from projector.report.method import CALL_RULE, FORMULAS, LIMITS, ORDER_OF_EVENTS, THREE_SPREADS, Formula, Limit
from projector.report.numbers import MINUS, NOT_AVAILABLE, count_of, date_words, fixed, percent
from projector.report.parts import Chart, Table, told
from projector.report.sections import HEADINGS, REQUIREMENTS, Heading, Placed
from projector.report.words import NOT_CALCULATED
from projector.run.results import RunResults

STATUS = {"invented": "INVENTED DATA", "draft": "DRAFT", "final": ""}


@dataclass(frozen=True, kw_only=True)
class Masthead:
    """What stands above page 1, in the page margins and at the end."""

    company: str = told("company, in the study's words")
    business: str = told("business covered, in the study's words")
    study: str = told("name of the study, in its words")
    valuation_date: str = told("valuation date in words")
    information_date: str = told("information date in words")
    valued: str = told("valuation date as in tables")
    unit: str = told("the report's unit of money")
    status: str = told("INVENTED DATA or DRAFT; empty for final data")
    actuary: str = told("responsible actuary, in the study's words")
    digest: str = told("input digest, first 12 digits")


@dataclass(frozen=True, kw_only=True)
class Guide:
    """Section 2, with an example taken from the report itself."""

    example: str = told("an address")
    example_shown: str = told("the figure printed there")
    example_means: str = told("what it is")
    minus: str = told("the minus sign")
    missing: str = told("what is printed where there is no figure")
    scenario: str = told("how a scenario is named")
    decimals: str = told("decimals of money")
    wide: str = told("most columns of one printed piece")


@dataclass(frozen=True, kw_only=True)
class Method:
    """Section 7."""

    formulas: tuple[Formula, ...] = told("every formula with its source")
    events: tuple[str, ...] = told("order of events in a month")
    rule: tuple[str, ...] = told("the call rule as a numbered list")
    spreads: tuple[tuple[str, str], ...] = told("the three spreads")
    limits: tuple[Limit, ...] = told("limits of the model with direction")
    mean_reversion: str = told("mean reversion used", "% a year")
    volatility: str = told("normal volatility used", "bp a year")
    issuer_cost: str = told("issuer's cost used", "% of par")
    default_form: str = told("default form used, in words")


@dataclass(frozen=True, kw_only=True)
class Page:
    """Everything the templates may print."""

    head: Masthead = told("masthead")
    headings: dict[str, Heading] = told("headings by section number")
    placed: tuple[Placed, ...] = told("memorandum items and where they are")
    glance: glance.Glance = told("section 1")
    guide: Guide = told("section 2")
    scope: scope.Scope = told("section 3")
    assets: assets.Assets = told("section 4")
    liabilities: liabilities.Liabilities = told("section 5")
    scenarios: scenarios.Scenarios = told("section 6")
    method: Method = told("section 7")
    assumptions: assumptions.Assumptions = told("section 8")
    results: results.Results = told("section 9")
    calls: calls.Calls = told("section 10")
    not_calculated: str = told("the fixed reason of sections this version does not calculate")
    checks: closing.Checks = told("section 15")
    reproduce: closing.Reproduce = told("section 16")
    cautions: closing.Cautions = told("section 17")
    terms: tuple[Term, ...] = told("section 18")
    appendix: closing.Appendix = told("appendix A")

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
        company=study.company, business=study.business, study=study.name, valuation_date=date_words(study.valuation_date),
        information_date=date_words(study.information_date), valued=study.valuation_date.isoformat(),
        unit=reading.money.unit, status=STATUS.get(study.data_status, study.data_status.upper()),
        actuary=study.responsible_actuary, digest=study.input_digest[:12],
    )  # fmt: skip


def _guide(reading: Reading, table: Table) -> Guide:
    address, row, column, cell = next(table.addressed())
    return Guide(
        example=address, example_shown=cell.shown, example_means=f"{column.name}, {row.name}, {reading.money.unit}",
        minus=MINUS, missing=NOT_AVAILABLE, scenario=row.name, decimals="one decimal", wide=fixed(table.most_columns),
    )  # fmt: skip


DEFAULT_FORMS = {
    "net_annual_cost": "a net annual cost by rating: par decays by it, without recovery",
    "rate_recovery_lag": "a default rate by rating, with recovery paid after a lag of",
}


def _method(reading: Reading) -> Method:
    model, form = reading.study.call_model, reading.study.defaults
    lag = f" {count_of(form.recovery_lag_months, 'month')}" if form.form == "rate_recovery_lag" else ""
    return Method(
        formulas=FORMULAS, events=ORDER_OF_EVENTS, rule=CALL_RULE, spreads=THREE_SPREADS, limits=LIMITS,
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
        not_calculated=NOT_CALCULATED, checks=closing.checks(reading), reproduce=closing.reproduce(reading, run_command),
        cautions=closing.caution_section(reading), terms=TERMS, appendix=closing.appendix(reading),
    )  # fmt: skip
