"""C4: cash flows of both sides by year, run-off of the starting holdings against liability outgo."""

from __future__ import annotations

from collections.abc import Sequence

from matplotlib.axes import Axes
from matplotlib.patches import Rectangle

from projector.report.charts import canvas
from projector.report.charts.canvas import BLUE, INK, VERMILLION


def draw(assets: Sequence[float], liabilities: Sequence[float]) -> str:
    """Assets in above the line and filled, liabilities out below and open, the net as a dotted line."""
    with canvas.settings():
        figure = canvas.sheet(2.6)
        axes = canvas.place(figure, 0.5, 0.1, 5.2, 2.05)
        years = list(range(1, len(assets) + 1))
        axes.bar(years, assets, 0.72, facecolor=BLUE, edgecolor=BLUE)
        axes.bar(years, [-value for value in liabilities], 0.72, facecolor="white", edgecolor=VERMILLION, linewidth=0.9)
        net = [a - b for a, b in zip(assets, liabilities)]
        axes.plot(years, net, color="white", linewidth=2.6)
        axes.plot(
            years, net, color=INK, linewidth=1.1, marker="o", markersize=3.2, markeredgecolor="white",
            markeredgewidth=0.6,
        )  # fmt: skip
        axes.axhline(0.0, color=INK, linewidth=0.8)
        axes.set_xlim(0.3, len(years) + 0.7)
        axes.set_ylim(*canvas.bounds([*assets, *(-v for v in liabilities), *net]))
        canvas.plain_ticks(axes.yaxis, most=6)
        canvas.plain_ticks(axes.xaxis, most=9)
        canvas.write(figure, 0.5, 2.52, "year after the valuation date", fontsize=canvas.SMALL, color=canvas.GREY)
        _key(canvas.place(figure, 5.82, 0.1, 1.16, 1.6))
        return canvas.raw_svg(figure)


def _key(axes: Axes) -> None:
    axes.set_axis_off()
    axes.set_xlim(0, 1.16)
    axes.set_ylim(1.6, 0)
    axes.add_patch(Rectangle((0.0, 0.1), 0.14, 0.14, facecolor=BLUE, edgecolor=BLUE))
    axes.add_patch(Rectangle((0.0, 0.44), 0.14, 0.14, facecolor="white", edgecolor=VERMILLION, linewidth=0.9))
    axes.plot([0.0, 0.14], [0.85, 0.85], color=INK, linewidth=1.1)
    axes.plot([0.07], [0.85], "o", color=INK, markersize=3.2)
    for y, text in ((0.17, "assets in,\nrun-off"), (0.51, "liabilities out"), (0.85, "net")):
        axes.text(0.2, y, text, va="center", fontsize=canvas.SMALL, linespacing=1.1)
