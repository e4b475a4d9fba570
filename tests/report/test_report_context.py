"""The typed context: every field told, every field printed, every address traceable."""

import re
from dataclasses import fields, is_dataclass
from decimal import Decimal
from math import fsum
from pathlib import Path

import pytest

import projector.report
from projector.report.cautions import Caution
from projector.report.context import (
    assets,
    assumptions,
    calls,
    closing,
    glance,
    liabilities,
    page,
    results,
    scenarios,
    scope,
)
from projector.report.glossary import Term
from projector.report.method import Formula, Limit
from projector.report.numbers import as_number
from projector.report.parts import ADDING_NOTE, Cell, Chart, Column, Row, Table
from projector.report.render import ADDRESS_COLUMNS, addresses_of
from projector.report.sections import Heading, Placed

TEMPLATES = Path(projector.report.__file__).parent / "templates"
RECORDS = (
    Caution, Cell, Chart, Formula, Limit, Term, Heading, Placed, glance.Glance, glance.Fact, scope.Scope, assets.Assets,
    liabilities.Liabilities, scenarios.Scenarios, page.Method, page.Guide, page.Masthead, page.Page,
    assumptions.Assumptions, results.Results, calls.Calls, closing.Checks, closing.Reproduce,
    closing.Cautions, closing.Appendix,
)  # fmt: skip
USED = {  # template -> name in it -> record
    "s01_glance": {"g": glance.Glance, "fact": glance.Fact},
    "s02_guide": {"g": page.Guide},
    "s03_scope": {"s": scope.Scope},
    "s04_assets": {"a": assets.Assets},
    "s05_liabilities": {"l": liabilities.Liabilities},
    "s06_scenarios": {"s": scenarios.Scenarios},
    "s07_method": {"m": page.Method, "l": Limit},
    "s08_assumptions": {"a": assumptions.Assumptions},
    "s09_results": {"r": results.Results},
    "s10_calls": {"c": calls.Calls},
    "s15_checks": {r"page\.checks": closing.Checks},
    "s16_reproduce": {"r": closing.Reproduce},
    "s17_cautions": {"c": closing.Cautions, "item": Caution},
    "s18_glossary": {"t": Term},
    "sA_appendix": {r"page\.appendix": closing.Appendix},
    "contents": {"p": Placed},
}


@pytest.mark.parametrize("record", RECORDS, ids=lambda record: record.__name__)
def test_limit_every_field_says_what_it_is_and_in_which_unit(record):
    assert is_dataclass(record)
    for item in fields(record):
        assert item.metadata["help"], item.name
        assert item.metadata["unit"], item.name


@pytest.mark.parametrize("template", USED)
def test_order_the_templates_use_exactly_the_names_of_the_context(template):
    text = (TEMPLATES / f"{template}.html.j2").read_text(encoding="utf-8")
    for name, record in USED[template].items():
        used = set(re.findall(rf"(?<![\w.]){name}\.([a-z_]+)", text))
        assert used == {item.name for item in fields(record)}, name


def test_order_page_and_masthead_are_used_in_full():
    text = " ".join(path.read_text(encoding="utf-8") for path in sorted(TEMPLATES.glob("*.j2")))
    assert set(re.findall(r"page\.head\.([a-z_]+)", text)) == {item.name for item in fields(page.Masthead)}
    assert set(re.findall(r"page\.([a-z_]+)", text)) == {item.name for item in fields(page.Page)}


def test_limit_no_figure_is_typed_in_a_template():
    for path in sorted(TEMPLATES.glob("*.html.j2")):
        text = path.read_text(encoding="utf-8")
        text = re.sub(r"\{#.*?#\}|\{%.*?%\}|\{\{.*?\}\}", " ", text, flags=re.DOTALL)
        text = re.sub(r'<a href="#T[^"]+">[^<]*</a>|<style>.*?</style>', " ", text, flags=re.DOTALL)
        text = re.sub(r"<[^>]+>", " ", text).replace("AG 53", "")
        text = re.sub(r"Table \d+\.\d+", "Table", text)
        assert re.findall(r"\d+", text) == [], path.name


def test_limit_every_address_returns_the_full_value_that_rounds_to_the_print(context):
    for table in context.tables():
        for address, _, _, cell in table.addressed():
            if cell.look != "number" or cell.style == "general":
                continue
            shown = as_number(cell.shown)
            half = Decimal(10) ** shown.as_tuple().exponent / 2
            gap = abs(shown - Decimal(cell.value) / Decimal(cell.scale))
            assert gap <= half * (1 + Decimal("1e-9")), (address, cell)


