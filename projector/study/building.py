"""From the checked form of study.toml to the frozen records of the study."""

from __future__ import annotations

from typing import Any

from projector.study import records as r
from projector.study.schema import NumericsSection, Sourced, StudyForm


def study_choices(form: StudyForm) -> dict[str, Any]:
    """The records of every section by their name in `Study`."""
    about = form.study.model_dump()
    purchases = {"classes": tuple(r.PurchaseClass(**kind.model_dump()) for kind in form.purchases.classes)}
    paths = tuple(r.PathSource(**source.model_dump()) for source in form.rates.paths)
    return {
        **about,
        "segments": tuple(r.Segment(**segment.model_dump()) for segment in form.segments),
        "call_model": r.CallModel(**_sourced(form.call_model)),
        "spreads": r.Spreads(**_sourced(form.spreads)),
        "defaults": r.Defaults(**_sourced(form.defaults)),
        "purchases": r.Purchases(**{**_sourced(form.purchases), **purchases}),
        "borrowing": r.Borrowing(**_sourced(form.borrowing)),
        "investment_expense": r.InvestmentExpense(**_sourced(form.investment_expense)),
        "criterion": r.Criterion(**form.criterion.model_dump()),
        "horizon": r.Horizon(**_sourced(form.horizon)),
        "discounting": r.Discounting(**_sourced(form.discounting)),
        "rates": r.Rates(**{**_sourced(form.rates), "paths": paths}),
        "liabilities": r.Liabilities(**_tuples(_sourced(form.liabilities))),
        "numerics": _numerics(form.numerics),
        "texts": r.Texts(**_tuples(form.texts.model_dump())),
    }


def digest_choices(form: StudyForm) -> dict[str, Any]:
    """Everything study.toml states except names of files, as plain values; choices left to their default are named."""
    plain = form.model_dump(exclude={"tables"})
    for source in plain["rates"]["paths"]:
        source.pop("file", None)
    plain["numerics"]["defaulted"] = list(_numerics(form.numerics).defaulted)
    return plain


def _sourced(section: Sourced) -> dict[str, Any]:
    values = section.model_dump()
    source, as_of, rationale = values.pop("source"), values.pop("as_of"), values.pop("rationale")
    return {**values, "origin": r.Origin(source=source, as_of=as_of.isoformat(), rationale=rationale)}


def _tuples(values: dict[str, Any]) -> dict[str, Any]:
    return {key: tuple(value) if isinstance(value, list) else value for key, value in values.items()}


def _numerics(section: NumericsSection) -> r.Numerics:
    silent = tuple(name for name in NumericsSection.model_fields if name not in section.model_fields_set)
    return r.Numerics(**section.model_dump(), defaulted=silent)
