"""Choices of study.toml that must go together, and those that this version cannot honour."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

from projector.study.clock import month_end
from projector.study.daycounts import is_month_end
from projector.study.errors import LocatedError
from projector.study.schema import StudyForm
from projector.study.tomlfile import Place, dotted, line_of, toml_text

WEIGHTS_TO = 1e-9
LEAST_FADE_YEARS = 1 / 12  # [year], the projection's own step
LEAST_VOLATILITY = 1e-6  # [1/year]


@dataclass(frozen=True)
class Breach:
    """A rule that is not met, at a key."""

    place: Place
    code: str
    problem: str
    remedy: str
    value: object = None


def rule_errors(form: StudyForm, lines: dict[Place, int]) -> list[LocatedError]:
    """Every rule that is not met, at the line of its key."""
    rules = (
        _dates,
        _segments,
        _nothing_or_enough,
        _spreads_and_defaults,
        _purchases,
        _path_files,
        _blocks,
        _not_honoured,
    )
    return [
        LocatedError(
            code=breach.code,
            file="study.toml",
            row=line_of(breach.place, lines),
            column=dotted(breach.place),
            value=None if breach.value is None else toml_text(breach.value),
            problem=breach.problem,
            remedy=breach.remedy,
        )
        for rule in rules
        for breach in rule(form)
    ]


def _dates(form: StudyForm) -> Iterator[Breach]:
    valuation = form.study.valuation_date
    if not 1900 <= valuation.year <= 2400:
        remedy = "write a year from 1900 to 2400"
        yield Breach(("study", "valuation_date"), "E205", "this date is out of range", remedy, valuation)
        return
    if not is_month_end(valuation):
        remedy = f"the clock runs from month end to month end: write {month_end(0, valuation)}"
        yield Breach(("study", "valuation_date"), "E209", "the valuation date is not a month end", remedy, valuation)
    if form.study.information_date < valuation:
        yield Breach(
            ("study", "information_date"),
            "E209",
            "the information date is before the valuation date",
            f"write {valuation} or a later day",
            form.study.information_date,
        )


def _segments(form: StudyForm) -> Iterator[Breach]:
    names = [segment.name for segment in form.segments]
    for at, name in enumerate(names):
        if name in names[:at]:
            remedy = "give every segment its own name"
            yield Breach(("segments", at, "name"), "E209", "this segment stands twice", remedy, name)
        if name == "all":
            remedy = "choose another: all means the total over segments"
            yield Breach(("segments", at, "name"), "E209", "a segment cannot have this name", remedy, name)


def _nothing_or_enough(form: StudyForm) -> Iterator[Breach]:
    """Numbers that are 0 or not near it: between, the arithmetic has no answer that could be told from none."""
    for section, key, value, least, remedy in (
        (
            *("spreads", "residual_fade_years", form.spreads.residual_fade_years, LEAST_FADE_YEARS),
            "write 0 to keep the residual, or at least 1/12 of a year, such as 0.084",
        ),
        (
            *("call_model", "normal_volatility", form.call_model.normal_volatility, LEAST_VOLATILITY),
            "write 0 for rates that do not move, or at least 0.000001; 0.01 is 100 bp a year",
        ),
    ):
        if 0 < value < least:
            yield Breach((section, key), "E205", "this number is too small to mean anything but 0", remedy, value)


def _spreads_and_defaults(form: StudyForm) -> Iterator[Breach]:
    if form.spreads.refunding == "valuation" and form.spreads.concession_bp != 0:
        yield Breach(
            ("spreads", "concession_bp"),
            "E209",
            "a concession does not go with refunding at the valuation spread",
            'write 0, or refunding = "class_plus_concession"',
            form.spreads.concession_bp,
        )
    if form.defaults.form == "net_annual_cost" and form.defaults.recovery_lag_months != 0:
        yield Breach(
            ("defaults", "recovery_lag_months"),
            "E209",
            "a net annual cost has no recovery to wait for",
            'write 0, or form = "rate_recovery_lag"',
            form.defaults.recovery_lag_months,
        )


def _purchases(form: StudyForm) -> Iterator[Breach]:
    classes = form.purchases.classes
    names = [kind.name for kind in classes]
    for at, name in enumerate(names):
        if name in names[:at]:
            remedy = "give every class its own name"
            yield Breach(("purchases", "classes", at, "name"), "E209", "this class stands twice", remedy, name)
    if not classes and form.purchases.share_of_cash_invested > 0:
        remedy = "add [[purchases.classes]], or write share_of_cash_invested = 0 for cash only"
        yield Breach(("purchases",), "E209", "cash is to be invested but there are no classes to buy", remedy)
    total = math.fsum(kind.weight for kind in classes)
    if classes and abs(total - 1.0) > WEIGHTS_TO:
        yield Breach(("purchases", "classes"), "E209", f"the weights sum to {total:.12g}", "make them sum to 1", total)


def _path_files(form: StudyForm) -> Iterator[Breach]:
    """One file gives paths of one kind: results and errors name it."""
    kinds: dict[str, str] = {}
    for at, source in enumerate(form.rates.paths):
        name = getattr(source, "file", None)
        if name is not None and kinds.setdefault(name, source.kind) != source.kind:
            remedy = "keep a file for each kind of paths"
            yield Breach(
                ("rates", "paths", at, "file"), "E209", "this file gives another kind of paths too", remedy, name
            )


def _blocks(form: StudyForm) -> Iterator[Breach]:
    blocks = form.liabilities.rate_insensitive_blocks
    if len(set(blocks)) < len(blocks):
        place = ("liabilities", "rate_insensitive_blocks")
        yield Breach(place, "E209", "a block stands twice in this list", "name each block once")


def _not_honoured(form: StudyForm) -> Iterator[Breach]:
    reserves, asked = form.maintenance_reserve, "write 0 only when that is the amount; otherwise another tool is needed"
    for code, section, key, what, value in (
        (
            "E508",
            "maintenance_reserve",
            "interest_maintenance_reserve",
            "an interest maintenance reserve",
            reserves.interest_maintenance_reserve,
        ),
        (
            "E509",
            "maintenance_reserve",
            "asset_valuation_reserve",
            "an asset valuation reserve",
            reserves.asset_valuation_reserve,
        ),
        ("E510", "tax", "rate", "tax", form.tax.rate),
    ):
        if value != 0:
            yield Breach((section, key), code, f"{what} is not honoured by this version", asked, value)
