"""C2: maturity and callability of the holdings at the valuation date."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from matplotlib.axes import Axes
from matplotlib.patches import Rectangle

from projector.report.charts import canvas
from projector.report.charts.canvas import BLUE, GREY, PALE_BLUE


@dataclass(frozen=True)
class Ladder:
    """Par by upper bound of years, in three kinds; `title` is what the years count to."""

    title: str
    bounds: tuple[str, ...]
    fixed: tuple[float, ...]
    make_whole: tuple[float, ...]
    stated: tuple[float, ...]


KINDS = (
    ("callable at\nstated prices", BLUE),
    ("make-whole,\nthen par call", PALE_BLUE),
    ("not callable", "white"),
)


def draw(ladders: Sequence[Ladder]) -> str:
    """Stacked columns, callable at stated prices on top, swatches in the same order."""
    with canvas.settings():
        figure = canvas.sheet(2.46)
        top = max(_tallest(ladder) for ladder in ladders) * 1.06 or 1.0
        for index, ladder in enumerate(ladders):
            left = 0.5 + index * 2.55
            axes = canvas.place(figure, left, 0.3, 2.35, 1.75)
            _columns(axes, ladder, top)
            axes.tick_params(labelleft=index == 0)
            canvas.write(figure, left, 0.16, ladder.title, fontsize=canvas.TEXT, fontweight="bold")
            canvas.write(figure, left, 2.4, "years, up to (bins of unequal width)", fontsize=canvas.SMALL, color=GREY)
        key = canvas.place(figure, 5.6, 0.3, 1.38, 1.2)
        _key(key)
        return canvas.raw_svg(figure)


def _tallest(ladder: Ladder) -> float:
    return max((a + b + c for a, b, c in zip(ladder.fixed, ladder.make_whole, ladder.stated)), default=0.0)


def _columns(axes: Axes, ladder: Ladder, top: float) -> None:
    places = range(len(ladder.bounds))
    base = [0.0] * len(ladder.bounds)
    for amounts, (_, colour) in zip((ladder.fixed, ladder.make_whole, ladder.stated), reversed(KINDS)):
        axes.bar(places, amounts, 0.74, bottom=base, facecolor=colour, edgecolor=GREY, linewidth=0.6)
        base = [a + b for a, b in zip(base, amounts)]
    axes.set_xticks(list(places), ladder.bounds)
    axes.tick_params(axis="x", length=0)
    axes.set_ylim(0.0, top)
    canvas.plain_ticks(axes.yaxis)


def _key(axes: Axes) -> None:
    axes.set_axis_off()
    axes.set_xlim(0, 1.38)
    axes.set_ylim(1.2, 0)
    for k, (name, colour) in enumerate(KINDS):
        axes.add_patch(Rectangle((0.0, 0.06 + 0.34 * k), 0.14, 0.14, facecolor=colour, edgecolor=GREY, linewidth=0.6))
        axes.text(0.2, 0.13 + 0.34 * k, name, va="center", fontsize=canvas.SMALL, linespacing=1.1)
