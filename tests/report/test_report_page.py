"""The page as a reader and a machine meet it: structure, addresses, wording, text alternatives."""

import itertools
import re
from collections import Counter

import pytest

from projector.report.sections import HEADINGS, REQUIREMENTS

NOT_SAID = (
    r"pass(es|ed)?", r"fail(s|ed|ing|ure)?", "adequate", "sufficient", "safe", "green", "red", "deficien(t|cy)",
    "required", "recommended", "needed", "chance", "exact(ly)?", "perfect(ly)?", "true value", "conservative",
    "prudent", "impossible", "probable", "worst case", "in my opinion", "make good", "moderately adverse",
    "the model thinks", "issuer will", "expected",
)  # fmt: skip


def test_order_the_sections_stand_in_order_each_with_its_question(tree):
    sections = tree.all("section")
    assert [node.attrs["id"] for node in sections] == [h.id for h in HEADINGS]
    for node, heading in zip(sections, HEADINGS, strict=True):
        (name,) = node.all("h2")
        assert name.text().endswith(heading.name)
        (question,) = [p for p in node.all("p") if p.attrs.get("class") == "question"]
        assert [em.text() for em in question.all("em")] == [heading.question]


def test_order_one_title_no_skipped_level_and_every_section_in_the_contents(tree):
    levels = [int(node.tag[1]) for node in tree.all("h1", "h2", "h3", "h4")]
    assert levels[0] == 1
    assert levels.count(1) == 1
    assert all(b - a <= 1 for a, b in itertools.pairwise(levels))
    (nav,) = tree.all("nav")
    linked = [a.attrs["href"] for a in nav.all("ol")[0].all("a")]
    assert linked == [f"#{h.id}" for h in HEADINGS]


def test_known_memorandum_items_point_at_sections_that_exist(tree):
    ids = {node.attrs.get("id") for node in tree.walk()}
    assert {f"s{placed.section}" for placed in REQUIREMENTS if placed.section} <= ids


def test_limit_ids_are_unique_and_no_reference_dangles(tree, html):
    ids = Counter(node.attrs["id"] for node in tree.walk() if "id" in node.attrs)
    assert [name for name, count in ids.items() if count > 1] == []
    wanted = set(re.findall(r'href="#([^"]+)"', html)) | set(re.findall(r"url\(#([^)]+)\)", html))
    for node in tree.walk():
        for name in ("aria-labelledby", "aria-describedby"):
            wanted |= set(node.attrs.get(name, "").split())
    assert wanted - set(ids) == set()


def test_limit_one_file_without_script_or_request(tree, html):
    (policy,) = [m for m in tree.all("meta") if m.attrs.get("http-equiv") == "Content-Security-Policy"]
    assert policy.attrs["content"].startswith("default-src 'none'; style-src 'unsafe-inline'; img-src data:")
    assert tree.all("script", "iframe", "link", "img", "object", "form", "input", "base") == []
    assert not re.search(r'(src|href)="(?!#)', html)
    assert "@import" not in html
    assert [name for node in tree.walk() for name in node.attrs if name.startswith("on")] == []


def test_known_language_title_and_opening(tree, context):
    assert tree.all("html")[0].attrs["lang"] == "en"
    title = tree.all("title")[0].text()
    assert title == "Reserve adequacy report, Meridian Example Life, December 31, 2025"
    first = tree.all("section")[0].text()
    for said in ("Criterion (study file, fixed on 2026-01-20 before the results)",
                 "the opinion is the appointed actuary's", context.glance.verdict,
                 "Not calculated in this version"):  # fmt: skip
        assert said in first
    assert "INVENTED DATA" in tree.all("header")[0].text()
    assert "$ million" in tree.all("header")[0].text()


def test_limit_no_figure_is_missing_or_minus_zero(tree):
    seen = tree.text()
    for bad in (
        r"\bnan\b",
        r"\bNaN\b",
        r"\binf\b",
        r"\bNone\b",
        r"[-−]0(\.0+)?(?![\d.])",
        r"\bTrue\b",
        r"\bFalse\b",
        "NaT",
    ):
        assert re.findall(bad, seen) == [], bad
    assert re.findall(r"(?<![\w.])-\d", seen) == []  # a hyphen never stands for the minus sign


def test_limit_every_table_has_caption_scopes_and_equal_rows(tree):
    tables = tree.all("table")
    assert len(tables) > 30
    for table in tables:
        (caption,) = table.all("caption")
        assert re.match(r"Table [0-9A]+\.\d+\w*", caption.text())
        assert {th.attrs.get("scope") for th in table.all("th")} <= {"col", "row"}
        widths = {sum(1 for c in row.children if getattr(c, "tag", "") in ("td", "th")) for row in table.all("tr")}
        assert len(widths) == 1, caption.text()
        assert all(cell.text() for cell in table.all("td", "th")), caption.text()


