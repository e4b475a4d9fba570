"""One security on one path: refunding yield against the critical one, and the cost of going on against the bar."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from matplotlib.axes import Axes
from matplotlib.figure import Figure

from projector.report.charts import canvas
from projector.report.charts.canvas import BLUE, GREY, INK, MARK_GREY, RULE

LEFT, RIGHT, TOP = 0.46, 0.12, 0.62
PANEL, GAP, FOOT = 1.75, 0.62, 0.4  # inches
DASH: Any = (0, (3, 1.6))
DOTS: Any = (0, (1, 1.2))
LETTER = 0.056  # inches of key for a letter of the layout font
FAR = 3.0  # points of yield beyond the refunding yields that the scale still holds
LEAST = 0.2  # per 100: the least height of the lower scale


@dataclass(frozen=True)
class DecisionDrawing:
    """Series by month, nan where a figure does not apply; yields in percent, costs per 100 less accrued interest.

    name, rule    the two lines above the panels
    marked        month to mark: of the call, or the one that came closest
    is_call       whether it is the call
    marked_words  what is written beside the mark
    """

    name: str
    rule: str
    months: Sequence[float]
    refunding: Sequence[float]
    critical: Sequence[float]
    continuation: Sequence[float]
    upper_bound: Sequence[float]
    bar: Sequence[float]
    marked: int
    is_call: bool
    marked_words: str


@dataclass(frozen=True)
class Series:
    """One line, or one mark a month where rights lie apart."""

    name: str
    values: Sequence[float]
    colour: str
    dash: Any
    marker: str

    @property
    def alone(self) -> list[int]:
        """Places of values without a neighbour, which a line would not show."""
        known = {k for k, value in enumerate(self.values) if math.isfinite(value)}
        return sorted(k for k in known if k - 1 not in known and k + 1 not in known)

    @property
    def apart(self) -> bool:
        """Whether no two values follow each other."""
        return len(self.alone) == sum(1 for value in self.values if math.isfinite(value))

    def line(self) -> dict[str, Any]:
        """How values that follow each other are drawn."""
        return {"color": self.colour, "linestyle": self.dash}

    def mark(self) -> dict[str, Any]:
        """How a value alone is drawn."""
        size = 8.0 if self.marker == "_" else 4.6
        return {"color": self.colour, "linestyle": "", "marker": self.marker, "markersize": size,
                "markerfacecolor": "none", "markeredgewidth": 1.1}  # fmt: skip


def draw(drawing: DecisionDrawing) -> str:
    """Two panels on one axis of years; the call is an ink dot and a thin line through both."""
    low, high = yield_limits(drawing)
    beyond = any(not low <= value <= high for value in drawing.critical if math.isfinite(value))
    critical = "critical yield, at which both cost the same" + (" (partly off the scale)" if beyond else "")
    upper = (Series("refunding yield", drawing.refunding, BLUE, "-", "o"),
             Series(critical, drawing.critical, INK, DASH, "_"))  # fmt: skip
    lower = (Series("going on, upper bound", drawing.upper_bound, MARK_GREY, DOTS, "v"),
             Series("going on", drawing.continuation, BLUE, "-", "o"),
             Series("calling: price + issuer's cost", drawing.bar, INK, DASH, "_"))  # fmt: skip
    with canvas.settings():
        figure = canvas.sheet(TOP + 2 * PANEL + GAP + FOOT)
        heading = {"va": "baseline"}
        canvas.write(figure, 0.02, 0.15, canvas.cut(drawing.name, 84), fontsize=canvas.TEXT, fontweight="bold",
                     **heading)  # fmt: skip
        canvas.write(figure, 0.02, 0.31, canvas.cut(drawing.rule, 130), fontsize=canvas.SMALL, color=GREY, **heading)
        width, second = canvas.WIDTH - LEFT - RIGHT, TOP + PANEL + GAP
        yields, costs = canvas.place(figure, LEFT, TOP, width, PANEL), canvas.place(figure, LEFT, second, width, PANEL)
        _panel(yields, drawing, upper, (low, high))
        _panel(costs, drawing, lower, cost_limits(drawing))
        _mark(yields, drawing, drawing.refunding, words=True)
        _mark(costs, drawing, drawing.continuation, words=False)
        _key(figure, TOP - 0.1, "%", upper)
        _key(figure, second - 0.1, "per 100", lower)
        foot = second + PANEL + 0.33
        canvas.write(figure, LEFT, foot, "years after the valuation date", fontsize=canvas.SMALL, color=GREY)
        return canvas.raw_svg(figure)


def _panel(axes: Axes, drawing: DecisionDrawing, series: Sequence[Series], limits: tuple[float, float]) -> None:
    years = [month / 12.0 for month in drawing.months]
    for one in series:
        if not one.apart:
            axes.plot(years, one.values, **one.line())
        axes.plot([years[k] for k in one.alone], [one.values[k] for k in one.alone], **one.mark())
    axes.set_xlim(0.0, max(years[-1], 1 / 12.0) * 1.02)
    axes.set_ylim(*limits)
    canvas.plain_ticks(axes.xaxis, most=8)
    canvas.plain_ticks(axes.yaxis, 1, most=5)


def yield_limits(drawing: DecisionDrawing) -> tuple[float, float]:
    """A scale for every refunding yield, and for critical ones that are not far from all of them.

    Just before a lower price, and in the last months, hardly any yield would make a call worth its cost: the critical
    yield runs off the scale there instead of flattening everything else.
    """
    known = [value for value in drawing.refunding if math.isfinite(value)]
    low, high = min(known) - FAR, max(known) + FAR
    near = [value for value in drawing.critical if math.isfinite(value) and low <= value <= high]
    return canvas.bounds([*known, *near], zero=False, room=0.16)  # the words of the mark stand above the lines


def cost_limits(drawing: DecisionDrawing) -> tuple[float, float]:
    """A scale for every cost, of some height even for a single right."""
    low, high = canvas.bounds([*drawing.continuation, *drawing.upper_bound, *drawing.bar], zero=False)
    more = max(0.0, LEAST - (high - low)) / 2
    return low - more, high + more


def _key(figure: Figure, top: float, unit: str, series: Sequence[Series]) -> None:
    """One line of key above a panel: the unit, then each line with its name."""
    canvas.write(figure, 0.02, top, unit, fontsize=canvas.SMALL, color=GREY, va="baseline")
    left, room = LEFT + 0.08, canvas.WIDTH - LEFT - 0.08
    axes = canvas.place(figure, left, top - 0.12, room, 0.16)
    axes.set_axis_off()
    axes.set_xlim(0.0, room)
    axes.set_ylim(0.0, 1.0)
    at = 0.02
    for one in series:
        ends = [at + 0.15] if one.apart else [at, at + 0.3]
        axes.plot(ends, [0.45] * len(ends), **(one.mark() if one.apart else one.line()))
        canvas.write(figure, left + at + 0.36, top, one.name, fontsize=canvas.SMALL, va="baseline")
        at += 0.36 + LETTER * len(one.name) + 0.16


def _mark(axes: Axes, drawing: DecisionDrawing, values: Sequence[float], *, words: bool) -> None:
    """The call: a thin line and a full dot; the month that came closest: a ring. Its month in words."""
    at, value = drawing.marked / 12.0, values[list(drawing.months).index(drawing.marked)]
    axes.axvline(at, color=INK if drawing.is_call else RULE, linewidth=0.7)
    dot = {"markersize": 6.0} if drawing.is_call else {"markersize": 10.0, "markerfacecolor": "none"}
    axes.plot([at], [value], "o", color=INK, clip_on=False, **dot)
    if words:
        late = drawing.marked > 0.5 * drawing.months[-1]
        axes.annotate(
            drawing.marked_words, (at, 1.0), xycoords=("data", "axes fraction"), xytext=(-4 if late else 4, -2),
            textcoords="offset points", ha="right" if late else "left", va="top", fontsize=canvas.SMALL,
        )  # fmt: skip
