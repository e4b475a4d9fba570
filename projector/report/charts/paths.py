"""C5 and C6: rate paths and surplus through time, one panel a scenario on one scale."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from matplotlib.axes import Axes

from projector.report.charts import canvas
from projector.report.charts.canvas import BLUE, INK, MARK_GREY, PALE_VERMILLION, RULE, VERMILLION
from projector.report.numbers import MINUS, fixed


@dataclass(frozen=True)
class RatePanel:
    """One scenario's yields in percent at the years of the axis."""

    name: str
    line: str
    long: tuple[float, ...]
    short: tuple[float, ...]


@dataclass(frozen=True)
class SurplusPanel:
    """One scenario's surplus at month 0 and the year ends, in the report's unit of money."""

    name: str
    line: str
    values: tuple[float, ...]


def draw_rates(panels: Sequence[RatePanel], years: Sequence[float], long_name: str, short_name: str) -> str:
    """The long yield solid, the short one dashed, the starting long yield as a thin grey level."""
    with canvas.settings():
        grid = canvas.Grid(len(panels), 1.5)
        figure = canvas.sheet(grid.height)
        every = [value for panel in panels for value in (*panel.long, *panel.short)]
        low, high = canvas.bounds(every)
        for k, panel in enumerate(panels):
            axes = grid.panel(figure, k, panel.name, panel.line)
            axes.axhline(panel.long[0], color=MARK_GREY, linewidth=0.6)
            axes.plot(years, panel.long, color=BLUE)
            axes.plot(years, panel.short, color=INK, linewidth=1.0, linestyle=(0, (3, 1.6)))
            _frame(axes, years[-1], (low, high), zero=low < 0)
        _rates_key(grid.key(figure), long_name, short_name)
        return canvas.raw_svg(figure)


def _frame(axes: Axes, last: float, limits: tuple[float, float], *, zero: bool, decimals: int = 0) -> None:
    axes.set_xlim(0.0, last * 1.02)
    axes.set_ylim(*limits)
    if zero:
        axes.axhline(0.0, color=INK, linewidth=0.8)
    canvas.plain_ticks(axes.xaxis, most=5)
    canvas.plain_ticks(axes.yaxis, decimals, most=5)


def _rates_key(axes: Axes, long_name: str, short_name: str) -> None:
    lines = ((long_name, BLUE, 1.4, "-"), (short_name, INK, 1.0, (0, (3, 1.6))), ("start", MARK_GREY, 0.6, "-"))
    for k, (name, colour, width, dash) in enumerate(lines):
        y = 0.86 - 0.16 * k
        axes.plot([0.02, 0.2], [y, y], color=colour, linewidth=width, linestyle=dash)
        axes.text(0.26, y, name, va="center", fontsize=canvas.SMALL)
    axes.text(0.02, 0.3, "across: years\nup: par yield, %", va="center", fontsize=canvas.SMALL, color=canvas.GREY)


def draw_surplus(panels: Sequence[SurplusPanel], unit: str, first_negative: str) -> str:
    """Zero line in ink, pale fill below it, triangle at a negative low, dot at the end."""
    with canvas.settings():
        grid = canvas.Grid(len(panels), 1.72)
        figure = canvas.sheet(grid.height)
        limits = canvas.bounds([value for panel in panels for value in panel.values])
        for k, panel in enumerate(panels):
            axes = grid.panel(figure, k, panel.name, panel.line)
            _surplus(axes, panel.values)
            _frame(axes, len(panel.values) - 1.0 or 1.0, limits, zero=True)
        _surplus_key(grid.key(figure), unit, first_negative)
        return canvas.raw_svg(figure)


def _surplus(axes: Axes, values: tuple[float, ...]) -> None:
    years = list(range(len(values)))
    if min(values) < 0:
        axes.fill_between(years, values, 0.0, where=[v < 0 for v in values], interpolate=True, color=PALE_VERMILLION,
                          linewidth=0)  # fmt: skip
    axes.plot(years, values, color=BLUE)
    axes.plot(years[-1:], values[-1:], "o", color=BLUE, markersize=4.2, clip_on=False)
    low = min(range(min(1, len(values) - 1), len(values)), key=values.__getitem__)  # year 0 is the ledger's
    if fixed(values[low], 1).startswith(MINUS):
        axes.plot([low], [values[low]], "v", color=VERMILLION, markersize=5.0, clip_on=False)


def _surplus_key(axes: Axes, unit: str, words: str) -> None:
    axes.plot([0.02, 0.2], [0.9, 0.9], color=BLUE)
    axes.plot([0.2], [0.9], "o", color=BLUE, markersize=4.2)
    axes.text(0.27, 0.9, "surplus, end", va="center", fontsize=canvas.SMALL)
    axes.plot([0.11], [0.74], "v", color=VERMILLION, markersize=5.0)
    axes.text(0.27, 0.74, "lowest, if below zero", va="center", fontsize=canvas.SMALL)
    axes.fill_between([0.02, 0.2], [0.54, 0.54], [0.62, 0.62], color=PALE_VERMILLION, linewidth=0)
    axes.plot([0.02, 0.2], [0.62, 0.62], color=INK, linewidth=0.8)
    axes.text(0.27, 0.58, words, va="center", fontsize=canvas.SMALL)
    axes.text(0.02, 0.26, f"across: years\nup: {unit}", va="center", fontsize=canvas.SMALL, color=canvas.GREY)
    axes.plot([0.02], [0.02], color=RULE, alpha=0.0)
