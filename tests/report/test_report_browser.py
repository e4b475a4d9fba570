"""The page in a browser: one request, no fault of accessibility, no sideways scroll, page 1 on one page."""

import shutil

import pytest
from synthetic_results import Options, build

from projector.report.render import render_report

CHROMIUM = shutil.which("chromium")
pytestmark = [
    pytest.mark.browser,
    pytest.mark.long,
    pytest.mark.skipif(CHROMIUM is None, reason="no chromium on this machine"),
]
PAPERS = {"Letter": (702, 924), "A4": (680, 990)}  # printable width and height in CSS pixels within the page margins
SPACING = (  # WCAG 1.4.12
    "* { line-height: 1.5 !important; letter-spacing: .12em !important; word-spacing: .16em !important } "
    "p { margin-bottom: 2em !important }"
)


@pytest.fixture(scope="module")
def browser():
    sync_api = pytest.importorskip("playwright.sync_api", reason="playwright is not installed")
    with sync_api.sync_playwright() as driver:
        running = driver.chromium.launch(executable_path=CHROMIUM, args=["--no-sandbox"])
        yield running
        running.close()


@pytest.fixture(scope="module")
def address(tmp_path_factory, html):
    path = tmp_path_factory.mktemp("page") / "report.html"
    path.write_text(html, encoding="utf-8")
    return path.as_uri()


def opened(browser, address, width=1280, height=900, **options):
    page = browser.new_context(viewport={"width": width, "height": height}, **options).new_page()
    page.goto(address)
    return page


def test_limit_the_page_makes_one_request_and_logs_nothing(browser, address):
    page = browser.new_page()
    asked, said = [], []
    page.on("request", lambda request: asked.append(request.url))
    page.on("console", lambda message: said.append(message.text))
    page.goto(address)
    assert asked == [address]
    assert said == []


@pytest.mark.parametrize(("width", "scheme"), [(1440, "light"), (320, "light"), (900, "dark")])
def test_limit_axe_finds_nothing(browser, address, width, scheme):
    axe = pytest.importorskip("axe_playwright_python.sync_playwright", reason="axe is not installed").Axe()
    page = opened(browser, address, width, color_scheme=scheme, bypass_csp=True)
    tags = ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa", "best-practice"]
    found = axe.run(page, options={"runOnly": {"type": "tag", "values": tags}}).response["violations"]
    assert [(fault["id"], fault["nodes"][0]["html"][:120]) for fault in found] == []


@pytest.mark.parametrize("width", [320, 900, 1280, 1440])
def test_limit_only_boxes_scroll_sideways(browser, address, width):
    page = opened(browser, address, width)
    assert page.evaluate("document.documentElement.scrollWidth") == width
    page.add_style_tag(content=SPACING) if width > 320 else None
    page.evaluate("document.querySelectorAll('details').forEach(d => d.open = true)")
    assert page.evaluate("document.documentElement.scrollWidth") == width


def test_order_the_first_tab_stop_is_the_skip_link_and_focus_shows(browser, address):
    page = opened(browser, address)
    page.keyboard.press("Tab")
    assert page.evaluate("document.activeElement.className") == "skip"
    page.keyboard.press("Tab")
    outline = page.evaluate("getComputedStyle(document.activeElement).outlineWidth")
    assert outline == "3px"


def test_limit_closed_tables_print_open(browser, address):
    page = opened(browser, address)
    page.emulate_media(media="print")
    assert page.evaluate("document.getElementById('T9.2.41.7').getBoundingClientRect().height") > 5


@pytest.mark.parametrize("paper", PAPERS)
@pytest.mark.parametrize(
    "options",
    [Options(scenarios=1, months=60), Options(months=60), Options(scenarios=8, months=60),
     Options(scenarios=16, months=60),     Options(lift=0.05, months=60), Options(lift=-0.06, months=60)],
    ids=["one", "seven", "eight", "sixteen", "all met", "none met"],
)  # fmt: skip
def test_limit_page_one_prints_on_one_page(browser, tmp_path, options, paper):
    path = tmp_path / "report.html"
    path.write_text(render_report(build(options), "projector run x"), encoding="utf-8")
    width, height = PAPERS[paper]
    page = opened(browser, path.as_uri(), width)
    page.emulate_media(media="print")
    bottom = page.evaluate("document.getElementById('s1').getBoundingClientRect().bottom")
    assert bottom <= height, f"{bottom:.0f} of {height}"
