"""The drawing surface: one palette, one size of type, fixed positions in inches, and SVG text out."""

from __future__ import annotations

import io
import math
import warnings
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any

import matplotlib
from matplotlib.axes import Axes
from matplotlib.axis import Axis
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, MaxNLocator

from projector.report.numbers import fixed

INK, GREY, MARK_GREY, RULE = "#1b1f24", "#5f6770", "#868e97", "#c9ced4"
BLUE, VERMILLION, DEEP_VERMILLION = "#0b5394", "#c4500f", "#b0440a"
SKY, PALE_BLUE, PALE_VERMILLION = "#4f93cc", "#cfe0f0", "#f0c4a8"

WIDTH = 7.0  # inches: prints at true size in a portrait column
TEXT, SMALL = 8.0, 7.5
SETTINGS: Any = {
    "svg.fonttype": "none", "svg.hashsalt": "report", "font.family": ["DejaVu Sans"], "font.size": TEXT,
    "text.color": INK, "text.parse_math": False, "axes.edgecolor": MARK_GREY, "axes.linewidth": 0.6,
    "axes.labelcolor": GREY, "axes.labelsize": SMALL, "axes.spines.top": False, "axes.spines.right": False,
    "axes.unicode_minus": True, "axes.formatter.use_locale": False, "xtick.color": MARK_GREY, "ytick.color": MARK_GREY,
    "xtick.labelcolor": GREY, "ytick.labelcolor": GREY, "xtick.labelsize": SMALL, "ytick.labelsize": SMALL,
    "xtick.major.size": 2.5, "ytick.major.size": 2.5, "xtick.major.width": 0.6, "ytick.major.width": 0.6,
    "lines.linewidth": 1.4, "path.simplify": False, "figure.facecolor": "none", "axes.facecolor": "none",
    "patch.linewidth": 0.6,
}  # fmt: skip


@contextmanager
def settings() -> Iterator[None]:
    """The report's own settings over the library's defaults, so that no user's file can change a chart."""
    with matplotlib.rc_context(), warnings.catch_warnings():
        warnings.simplefilter("ignore")  # letters the layout font lacks are shown by the reader's own font
        matplotlib.rcdefaults()
        matplotlib.rcParams.update(SETTINGS)
        yield


def sheet(height: float) -> Figure:
    """A figure of the report's width [inches]."""
    return Figure(figsize=(WIDTH, height))


def place(figure: Figure, left: float, top: float, width: float, height: float) -> Axes:
    """Axes at a fixed place, in inches from the left and from the top."""
    full = figure.get_figheight()
    return figure.add_axes((left / WIDTH, 1.0 - (top + height) / full, width / WIDTH, height / full))


def write(figure: Figure, left: float, top: float, text: str, **look: Any) -> None:
    """Text on the sheet, in inches from the left and from the top."""
    figure.text(left / WIDTH, 1.0 - top / figure.get_figheight(), text, **look)


def raw_svg(figure: Figure) -> str:
    """The drawing as text, without date or maker."""
    out = io.StringIO()
    nothing = {"Date": None, "Creator": None, "Format": None, "Type": None}
    figure.savefig(out, format="svg", metadata=nothing)
    return out.getvalue()


def cut(name: str, most: int = 24) -> str:
    """A name that fits above a panel."""
    return name if len(name) <= most else name[: most - 1].rstrip() + "…"


def plain_ticks(axis: Axis, decimals: int = 0, most: int = 5, prune: str | None = None) -> None:
    """Round tick values written by the report's own formatter."""
    axis.set_major_locator(MaxNLocator(most, steps=[1, 2, 2.5, 5, 10], min_n_ticks=2, prune=prune))
    axis.set_major_formatter(FuncFormatter(lambda value, _: _tick(value, decimals)))


def _tick(value: float, decimals: int) -> str:
    text = fixed(value, decimals)
    return text if abs(float(f"{value:.{decimals}f}") - value) < 1e-9 else f"{fixed(value, decimals + 1)}"


def bounds(values: Sequence[float], *, zero: bool = True, room: float = 0.08) -> tuple[float, float]:
    """A common scale that holds every value, with a little room; never of no width."""
    known = [value for value in values if math.isfinite(value)]
    low, high = min(known, default=0.0), max(known, default=0.0)
    if zero:
        low, high = min(low, 0.0), max(high, 0.0)
    gap = (high - low) * room or 1.0
    return low - (gap if low < 0 or not zero else 0.0), high + gap


@dataclass(frozen=True)
class Grid:
    """Small multiples on one scale, with one cell left for the reading key."""

    count: int
    row_height: float
    head: float = 0.34  # inches above each panel for its name and one line of numbers
    foot: float = 0.3
    left: float = 0.46
    gap: float = 0.2

    @property
    def columns(self) -> int:
        """Two to four columns, whichever leaves a cell for the key."""
        return min(4, max(2, self.count + 1))

    @property
    def rows(self) -> int:
        """Rows of the grid, key included."""
        return -(-(self.count + 1) // self.columns)

    @property
    def height(self) -> float:
        """Height of the sheet."""
        return self.rows * self.row_height

    def corner(self, index: int) -> tuple[float, float]:
        """Left and top of a panel's drawing area."""
        row, column = divmod(index, self.columns)
        return self.left + column * (self.panel_width + self.gap), row * self.row_height + self.head

    @property
    def panel_width(self) -> float:
        """Width of a panel's drawing area."""
        return (WIDTH - self.left - 0.08 - (self.columns - 1) * self.gap) / self.columns

    @property
    def panel_height(self) -> float:
        """Height of a panel's drawing area."""
        return self.row_height - self.head - self.foot

    def panel(self, figure: Figure, index: int, name: str, line: str) -> Axes:
        """Axes with a name and a line of numbers above, where they can never hit an axis."""
        left, top = self.corner(index)
        axes = place(figure, left, top, self.panel_width, self.panel_height)
        write(figure, left, top - 0.22, cut(name), fontsize=TEXT, fontweight="bold", va="baseline")
        write(figure, left, top - 0.08, line, fontsize=SMALL, color=GREY, va="baseline")
        axes.tick_params(labelleft=index % self.columns == 0)
        return axes

    def key(self, figure: Figure) -> Axes:
        """The empty cell, as axes from 0 to 1 without a frame."""
        left, top = self.corner(self.count)
        axes = place(figure, left, top - 0.2, self.panel_width, self.panel_height + 0.2)
        axes.set_axis_off()
        axes.set_xlim(0, 1)
        axes.set_ylim(0, 1)
        return axes