def test_known_addresses_are_a_table_with_one_line_for_each_cell(context):
    frame = addresses_of(context)
    assert tuple(frame.columns) == ADDRESS_COLUMNS
    assert frame["address"].is_unique
    assert len(frame) == sum(len(t.rows) * len(t.columns) for t in context.tables())
    line = frame.set_index("address").loc["T1.1.7.1"]
    assert (line["key"], line["formula"], line["unit"]) == ("measures.pv_ending_earned_rate/all/S7", "M-3", "currency")
    assert line["row_name"] == "S7 Pop down"
    assert (frame["key"] != "").all()
    assert frame["value"].notna().eq(frame["word"] == "").all()


def test_order_one_key_has_one_value_wherever_it_is_printed(context):
    frame = addresses_of(context)
    assert frame.groupby("key")["value"].nunique().max() == 1


def test_known_full_values_are_those_of_the_results(context, results):
    frame = addresses_of(context).set_index("key")
    for row in results.measures.to_dict("records"):
        key = f"measures.ending_statement_surplus/{row['segment']}/{row['scenario']}"
        assert set(frame.loc[[key], "value"]) == {row["ending_statement_surplus"]}


def test_order_totals_add_in_full_values_and_the_note_stands_only_where_prints_do_not(context):
    noted = []
    for table in context.tables():
        totals = [row for row in table.rows if row.total]
        misses = False
        for j, column in enumerate(table.columns):
            if not (column.adds and totals):
                continue
            items = [row.cells[j] for row in table.rows if not row.total]
            full = fsum(cell.value for cell in items)
            assert abs(full - totals[0].cells[j].value) <= 1e-9 * max(1.0, fsum(abs(c.value) for c in items)), (
                table.number
            )
            misses |= sum(as_number(c.shown) for c in items) != as_number(totals[0].cells[j].shown)
        assert table.note_on_adding == (ADDING_NOTE if misses else "")
        noted.append(misses)
    assert any(noted)
    assert not all(noted)


def _cell(shown: str, value: float) -> Cell:
    return Cell(shown=shown, value=value, unit="currency", key="k", formula="", look="number", scale=1.0, style="one")


def _table(*cells: tuple[str, float], columns: int = 1) -> Table:
    last = len(cells) - 1
    rows = tuple(Row(name=str(k), cells=(_cell(*c),) * columns, total=k == last) for k, c in enumerate(cells))
    heads = tuple(Column(name="A", adds=True) for _ in range(columns))
    return Table(number="1.1", caption="C", basis="$", row_head="R", columns=heads, rows=rows)


def test_known_note_on_adding():
    assert _table(("0.3", 0.34), ("0.3", 0.34), ("0.7", 0.68)).note_on_adding == ADDING_NOTE
    assert _table(("0.3", 0.3), ("0.3", 0.3), ("0.6", 0.6)).note_on_adding == ""


def test_limit_a_wide_table_is_printed_in_pieces_whose_columns_run_on():
    table = _table(("1.0", 1.0), ("1.0", 1.0), columns=17)
    assert [list(piece) for piece in table.pieces] == [list(range(8)), list(range(8, 16)), [16]]
    assert table.address(1, 17) == "T1.1.1.17"


def test_limit_a_long_table_prints_its_first_lines_only():
    table = _table(*[("1.0", 1.0)] * 501)
    assert len(table.printed_rows) == 25
    assert len(_table(*[("1.0", 1.0)] * 500).printed_rows) == 500


def test_limit_a_missing_figure_without_reason_is_refused():
    missing = Cell(shown="[n/a]", value="", unit="-", key="k", formula="", look="quiet", scale=1.0, style="text")
    with pytest.raises(ValueError, match="without a reason"):
        Table(number="1.1", caption="C", basis="$", row_head="R", columns=(Column(name="A"),),
              rows=(Row(name="r", cells=(missing,)),))  # fmt: skip


def test_limit_a_row_of_another_width_is_refused():
    with pytest.raises(ValueError, match="another number of cells"):
        Table(
            number="1.1",
            caption="C",
            basis="$",
            row_head="R",
            columns=(),
            rows=(Row(name="r", cells=(_cell("1", 1),)),),
        )
