"""C7: what the assets consist of at stated years, the callable part on the base line."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from matplotlib.axes import Axes
from matplotlib.patches import Rectangle

from projector.report.charts import canvas
from projector.report.charts.canvas import BLUE, GREY, PALE_BLUE, SKY
from projector.report.numbers import fixed

KINDS = (
    ("cash", "white"),
    ("bought", PALE_BLUE),
    ("held, not callable", SKY),
    ("held, callable", BLUE),
)


@dataclass(frozen=True)
class MixPanel:
    """Shares in percent by year, from the base line up: callable, not callable, bought, cash."""

    name: str
    line: str
    shares: tuple[tuple[float, ...], ...]  # one tuple of four shares a year


def draw(panels: Sequence[MixPanel], years: Sequence[int]) -> str:
    """Stacked columns; the callable share is printed inside its part where it fits."""
    with canvas.settings():
        grid = canvas.Grid(len(panels), 1.6)
        figure = canvas.sheet(grid.height)
        for k, panel in enumerate(panels):
            axes = grid.panel(figure, k, panel.name, panel.line)
            _columns(axes, panel, years)
        _key(grid.key(figure))
        return canvas.raw_svg(figure)


def _columns(axes: Axes, panel: MixPanel, years: Sequence[int]) -> None:
    places = range(len(years))
    base = [0.0] * len(years)
    for part, (_, colour) in enumerate(reversed(KINDS)):
        heights = [shares[part] for shares in panel.shares]
        axes.bar(places, heights, 0.8, bottom=base, facecolor=colour, edgecolor=GREY, linewidth=0.5)
        base = [a + b for a, b in zip(base, heights)]
    for place, shares in enumerate(panel.shares):
        if shares[0] >= 12.0:
            axes.text(place, shares[0] / 2, fixed(shares[0]), ha="center", va="center", color="white",
                      fontsize=canvas.SMALL)  # fmt: skip
    axes.set_xticks(list(places), [str(year) for year in years])
    axes.tick_params(axis="x", length=0)
    axes.set_ylim(0.0, max(100.0, round(max(base), 6)))
    canvas.plain_ticks(axes.yaxis, most=4)


def _key(axes: Axes) -> None:
    for k, (name, colour) in enumerate(KINDS):
        y = 0.86 - 0.15 * k
        axes.add_patch(Rectangle((0.02, y - 0.045), 0.1, 0.09, facecolor=colour, edgecolor=GREY, linewidth=0.5))
        axes.text(0.18, y, name, va="center", fontsize=canvas.SMALL)
    axes.text(0.02, 0.18, "across: year\nup: % of statement value", va="center", fontsize=canvas.SMALL, color=GREY)
