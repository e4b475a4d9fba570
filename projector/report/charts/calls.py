"""C8, C8b and C9: who is called when, security by security or by group, and how much par by year."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from projector.report.charts import canvas
from projector.report.charts.canvas import BLUE, GREY, INK, MARK_GREY, RULE

MOST_ROWS = 300  # securities drawn one a row; more are drawn by year of first call date
LEFT, RIGHT, HEAD = 0.86, 0.1, 0.5
ROW, GAP, LABEL, TALLEST = 0.055, 1.6, 0.13, 6.2  # inches, but the gap between groups in rows


@dataclass(frozen=True)
class CallRow:
    """One security: years after the valuation date of first call, maturity, and the call in each scenario."""

    group: int  # year of the first call date
    coupon: float
    first: float
    maturity: float
    called: tuple[float | None, ...]  # one a scenario, years; None = not called


@dataclass(frozen=True)
class CallGroup:
    """Securities with one year of first call date: par called by year, and its share, for each scenario."""

    group: int
    count: int
    by_year: tuple[tuple[float, ...], ...]  # scenario, then year 1..horizon [printed money]
    shares: tuple[str, ...]  # share of the group's par called, printed


def draw_map(names: Sequence[str], heads: Sequence[str], rows: Sequence[CallRow], years: float) -> str:
    """One column a scenario, one row a security: grey line from first call to maturity, ink dot when called.

    Rows are grouped by year of first call date, earliest on top, highest coupon first in a group.
    """
    ordered = sorted(rows, key=lambda row: (row.group, -row.coupon, row.first, row.maturity))
    heights, labels = _heights(merged(ordered))
    with canvas.settings():
        tall = min(TALLEST, max(1.0, ROW * (heights[-1] + 1.0)))
        figure = canvas.sheet(HEAD + tall + 0.38)
        panel = (canvas.WIDTH - LEFT - RIGHT) / len(names)
        for k, name in enumerate(names):
            axes = canvas.place(figure, LEFT + k * panel, HEAD, panel - 0.08, tall)
            _map_panel(axes, ordered, heights, k, years)
            _head(figure, LEFT + k * panel, name, heads[k])
        _groups(figure, labels, heights[-1] + 1.0, tall)
        canvas.write(figure, LEFT, HEAD + tall + 0.3, "years after the valuation date", fontsize=canvas.SMALL,
                     color=GREY)  # fmt: skip
        return canvas.raw_svg(figure)


def merged(rows: Sequence[CallRow]) -> list[tuple[str, int]]:
    """Labels and row counts of the groups, years with few securities joined to the next so that labels never meet."""
    counts: dict[int, int] = {}
    for row in rows:
        counts[row.group] = counts.get(row.group, 0) + 1
    row_height = min(ROW, TALLEST / (len(rows) + GAP * len(counts)))
    fewest = LABEL / row_height - GAP
    groups: list[list[int]] = []  # first year, last year, count
    for year, count in counts.items():
        if groups and groups[-1][2] < fewest:
            groups[-1] = [groups[-1][0], year, groups[-1][2] + count]
        else:
            groups.append([year, year, count])
    if len(groups) > 1 and groups[-1][2] < fewest:
        (first, *_), (_, last, count) = groups[-2], groups.pop()
        groups[-1] = [first, last, groups[-1][2] + count]
    return [(f"{a} ({n})" if a == b else f"{a}–{b % 100:02d} ({n})", n) for a, b, n in groups]


def _heights(groups: Sequence[tuple[str, int]]) -> tuple[list[float], list[tuple[float, str]]]:
    """The row of each security, with a gap between groups, and the label of each group at its middle."""
    heights: list[float] = []
    labels: list[tuple[float, str]] = []
    at = 0.0
    for label, count in groups:
        heights += [at + k for k in range(count)]
        labels.append((at + (count - 1) / 2, label))
        at += count + GAP
    return heights, labels


def _map_panel(axes: Axes, rows: Sequence[CallRow], heights: Sequence[float], scenario: int, years: float) -> None:
    gap = float("nan")
    spans = [(x, y) for row, y in zip(rows, heights) for x in (row.first, min(row.maturity, years), gap)]
    axes.plot([x for x, _ in spans], [y for _, y in spans], color=MARK_GREY, linewidth=0.7, solid_capstyle="butt")
    dots = [(at, y) for row, y in zip(rows, heights) if (at := row.called[scenario]) is not None]
    if dots:  # a stroke of no length with a round end is a dot: one path for all of them
        points = [(x, y) for at, y in dots for x in (at, at, gap)]
        axes.plot([x for x, _ in points], [y for _, y in points], color=INK, linewidth=3.0, solid_capstyle="round")
    axes.set_xlim(0.0, years)
    axes.set_ylim(heights[-1] + 1.0, -1.0)
    axes.set_yticks([])
    axes.spines["left"].set_color(RULE)
    canvas.plain_ticks(axes.xaxis, most=3, prune="upper")


def _head(figure: Figure, left: float, name: str, line: str) -> None:
    first, _, rest = name.partition(" ")
    canvas.write(figure, left, 0.13, canvas.cut(first, 12), fontsize=canvas.TEXT, fontweight="bold", va="baseline")
    canvas.write(figure, left, 0.27, canvas.cut(rest, 13), fontsize=canvas.SMALL, va="baseline")
    canvas.write(figure, left, 0.41, line, fontsize=canvas.SMALL, color=GREY, va="baseline")


def _groups(figure: Figure, labels: Sequence[tuple[float, str]], bottom: float, tall: float) -> None:
    canvas.write(figure, 0.02, 0.27, "first call", fontsize=canvas.SMALL, color=GREY, va="baseline")
    canvas.write(figure, 0.02, 0.41, "(count)", fontsize=canvas.SMALL, color=GREY, va="baseline")
    for middle, text in labels:
        top = HEAD + tall * (middle + 1.0) / (bottom + 1.0)
        canvas.write(figure, 0.02, top, text, fontsize=canvas.SMALL, va="center")


def draw_groups(names: Sequence[str], heads: Sequence[str], groups: Sequence[CallGroup]) -> str:
    """The same columns for many securities: one row a year of first call date, par called as small columns."""
    with canvas.settings():
        row = min(0.42, 4.6 / max(len(groups), 1))
        figure = canvas.sheet(HEAD + row * len(groups) + 0.38)
        panel = (canvas.WIDTH - LEFT - RIGHT) / len(names)
        top = max((v for g in groups for years in g.by_year for v in years), default=0.0) or 1.0
        for k, name in enumerate(names):
            axes = canvas.place(figure, LEFT + k * panel, HEAD, panel - 0.08, row * len(groups))
            _group_panel(axes, groups, k, top)
            _head(figure, LEFT + k * panel, name, heads[k])
        labels = [(k + 0.5, f"{g.group} ({g.count})") for k, g in enumerate(groups)]
        for middle, text in labels:
            canvas.write(figure, 0.02, HEAD + row * middle, text, fontsize=canvas.SMALL, va="center")
        canvas.write(figure, 0.02, 0.27, "first call", fontsize=canvas.SMALL, color=GREY, va="baseline")
        canvas.write(figure, 0.02, 0.41, "(count)", fontsize=canvas.SMALL, color=GREY, va="baseline")
        canvas.write(figure, LEFT, HEAD + row * len(groups) + 0.3, "years after the valuation date",
                     fontsize=canvas.SMALL, color=GREY)  # fmt: skip
        return canvas.raw_svg(figure)


def _group_panel(axes: Axes, groups: Sequence[CallGroup], scenario: int, top: float) -> None:
    years = len(groups[0].by_year[scenario]) if groups else 1
    for k, group in enumerate(groups):
        base = len(groups) - 1.0 - k
        axes.axhline(base, color=RULE, linewidth=0.6)
        heights = np.asarray(group.by_year[scenario]) / top * 0.86
        axes.stairs(base + heights, np.arange(years + 1), baseline=base, fill=True, color=INK, linewidth=0)
        axes.text(years, base + 0.5, group.shares[scenario], ha="right", va="center", fontsize=canvas.SMALL)
    axes.set_xlim(0.0, years)
    axes.set_ylim(0.0, float(len(groups)))
    axes.set_yticks([])
    axes.spines["left"].set_color(RULE)
    canvas.plain_ticks(axes.xaxis, most=3, prune="upper")


def draw_par(names: Sequence[str], lines: Sequence[str], by_year: Sequence[Sequence[float]], unit: str) -> str:
    """Par called by year, one panel a scenario on one scale."""
    with canvas.settings():
        grid = canvas.Grid(len(names), 1.5)
        figure = canvas.sheet(grid.height)
        top = max((value for values in by_year for value in values), default=0.0) * 1.06 or 1.0
        for k, (name, values) in enumerate(zip(names, by_year)):
            axes = grid.panel(figure, k, name, lines[k])
            axes.stairs(values, np.arange(len(values) + 1), fill=True, color=BLUE, linewidth=0)
            axes.set_xlim(0.0, float(len(values)))
            axes.set_ylim(0.0, top)
            canvas.plain_ticks(axes.xaxis, most=5)
            canvas.plain_ticks(axes.yaxis, most=4)
        key = grid.key(figure)
        text = f"across: years\nup: par called,\n{unit} a year\n\nmodel calls on this path,\nnot a forecast"
        key.text(0.02, 0.62, text, va="center", fontsize=canvas.SMALL, color=GREY)
        return canvas.raw_svg(figure)
