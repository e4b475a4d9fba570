"""Other studies: one scenario, many, no callables, nothing called, small, short, hostile."""

import re
from functools import cache
from pathlib import Path

import page_reading
import pytest
from synthetic_results import HOSTILE, Options, build, without_rows

from projector.report.context.page import Page, page
from projector.report.render import css_text, render_report, rendered


@cache
def made(options: Options) -> Page:
    """The context of a study, built once for all tests that ask for it."""
    return page(build(options), "projector run x")


MANY = Options(securities=700, months=120)
SIXTEEN = Options(scenarios=16, months=60)
NONE_MET = Options(lift=-0.06, shortfall=True, months=360)
NO_CALLABLE = Options(callable=False, calls=False, months=60)
VARIANTS = {
    "one scenario and segment": Options(scenarios=1, segments=1),
    "sixteen scenarios": SIXTEEN,
    "nothing called": Options(calls=False, months=60),
    "nothing callable": NO_CALLABLE,
    "many securities": MANY,
    "short": Options(months=12),
    "none met": NONE_MET,
    "market": Options(criterion_measure="market_surplus", months=60),
    "no prior": Options(prior="", months=60),
}


@pytest.mark.parametrize("name", VARIANTS)
def test_limit_other_studies_give_sound_pages(name):
    tree = page_reading.parse(rendered(made(VARIANTS[name])))
    ids = [node.attrs["id"] for node in tree.walk() if "id" in node.attrs]
    assert len(ids) == len(set(ids))
    seen = tree.text()
    assert re.findall(r"\bnan\b|\bNone\b|[-−]0\.0\b", seen) == []
    for picture in tree.all("svg"):
        assert 60 <= len(picture.all("desc")[0].text()) <= 500
    linked = {a.attrs["href"].removeprefix("#") for a in tree.all("a")}
    assert linked <= set(ids)


def test_known_small_study_is_in_thousands():
    context = page(build(Options(scale=0.01, months=60)), "x")
    assert context.head.unit == "$ thousand"
    assert "$ thousand" in context.glance.table.basis
    assert "million" not in context.glance.verdict + " ".join(context.glance.breaks)


def test_known_none_met_says_so_and_names_the_shortfall():
    glance = made(NONE_MET).glance
    assert glance.verdict == "Criterion not met in any of 7 scenarios."
    first = "Assets and borrowing ran out in Deferred annuities in S7 Pop down from month 291 (2050-03)"
    assert glance.shortfall.startswith(first)
    assert glance.shortfall.endswith("No cash moves between segments; their surpluses are added.")


def test_known_all_met_names_the_smallest_margin():
    glance = made(Options(lift=0.02, months=60)).glance
    assert glance.verdict == "Criterion met in 7 of 7 scenarios. Smallest margin: $25.1 million in S4 Pop up."
    assert glance.segments == ""


def test_limit_many_scenarios_name_seven_on_page_one_and_hold_all_in_the_table():
    context = made(SIXTEEN)
    assert len(context.glance.table.rows) == 7
    assert context.glance.shown_of.endswith("all 16 are in table 9.1.")
    assert len({row.name for row in context.results.surplus.rows}) == 16
    assert "A.4" in {table.number for table in context.tables()}  # segments follow in the appendix
    assert context.glance.segments.endswith("(table A.4).")
    assert "Table A.4 lists every segment" in context.cautions.items[15].text


def test_limit_over_three_hundred_callables_are_drawn_by_year():
    context = made(MANY)
    assert "one row for each year of first call date" in context.calls.map.text
    assert len(context.calls.map.svg) < 150_000


def test_limit_three_hundred_callables_stay_under_the_size():
    context = made(Options(securities=360))
    assert "one row a security" in context.calls.map.text
    assert len(context.calls.map.svg) < 150_000
    assert len(rendered(context).encode()) < 2_000_000


def test_limit_a_long_list_of_securities_points_to_the_workbook():
    context = made(MANY)
    (table,) = [table for table in context.tables() if table.number == "A.2"]
    assert len(table.printed_rows) == 25
    assert table.rest.startswith("All 700 lines are in the workbook, sheet A.2; their par is $2,6")


def test_limit_nothing_callable_is_said():
    html = rendered(made(NO_CALLABLE))
    assert "Not applicable, because no callable security is held." in html


def test_limit_decisions_all_settled_by_bounds_are_said():
    results = build(Options(months=120))
    results.decisions["continuation"] = float("nan")
    html = render_report(results, "x")
    assert "Not applicable, because every decision was settled by a bound." in html


def test_limit_empty_special_cases_identities_and_decisions_are_printed():
    html = render_report(without_rows(build(Options(months=60)), "special_cases", "decisions"), "x")
    assert "No case found" in html


def test_limit_hostile_text_is_escaped_and_the_tree_stays_sound(hostile):
    tree = page_reading.parse(hostile)
    assert tree.all("script") == []
    assert "<script>" not in hostile
    assert "&lt;script&gt;alert" in hostile
    assert "{{ 7*7 }}" in tree.text()
    assert "\u202e" not in hostile
    ids = [node.attrs["id"] for node in tree.walk() if "id" in node.attrs]
    assert len(ids) == len(set(ids))


def test_limit_hostile_text_cannot_leave_the_style_block(hostile):
    style = hostile[hostile.index("<style>") : hostile.index("</style>")]
    assert "script" not in style.replace("\\", "") or "<script" not in style
    assert style.count("{") == style.count("}")


def test_known_css_text_writes_every_odd_letter_as_its_number():
    assert css_text('a"}</style>') == '"a\\000022 \\00007d \\00003c \\00002f style\\00003e "'


def test_limit_dollar_signs_of_a_study_are_not_read_as_formulas(hostile):
    assert HOSTILE.startswith("<script>")
    assert "mathdefault" not in hostile
    assert "$a_b$" in page_reading.parse(hostile).text()


def test_order_no_file_of_the_report_reads_the_clock_or_the_machine():
    import projector.report

    folder = Path(projector.report.__file__).parent
    for path in sorted(folder.rglob("*.py")):
        text = path.read_text(encoding="utf-8")
        for word in (
            "time.time",
            "datetime.now",
            "date.today",
            "platform",
            "getpass",
            "os.environ",
            "socket",
        ):
            assert word not in text, path.name


def test_limit_a_measure_the_results_do_not_hold_is_printed_as_not_available_with_its_reason():
    results = build(Options(months=60))
    results.measures.loc[results.measures["scenario"] == "S2", ["pv_ending_earned_rate", "yield_given_up"]] = float(
        "nan"
    )
    seen = page_reading.parse(render_report(results, "x")).text()
    assert "[n/a]: the results hold no such figure for the scenario." in seen
    assert re.findall(r"\bnan\b", seen) == []
