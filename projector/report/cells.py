"""Makers of cells: each takes a full value and its stable key, and prints it by the report's formatters."""

from __future__ import annotations

import math
from dataclasses import dataclass
from datetime import date
from typing import Any

from projector.report import numbers
from projector.report.numbers import Money
from projector.report.parts import Cell


def _number(shown: str, value: float, unit: str, key: str, formula: str, scale: float, style: str) -> Cell:
    return Cell(
        shown=shown, value=value, unit=unit, key=key, formula=formula, look="number", scale=scale, style=style
    )  # fmt: skip


def word(text: str, key: str, *, look: str = "word") -> Cell:
    """A word, such as a status or a name of ours."""
    return Cell(shown=text, value=text, unit="-", key=key, formula="", look=look, scale=1.0, style="text")


def quiet(text: str, key: str) -> Cell:
    """Where there is no date or event: none, not called."""
    return word(text, key, look="quiet")


def said(text: str, key: str) -> Cell:
    """Words of the study, printed as the study's own; nothing said prints as none."""
    return word(text, key, look="study") if text.strip() else quiet("none", key)


def missing(key: str) -> Cell:
    """No figure; the table must say why."""
    return quiet(numbers.NOT_AVAILABLE, key)


def percent(value: float, key: str, formula: str = "", decimals: int = 1) -> Cell:
    """A decimal share or rate, printed in percent; the sign % stands in the header."""
    if not math.isfinite(value):
        return missing(key)
    style = {0: "percent_whole", 1: "percent", 2: "percent_two"}[decimals]
    return _number(numbers.fixed(100.0 * value, decimals), value, "1", key, formula, 0.01, style)


def share(part: float, whole: float, key: str, formula: str, decimals: int = 1) -> Cell:
    """A part of a whole in percent; none where the whole is zero."""
    return percent(part / whole, key, formula, decimals) if whole else quiet("none", key)


def yearly_rate(value: float, key: str, formula: str = "") -> Cell:
    """A yield or rate of return, in percent with two decimals."""
    return percent(value, key, formula, 2)


def count(value: float, key: str, formula: str = "") -> Cell:
    """A whole number of things."""
    return _number(numbers.fixed(value), float(value), "count", key, formula, 1.0, "whole")


def year(value: float, key: str, formula: str = "") -> Cell:
    """A year end, counted from the valuation date."""
    return _number(str(int(value)), float(value), "year", key, formula, 1.0, "whole")


def years(value: float, key: str, formula: str = "") -> Cell:
    """A length of time in years, one decimal."""
    return _number(numbers.fixed(value, 1), value, "year", key, formula, 1.0, "one")


def basis_points(value: float, key: str, formula: str = "") -> Cell:
    """A spread in whole basis points."""
    if not math.isfinite(value):
        return missing(key)
    return _number(numbers.basis_points(value), value, "bp", key, formula, 1.0, "whole")


def per_100(value: float, key: str, formula: str = "") -> Cell:
    """A price per 100 of par, four decimals."""
    if not math.isfinite(value):
        return missing(key)
    return _number(numbers.fixed(value, 4), value, "per 100", key, formula, 1.0, "four")


def cents(value: float, key: str, formula: str = "") -> Cell:
    """A control total in currency units with two decimals."""
    return _number(numbers.cents(value), value, "currency", key, formula, 1.0, "two")


def small(value: float, key: str) -> Cell:
    """A difference that is meant to be nothing: two figures and a power of ten."""
    shown = "0" if value == 0 else f"{value:.1e}".replace("-", numbers.MINUS)
    return _number(shown, value, "currency", key, "M-30", 1.0, "general")


def day(value: Any, key: str) -> Cell:
    """A date as YYYY-MM-DD, or none."""
    found: date | None = numbers.as_date(value)
    return word(found.isoformat(), key) if found else quiet("none", key)


@dataclass(frozen=True)
class MoneyCells:
    """Amounts in the report's one unit of money."""

    money: Money

    def __call__(self, amount: float, key: str, formula: str = "") -> Cell:
        """An amount with one decimal, or [n/a]."""
        if not math.isfinite(amount):
            return missing(key)
        return _number(self.money.text(amount), amount, "currency", key, formula, self.money.scale, "one")
