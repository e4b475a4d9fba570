"""Section 8: what was assumed, where it comes from."""

from __future__ import annotations

from dataclasses import dataclass, field

from projector.report import cells
from projector.report.context.reading import Reading, credit_order
from projector.report.numbers import NOT_AVAILABLE, count_of, fixed
from projector.report.parts import Cell, Column, Row, Table, told


@dataclass(frozen=True, kw_only=True)
class Assumptions:
    """Section 8."""

    used: Table = field(metadata=told("table 8.1"))
    sources: Table = field(metadata=told("table 8.2"))
    purchases: Table = field(metadata=told("table 8.3"))
    spreads: Table = field(metadata=told("table 8.4"))
    counted: str = field(metadata=told("how many choices are stated, how many are defaults"))


def assumptions(reading: Reading) -> Assumptions:
    """Section 8 from the choices of the results and the study's tables."""
    frame = reading.results.choices
    origins = list(dict.fromkeys(
        (str(g), str(s), str(a), str(r))
        for g, s, a, r in zip(frame["group"], frame["source"], frame["as_of"], frame["rationale"], strict=True)
    ))  # fmt: skip
    defaults = int((frame["stated"] == "default").sum())
    return Assumptions(
        used=_used(reading, origins), sources=_sources(origins), purchases=_purchases(reading),
        spreads=_spreads(reading),
        counted=f"{count_of(len(frame), 'choice')}, {count_of(defaults, 'default')} among them.",
    )  # fmt: skip


def _plain(code: str) -> str:
    """A name of the study file in words: its underscores become spaces."""
    return code.replace("_", " ")


def _used(reading: Reading, origins: list[tuple[str, str, str, str]]) -> Table:
    rows = []
    for row in reading.results.choices.to_dict("records"):
        group, name = str(row["group"]), str(row["name"])
        line = origins.index((group, str(row["source"]), str(row["as_of"]), str(row["rationale"]))) + 1
        key = f"choices/{group}/{name}"
        rows.append(Row(name=f"{_plain(group)}: {_plain(name)}", cells=(
            cells.said(_plain(str(row["value"])), f"{key}/value"), cells.word(str(row["stated"]), f"{key}/stated"),
            cells.word(f"8.2 line {fixed(line)}", f"{key}/source"),
        )))  # fmt: skip
    return Table(
        number="8.1", caption="Choices as used",
        basis="Each with its unit. The study holds one value for each choice, the one used; it holds no separate "
              "best estimate, margin or value of last year.",
        row_head="Choice", rows=tuple(rows),
        columns=(Column(name="Used", words=True), Column(name="Stated or default", words=True),
                 Column(name="Source", words=True)),
    )  # fmt: skip


def _sources(origins: list[tuple[str, str, str, str]]) -> Table:
    rows = tuple(
        Row(name=_plain(group), cells=(
            cells.said(source, f"choices/{group}/{k}/source"), cells.said(as_of, f"choices/{group}/{k}/as_of"),
            cells.said(rationale, f"choices/{group}/{k}/rationale")))
        for k, (group, source, as_of, rationale) in enumerate(origins, start=1)
    )  # fmt: skip
    return Table(
        number="8.2", caption="Sources of the choices", basis="In the study's own words.", row_head="Part of the study",
        rows=rows, columns=tuple(Column(name=name, words=True) for name in ("Source", "As of", "Why")),
    )  # fmt: skip


def _purchases(reading: Reading) -> Table:
    rows = [
        Row(name=c.name, own_words=True, cells=(
            cells.said(c.rating, f"purchases/{c.name}/rating"),
            cells.year(c.term_years, f"purchases/{c.name}/term_years"),
            cells.basis_points(c.spread_bp, f"purchases/{c.name}/spread_bp", "M-24"),
            cells.percent(c.weight, f"purchases/{c.name}/weight")))
        for c in reading.study.purchases.classes
    ]  # fmt: skip
    if not rows:
        none = tuple(cells.quiet("none", "purchases/none") for _ in range(4))
        rows = [Row(name="Cash only", cells=none)]
    share = cells.percent(reading.study.purchases.share_of_cash_invested, "purchases/share").shown
    return Table(
        number="8.3", caption="What positive cash buys",
        basis=f"Non-callable bonds at par (M-28); {share} of positive cash is invested, the rest stays in cash. "
              "Spread continuously compounded over Treasury.",
        row_head="Class", rows=tuple(rows),
        columns=(Column(name="Rating", words=True), Column(name="Term", unit="years"), Column(name="Spread", unit="bp"),
                 Column(name="Weight", unit="%")),
    )  # fmt: skip


def _spreads(reading: Reading) -> Table:
    frame = reading.study.tables.class_spreads
    lives = sorted({float(life) for life in frame["life_years"]})
    found = {
        (str(r), float(life)): float(bp)
        for r, life, bp in zip(frame["rating"], frame["life_years"], frame["spread_bp"], strict=True)
    }
    ratings = sorted({str(r) for r in frame["rating"]}, key=credit_order)

    def cell(rating: str, life: float) -> Cell:
        key = f"class_spreads/{rating}/{life:g} years"
        return cells.basis_points(found.get((rating, life), float("nan")), key, "M-24")

    rows = tuple(Row(name=rating, cells=tuple(cell(rating, life) for life in lives)) for rating in ratings)
    columns = tuple(Column(name=f"{life:g} years", unit="bp") for life in lives)
    return Table(
        number="8.4", caption="Class spreads by rating and remaining life",
        basis="bp, continuously compounded over Treasury, from the study's table.",
        row_head="Rating", columns=columns, rows=rows,
        why_missing=f"{NOT_AVAILABLE}: the study's table has no such pair; between lives it is read by interpolation",
    )  # fmt: skip
