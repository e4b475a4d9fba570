"""Sections 11 to 17 and the appendix: what is not calculated, checks, reproduction, cautions, long tables."""

from __future__ import annotations

import re
from dataclasses import dataclass, field

from projector.report import cells
from projector.report.cautions import Caution, cautions
from projector.report.context import measures
from projector.report.context.calls import CallReading, call_table
from projector.report.context.reading import Reading, total
from projector.report.context.results import by_year
from projector.report.context.scope import defects
from projector.report.numbers import count_of, date_words, fixed
from projector.report.parts import Column, Row, Table, told
from projector.study.version import VERSION

EXPONENT = re.compile(r"(?<=e)-(?=\d)")


@dataclass(frozen=True, kw_only=True)
class Checks:
    """Section 15."""

    table: Table = field(metadata=told("table 15.1"))
    summary: str = field(metadata=told("how many identities hold over how many sums"))


@dataclass(frozen=True, kw_only=True)
class Reproduce:
    """Section 16."""

    table: Table = field(metadata=told("table 16.1"))
    version: str = field(metadata=told("version of the program that made the results"))
    command: str = field(metadata=told("the command that made the run"))
    input_digest: str = field(metadata=told("SHA-256 of checked tables and choices"))
    set_digest: str = field(metadata=told("SHA-256 of the rate paths"))


@dataclass(frozen=True, kw_only=True)
class Cautions:
    """Section 17."""

    items: tuple[Caution, ...] = field(metadata=told("the twenty cautions"))
    reliances: Table = field(metadata=told("table 17.1"))


@dataclass(frozen=True, kw_only=True)
class Appendix:
    """Appendix A."""

    tables: tuple[Table, ...] = field(metadata=told("long tables, in order"))


def checks(reading: Reading) -> Checks:
    """Section 15 from the identities."""
    frame = reading.results.identities
    rows = tuple(
        Row(name=f"{row['identity']} {row['name']}", cells=(
            cells.count(row["checked"], f"identities.checked/{row['identity']}"),
            cells.word(EXPONENT.sub("\u2212", str(row["tolerance"])), f"identities.tolerance/{row['identity']}"),
            cells.small(float(row["worst_difference"]), f"identities.worst_difference/{row['identity']}"),
            cells.word(str(row["where"]) or "none", f"identities.where/{row['identity']}"),
            cells.word("holds" if row["holds"] else "does not hold", f"identities.holds/{row['identity']}"),
        ))
        for row in frame.to_dict("records")
    )  # fmt: skip
    hold, sums = int(frame["holds"].sum()), int(total(frame["checked"]))
    return Checks(
        summary=f"{fixed(hold)} of {count_of(len(frame), 'identity', 'identities')} hold over {count_of(sums, 'sum')} "
                "compared.",
        table=Table(
            number="15.1", caption="Identities checked on this run",
            basis="Differences in currency units; each side recomputed by code apart from the projection (M-30).",
            row_head="Identity", rows=rows,
            columns=(Column(name="Sums compared"), Column(name="Tolerance", words=True),
                     Column(name="Worst difference"), Column(name="Where", words=True),
                     Column(name="Result", words=True)),
        ),
    )  # fmt: skip


def reproduce(reading: Reading, run_command: str) -> Reproduce:
    """Section 16 from the digests."""
    tables = reading.results.tables()
    rows = tuple(
        Row(name=name.replace("_", " "), cells=(
            cells.count(len(tables[name]) if name in tables else 0, f"digests.rows/{name}"),
            cells.word(digest, f"digests.sha256/{name}")))
        for name, digest in reading.results.result_digests.items()
    )  # fmt: skip
    return Reproduce(
        command=run_command, version=VERSION, input_digest=reading.study.input_digest,
        set_digest=reading.results.set_digest,
        table=Table(
            number="16.1", caption="Digests of results",
            basis="SHA-256 of each table's canonical rounded content, independent of file format and row order of "
                  "inputs.",
            row_head="Table", rows=rows,
            columns=(Column(name="Rows"), Column(name="SHA-256", words=True)),
        ),
    )  # fmt: skip