def test_limit_every_table_names_its_unit_or_holds_words(context):
    units = ("$ million", "USD", "%", "bp", "per 100", "Count", "Currency", "currency", "SHA-256")
    for table in context.tables():
        numbers = any(cell.look == "number" for row in table.rows for cell in row.cells)
        heads = " ".join(column.unit for column in table.columns)
        assert not numbers or any(unit in f"{table.basis} {heads}" for unit in units), table.number


def test_limit_every_cell_is_printed_at_its_address(context, tree):
    shown = {node.attrs["id"]: node.text() for node in tree.all("td")}
    every = {address: cell.shown for table in context.tables() for address, _, _, cell in table.addressed()}
    assert shown == {address: " ".join(text.split()) for address, text in every.items()}


def test_limit_every_picture_has_a_name_and_a_text_that_leads_to_a_table(tree, context):
    numbers = {table.number for table in context.tables()}
    pictures = tree.all("svg")
    assert len(pictures) == 8
    for picture in pictures:
        assert picture.attrs["role"] == "img"
        assert picture.all("title")[0].text()
        text = picture.all("desc")[0].text()
        assert 60 <= len(text) <= 500, text
        assert set(re.findall(r"\b[0-9A]+\.\d+\b", text.split("Numbers:")[1])) <= numbers
        assert picture.all("style", "metadata") == []


@pytest.mark.parametrize("number", ["1.1", "5.1", "6.1", "9.1", "10.1"])
def test_order_figures_in_a_picture_text_are_those_of_its_table(number, context):
    (chart,) = [chart for chart in context.charts() if chart.number == number]
    said, _, where = chart.text.partition("Numbers:")
    shown = {
        cell.shown
        for table in context.tables()
        if re.search(rf"\b{re.escape(table.number)}\b", where)
        for row in table.rows
        for cell in row.cells
    }
    figures = set(re.findall(r"−?\d[\d,]*\.\d+", said))
    assert figures
    assert figures - shown == set()


def test_limit_words_of_an_opinion_or_of_odds_are_absent(tree):
    seen = tree.text(skip=("style", "th"), skip_class="study").lower()
    assert [word for word in NOT_SAID if re.search(rf"\b{word}\b", seen)] == []


def test_limit_every_not_applicable_has_a_reason(tree):
    seen = tree.text()
    for found in re.finditer("not applicable", seen, re.IGNORECASE):
        assert seen[found.end() :].startswith(", because "), seen[found.start() : found.end() + 60]
    for number in ("11", "12", "13", "14"):
        (section,) = [s for s in tree.all("section") if s.attrs["id"] == f"s{number}"]
        assert "Not applicable, because this version does not calculate it:" in section.text()


def test_known_the_twenty_cautions_are_numbered(tree, context):
    items = [node for node in tree.all("li") if node.attrs.get("id", "").startswith("caution-")]
    assert [node.attrs["id"] for node in items] == [f"caution-{k}" for k in range(1, 21)]
    assert "never an opinion" in items[16].text()


def test_known_reproduction_prints_command_and_digests_and_nothing_of_the_machine(tree, results):
    (section,) = [s for s in tree.all("section") if s.attrs["id"] == "s16"]
    seen = section.text()
    assert "projector run scenarios/example" in seen
    for digest in (results.study.input_digest, results.set_digest, *results.result_digests.values()):
        assert digest in seen
    everything = tree.text().lower()
    for word in ("python", "numpy", "matplotlib", "pandas", "linux", "windows", "/home", "/tmp"):
        assert word not in everything


def test_limit_size_of_page_and_charts(html, context, capsys):
    largest = max(context.charts(), key=lambda chart: len(chart.svg))
    print(f"page {len(html.encode()):,} bytes; largest chart {largest.number}, {len(largest.svg):,} bytes")
    assert len(html.encode()) < 2_000_000
    assert len(largest.svg) < 150_000


def test_limit_folded_tables_name_their_sheet(tree):
    for summary in tree.all("summary")[1:]:
        assert re.search(r"^Table \S+\..*\(workbook, sheet \S+\)$", summary.text())


def test_known_formulas_cited_by_cells_exist(context):
    known = {row.anchor for row in context.method.formulas.rows}
    cited = {cell.formula for table in context.tables() for _, _, _, cell in table.addressed()} - {""}
    assert cited <= known
    captions = " ".join(table.basis for table in context.tables())
    assert set(re.findall(r"M-\d+", captions)) <= known
