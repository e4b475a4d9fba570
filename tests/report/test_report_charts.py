"""Charts: what is drawn reaches the page cleaned, in colours that can be told apart from the paper."""

import itertools
import re
from pathlib import Path

import pytest

import projector.report
from projector.report.charts import calls, canvas, flows, paths, result
from projector.report.charts.calls import CallRow
from projector.report.svg import finished

STYLE = (Path(projector.report.__file__).parent / "templates" / "style.css.j2").read_text(encoding="utf-8")


def luminance(colour: str) -> float:
    """Relative luminance of an sRGB colour. Source: WCAG 2.2, definition of relative luminance (cited from memory)."""
    parts = [int(colour[k : k + 2], 16) / 255 for k in (1, 3, 5)]
    linear = [c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in parts]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def contrast(a: str, b: str) -> float:
    """Contrast ratio of two colours, 1 to 21. Source: WCAG 2.2, success criterion 1.4.3 (cited from memory)."""
    high, low = sorted((luminance(a), luminance(b)), reverse=True)
    return (high + 0.05) / (low + 0.05)


def test_known_contrast_of_black_on_white_is_21():
    assert contrast("#000000", "#ffffff") == pytest.approx(21.0)
    assert contrast("#767676", "#ffffff") == pytest.approx(4.54, abs=0.01)  # the known lightest grey that meets 4.5


@pytest.mark.parametrize("colour", [canvas.INK, canvas.GREY, canvas.DEEP_VERMILLION, canvas.BLUE])
def test_limit_text_on_the_white_card_meets_4_5(colour):
    assert contrast(colour, "#ffffff") >= 4.5


@pytest.mark.parametrize(
    "colour", [canvas.MARK_GREY, canvas.VERMILLION, canvas.BLUE, canvas.SKY, canvas.INK, canvas.GREY]
)
def test_limit_marks_on_the_white_card_meet_3(colour):
    assert contrast(colour, "#ffffff") >= 3.0


def test_limit_white_figures_on_blue_and_grey_edges_on_pale_fills():
    assert contrast("#ffffff", canvas.BLUE) >= 4.5
    assert contrast(canvas.GREY, canvas.PALE_BLUE) >= 3.0


def variables(block: str) -> dict[str, str]:
    return dict(re.findall(r"--([a-z]+): (#[0-9a-f]{6})", block))


@pytest.mark.parametrize("scheme", ["light", "dark", "print"])
def test_limit_text_colours_of_every_scheme_meet_4_5(scheme):
    blocks = re.findall(r":root \{[^}]*\}", STYLE)
    found = variables(blocks[("light", "dark", "print").index(scheme)])
    for name in ("ink", "grey", "low", "link"):
        assert contrast(found[name], found["paper"]) >= 4.5, name
    assert contrast(found["firm"], found["paper"]) >= 3.0


def test_order_no_colour_outside_the_palette_reaches_a_chart(context):
    known = {value for name, value in vars(canvas).items() if name.isupper() and str(value).startswith("#")} | {
        "#ffffff"
    }
    for chart in context.charts():
        assert set(re.findall(r"#[0-9a-f]{6}\b", chart.svg)) <= known, chart.number


def test_limit_text_in_charts_is_text_of_at_least_seven_and_a_half_units(context):
    for chart in context.charts():
        sizes = [float(size) for size in re.findall(r"font-size: ([\d.]+)px", chart.svg)]
        sizes += [float(size) for size in re.findall(r"font: (?:\d+ )?([\d.]+)px", chart.svg)]
        assert sizes, chart.number
        assert min(sizes) >= 7.5
        assert "font-family" not in chart.svg


def test_order_coordinates_are_rounded_and_ids_carry_the_prefix(context):
    for chart in context.charts():
        assert re.findall(r"\d+\.\d{3,}", re.sub(r"<desc.*?</desc>", "", chart.svg)) == []
        prefix = "c" + chart.number.replace(".", "")
        ids = re.findall(r'\bid="([^"]+)"', chart.svg)
        assert ids
        assert all(name.startswith(f"{prefix}-") for name in ids)


def test_known_finishing_escapes_names():
    drawn = result.draw(["S1 <b>"], [1.0], [-1.0], ("left", "right"))
    done = finished(drawn, prefix="x", title='<i>"&', text="<script>")
    assert "<script>" not in done
    assert "&lt;i&gt;" in done
    assert "S1 &lt;b&gt;" in done


@pytest.mark.parametrize("values", [[0.0], [5.0, -3.0], [-1.0, -2.0]])
def test_limit_the_result_chart_holds_zero_positive_and_negative(values):
    drawn = result.draw([f"S{k}" for k in range(len(values))], values, values, ("a", "b"))
    assert "−0.0" not in drawn


def test_limit_surplus_of_a_single_point_is_drawn():
    assert "<svg" in paths.draw_surplus([paths.SurplusPanel("S1", "end 0.0", (0.0,))], "$ million", "below zero")


def test_limit_flows_of_one_year_are_drawn():
    assert "<svg" in flows.draw([1.0], [2.0])


def test_order_the_call_map_leaves_a_gap_between_years_and_labels_each_in_its_middle():
    rows = [CallRow(2028, 0.05, 3, 9, (3.0,)), CallRow(2030, 0.06, 5, 9, (5.0,)), CallRow(2030, 0.04, 5, 9, (None,))]
    groups = calls.merged(rows)
    assert groups == [("2028 (1)", 1), ("2030 (2)", 2)]
    assert calls._heights(groups) == ([0.0, 2.6, 3.6], [(0.0, "2028 (1)"), (3.1, "2030 (2)")])
    assert "2028 (1)" in calls.draw_map(["S1 Level"], ["2 of 3"], rows, 10.0)


def test_limit_years_with_few_securities_share_a_label_so_that_none_leaves_the_chart():
    crowded = [CallRow(2025, 0.05, 1, 9, (None,))] * 200 + [CallRow(y, 0.05, 9, 9, (None,)) for y in range(2026, 2056)]
    groups = calls.merged(crowded)
    assert sum(count for _, count in groups) == 230
    assert groups[0] == ("2025 (200)", 200)
    assert groups[-1][0].startswith("20")
    assert "–55" in groups[-1][0]
    heights, labels = calls._heights(groups)
    step = calls.TALLEST / (heights[-1] + 2.0)
    tops = [middle * step for middle, _ in labels]
    assert min(b - a for a, b in itertools.pairwise(tops)) >= calls.LABEL * 0.95


def test_limit_tick_labels_are_whole_where_they_are_whole():
    assert canvas._tick(20.0, 0) == "20"
    assert canvas._tick(2.5, 0) == "2.5"
    assert canvas._tick(-20.0, 0) == "−20"


def test_limit_scales_hold_every_value_and_have_width():
    low, high = canvas.bounds([0.0, 0.0])
    assert low <= 0.0 < high
    low, high = canvas.bounds([-3.0, 5.0])
    assert low < -3.0
    assert high > 5.0