def caution_section(reading: Reading) -> Cautions:
    """Section 17 from the study."""
    study = reading.study
    valued, informed = date_words(study.valuation_date), date_words(study.information_date)
    items = cautions(study, valued, informed, defects(reading), reading.segment_table)
    said = [text for text in study.texts.reliances if text.strip()]
    rows = tuple(
        Row(name=f"Reliance {fixed(k)}", cells=(cells.said(text, f"texts.reliances/{k}"),))
        for k, text in enumerate(said, 1)
    )
    none = (Row(name="Reliance", cells=(cells.quiet("none stated by the study", "texts.reliances/none"),)),)
    return Cautions(
        items=items,
        reliances=Table(
            number="17.1", caption="Reliances", basis="On whom, for what, checked how; in the study's own words.",
            row_head="Line", columns=(Column(name="Reliance", words=True),), rows=rows or none,
        ),
    )  # fmt: skip


def appendix(reading: Reading) -> Appendix:
    """Appendix A: surplus by segment, opening yields of every security, every callable security."""
    segments = reading.segments if len(reading.segments) > 1 else ()
    by_segment = tuple(
        by_year(reading, f"A.1{letter}", name) for letter, name in zip(_letters(), segments, strict=False)
    )
    every = call_table(CallReading(reading), "A.3", "Every callable security: month called by scenario", None)
    _, long = measures.tables(reading)
    return Appendix(tables=(*by_segment, _securities(reading), every, *long))


def _letters() -> tuple[str, ...]:
    first = "abcdefghijklmnopqrstuvwxyz"
    return (*first, *(f"{a}{b}" for a in first for b in first))


def _securities(reading: Reading) -> Table:
    frame = reading.results.securities.sort_values(["par", "security_id"], ascending=[False, True], kind="stable")
    rows = []
    for bond in frame.to_dict("records"):
        name = str(bond["security_id"])
        rows.append(Row(name=name, own_words=True, cells=(
            cells.said(str(bond["issuer"]), f"securities.issuer/{name}"),
            cells.word(str(bond["rating"]), f"securities.rating/{name}"),
            cells.day(bond["maturity_date"], f"securities.maturity_date/{name}"),
            cells.word(str(bond["call_form"]).replace("_", "-"), f"securities.call_form/{name}"),
            reading.cell(float(bond["par"]), f"securities.par/{name}"),
            reading.cell(float(bond["statement_value"]), f"securities.statement_value/{name}", "M-14"),
            cells.per_100(float(bond["clean_price"]), f"securities.clean_price/{name}"),
            cells.yearly_rate(float(bond["book_yield"]), f"securities.book_yield/{name}", "M-15"),
            cells.yearly_rate(float(bond["yield_to_worst"]), f"securities.yield_to_worst/{name}", "M-16"),
            cells.day(bond["worst_date"], f"securities.worst_date/{name}"),
            cells.basis_points(float(bond["valuation_spread_bp"]), f"securities.valuation_spread_bp/{name}", "M-23"),
            cells.basis_points(float(bond["refunding_spread_bp"]), f"securities.refunding_spread_bp/{name}", "M-24"),
        )))  # fmt: skip
    heads = (("Issuer", "", True), ("Rating", "", True), ("Maturity", "", True), ("Call form", "", True),
             ("Par", "", False),
             ("Statement value", "", False), ("Clean price", "per 100", False), ("Book yield", "%", False),
             ("Yield to worst", "%", False), ("Worst date", "", True), ("Valuation spread", "bp", False),
             ("Refunding spread", "bp", False))  # fmt: skip
    par = reading.money.phrase(total(frame["par"]))
    rest = f"All {fixed(len(rows))} lines are in the workbook, sheet A.2; their par is {par}."
    return Table(
        number="A.2", caption="Every security at the valuation date", row_head="Security", rows=tuple(rows),
        most_columns=12,
        columns=tuple(Column(name=name, unit=unit, words=is_word) for name, unit, is_word in heads), rest=rest,
        basis=f"Par and statement value in {reading.money.unit}, largest par first; prices per 100, yields in % "
              "bond-equivalent, spreads in bp.", why_missing="the figure does not exist for the security",
    )  # fmt: skip
