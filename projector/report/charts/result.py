"""C1: the result by scenario, two measures on two panels of one scale."""

from __future__ import annotations

from collections.abc import Sequence
from math import isfinite

from matplotlib.axes import Axes
from matplotlib.figure import Figure

from projector.report.charts import canvas
from projector.report.charts.canvas import BLUE, DEEP_VERMILLION, INK, MARK_GREY, VERMILLION
from projector.report.numbers import MINUS, NOT_AVAILABLE, fixed

ROW = 0.16


def draw(names: Sequence[str], left: Sequence[float], right: Sequence[float], heads: tuple[str, str]) -> str:
    """Rows are scenarios, two panels share one scale in the report's unit of money."""
    with canvas.settings():
        figure = canvas.sheet(0.48 + ROW * len(names))
        low, high = canvas.bounds([*left, *right], room=0.32)
        for index, (values, head) in enumerate(zip((left, right), heads)):
            axes = canvas.place(figure, 1.5 + index * 2.78, 0.24, 2.62, ROW * len(names))
            _panel(axes, values, (low, high))
            canvas.write(figure, 1.5 + index * 2.78, 0.14, head, fontsize=canvas.SMALL, color=canvas.GREY)
        _names(figure, names)
        return canvas.raw_svg(figure)


def _names(figure: Figure, names: Sequence[str]) -> None:
    for k, name in enumerate(names):
        canvas.write(figure, 0.02, 0.24 + ROW * (k + 0.5), canvas.cut(name, 22), va="center", fontsize=canvas.TEXT)


def _panel(axes: Axes, values: Sequence[float], limits: tuple[float, float]) -> None:
    axes.set_xlim(*limits)
    axes.set_ylim(len(values) - 0.5, -0.5)
    axes.axvline(0.0, color=INK, linewidth=0.9)
    for k, value in enumerate(values):
        text = fixed(value, 1) if isfinite(value) else NOT_AVAILABLE
        below = text.startswith(MINUS)
        axes.plot([0.0, value], [k, k], color=VERMILLION if below else BLUE, linewidth=1.1, solid_capstyle="butt")
        axes.plot([value], [k], "v" if below else "o", color=VERMILLION if below else BLUE, markersize=4.6)
        _value(axes, value if isfinite(value) else 0.0, k, text, below)
    axes.yaxis.set_visible(False)
    axes.spines["left"].set_visible(False)
    axes.spines["bottom"].set_color(MARK_GREY)
    canvas.plain_ticks(axes.xaxis)


def _value(axes: Axes, value: float, row: int, text: str, below: bool) -> None:
    axes.annotate(
        text, (value, row), xytext=(-5 if below else 5, 0), textcoords="offset points", va="center",
        ha="right" if below else "left", fontsize=canvas.SMALL, color=DEEP_VERMILLION if below else INK,
        fontweight="bold" if below else "normal",
    )  # fmt: skip
