"""The drawing of a call story as an SVG file that stands alone: no script, no font, no style from elsewhere."""

from __future__ import annotations

from typing import Any

from markupsafe import Markup

from projector.questions.records import CallStory
from projector.report.call_story import at, closest, subject, title, when
from projector.report.charts.canvas import cut
from projector.report.charts.decision import DecisionDrawing, draw
from projector.report.numbers import clean, count_of, fixed, percent
from projector.report.svg import finished

FONTS = "'Helvetica Neue', Helvetica, Arial, 'Liberation Sans', sans-serif"
HEAD = '<?xml version="1.0" encoding="UTF-8"?>\n'
SCALE = 4 / 3  # CSS pixels in a point


def story_svg(story: CallStory) -> str:
    """The whole file as text. The story has a live right; without one there is nothing to draw."""
    picture = finished(draw(drawing_of(story)), prefix="call", title=title(story), text=alternative(story))
    return HEAD + standing_alone(picture) + "\n"


def drawing_of(story: CallStory) -> DecisionDrawing:
    """The months as series for the two panels; accrued interest is on both sides of the comparison and taken off."""
    months, row = story.months, marked_row(story)
    called = story.decided is not None
    return DecisionDrawing(
        name=subject(story),
        rule=f"On {cut(clean(story.scenario_name), 30)} the issuer calls where refunding falls to the critical yield, "
        "and going on costs as much as calling",
        months=months["month"].tolist(),
        refunding=(100.0 * months["refunding_yield"]).tolist(),
        critical=(100.0 * months["critical_yield"]).tolist(),
        continuation=(months["continuation"] - months["accrued"]).tolist(),
        upper_bound=(months["upper_bound"] - months["accrued"]).tolist(),
        bar=(months["bar"] - months["accrued"]).tolist(),
        marked=row["month"],
        is_call=called,
        marked_words=f"{'called' if called else 'came closest'} in {when(row)}",
    )


def marked_row(story: CallStory) -> dict[str, Any]:
    """The month of the call, or the one that came closest."""
    return closest(story) if story.decided is None else at(story, story.decided)


def alternative(story: CallStory) -> str:
    """What the picture shows, in words, for those who do not see it."""
    row = marked_row(story)
    what = "The call" if story.decided is not None else "Closest"
    critical = row["critical_yield"]
    both = "none" if critical != critical else percent(critical, 2)
    going_on = row["continuation"] if row["continuation"] == row["continuation"] else row["upper_bound"]
    return clean(
        "Two panels over the years after the valuation date. Above, the issuer's refunding yield and the yield at "
        "which going on and calling cost the same. Below, per 100 and less accrued interest, the issuer's cost of "
        "going on, its upper bound, and the cost of calling. "
        f"A right is live in {count_of(len(story.live), 'month')}. {what}: {when(row)}, refunding yield "
        f"{percent(row['refunding_yield'], 2)} against {both}, going on {fixed(going_on, 2)} against "
        f"{fixed(row['bar'], 2)} with accrued interest."
    )


def standing_alone(picture: Markup) -> str:
    """Inline SVG as a file: its name space, a size in pixels, the page's fonts, and the white card beneath."""
    text = str(picture)
    box = text.split('viewBox="', 1)[1].split('"', 1)[0]
    width, height = (float(part) * SCALE for part in box.split()[2:4])
    size = f'width="{width:.0f}" height="{height:.0f}"'
    start, rest = text.split(">", 1)
    card = '<rect width="100%" height="100%" fill="#ffffff" />'
    described = rest.split("</desc>", 1)
    head = start.replace("<svg ", f'<svg xmlns="http://www.w3.org/2000/svg" {size} font-family="{FONTS}" ', 1)
    return f"{head}>{described[0]}</desc>{card}{described[1]}"
