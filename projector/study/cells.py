"""One cell: from text to a value, or to the fault that keeps it from being one."""

from __future__ import annotations

import math
import re
from collections.abc import Callable
from dataclasses import replace
from datetime import date
from functools import partial
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from projector.study.columns import Column
from projector.study.names import is_identifier, listed, nearest, text_fault

FIRST_YEAR, LAST_YEAR = 1900, 2500
_NUMBER = re.compile(r"[+-]?([0-9]+\.?[0-9]*|\.[0-9]+)([eE][+-]?[0-9]{1,4})?")
_DATE = re.compile(r"[0-9]{4}-[0-9]{2}-[0-9]{2}")
_NOT_FINITE = {"nan", "inf", "infinity", "+inf", "-inf", "+infinity", "-infinity", "+nan", "-nan"}
_NUMBER_REMEDY = "write a decimal number such as 0.0525, with a point, without a % sign or thousands separators"
_DATE_REMEDY = f"write a real calendar day as YYYY-MM-DD, {FIRST_YEAR} to {LAST_YEAR}"


class Fault(NamedTuple):
    """What is wrong with a cell: code, problem, remedy; the place is known to the caller.

    A remedy that is dear to word is worded only for the faults that are shown.
    """

    code: str
    problem: str
    remedy: str | Callable[[], str]

    def advice(self) -> str:
        """The remedy in words."""
        return self.remedy if isinstance(self.remedy, str) else self.remedy()


def plain_text(value: Any) -> str:
    """A typed cell as the text a CSV file would hold: true, 5, 0.05, 2030-06-30, empty for nothing."""
    if value is None:
        return ""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, float) and value.is_integer() and abs(value) < 1e15:
        return str(int(value))
    if hasattr(value, "isoformat"):
        return str(value.isoformat()).removesuffix("T00:00:00")
    return str(value)


def parse_number(text: str, column: Column) -> float | Fault:
    """A finite decimal number; its range is checked for whole columns at a time."""
    text = text.strip(" ")
    if text.lower() in _NOT_FINITE:
        return Fault("E308", f"{column.name} is not a finite number", _NUMBER_REMEDY)
    if len(text) > 60 or not _NUMBER.fullmatch(text):
        return Fault("E307", f"{column.name} is not a number", _NUMBER_REMEDY)
    number = float(text)
    return number_fault(number, column) or number


def number_fault(number: float, column: Column) -> Fault | None:
    """What keeps a number from standing in the column: not finite, not whole, out of range. None when nothing does."""
    if not math.isfinite(number):
        return Fault("E308", f"{column.name} is not a finite number", _NUMBER_REMEDY)
    below = column.least is not None and (number <= column.least if column.above_least else number < column.least)
    if below or (column.most is not None and number > column.most):
        return Fault("E309", f"{column.name} is out of range", partial(_range_remedy, number, column))
    if column.kind == "whole" and number != math.floor(number):
        return Fault("E310", f"{column.name} is not a whole number", "write it without decimals")
    return None


def number_codes(numbers: NDArray[np.float64], column: Column) -> NDArray[Any]:
    """The code `number_fault` gives each of some numbers that may not stand in the column."""
    within = in_range(numbers, replace(column, kind="number"))
    return np.where(np.isfinite(numbers), np.where(within, "E310", "E309"), "E308")


def in_range(number: Any, column: Column) -> Any:
    """Whether numbers (one or an array) may stand in the column; a number that is not finite may not."""
    good = np.isfinite(number)
    if column.least is not None:
        good &= number > column.least if column.above_least else number >= column.least
    if column.most is not None:
        good &= number <= column.most
    return good & (number == np.floor(number)) if column.kind == "whole" else good


def figure(number: float) -> str:
    """A number in a sentence: thousands separated, no digits beyond the fifteenth."""
    return f"{number:,.15g}"


def _range_remedy(number: float, column: Column) -> str:
    return f"{_range(column)}{_meant(number, column)}"


def _range(column: Column) -> str:
    least, most = figure(column.least or 0.0), figure(column.most or 0.0)
    above = f"more than {least} and at most {most}" if column.above_least else f"{least} to {most}"
    return f"allowed is {above} ({column.unit})"


def _meant(number: float, column: Column) -> str:
    """The likely slip of unit: 5 for 0.05, or 1.02 for 102."""
    if column.unit == "1/year" and column.kind == "number" and number > 0 and in_range(number / 100, column):
        return f", did you mean {figure(number / 100)}, which is {figure(number)} %"
    if column.unit == "per 100 of par" and 0 < number <= 2 and in_range(number * 100, column):
        return f", did you mean {figure(number * 100)}"
    return ""


def parse_date(text: str, column: Column) -> date | Fault:
    """A calendar day between 1900 and 2500, written YYYY-MM-DD."""
    text = text.strip(" ")
    if not _DATE.fullmatch(text):
        return Fault("E311", f"{column.name} is not a date written YYYY-MM-DD", _DATE_REMEDY)
    try:
        day = date.fromisoformat(text)
    except ValueError:
        return Fault("E311", f"{column.name} is a day that does not exist", _DATE_REMEDY)
    if not FIRST_YEAR <= day.year <= LAST_YEAR:
        return Fault("E311", f"{column.name} is outside the years {FIRST_YEAR} to {LAST_YEAR}", _DATE_REMEDY)
    return day


def parse_choice(text: str, column: Column) -> str | Fault:
    """One of the column's choices, spelled as listed."""
    text = text.strip(" ")
    if text in column.choices:
        return text
    return Fault("E312", f"{column.name} is unknown", partial(_choice_remedy, text, column))


def _choice_remedy(text: str, column: Column) -> str:
    close = nearest(text, column.choices)
    meant = f"did you mean {close}? Allowed are " if close else "write one of "
    return f"{meant}{listed(column.choices, 30)}"


def parse_flag(text: str, column: Column) -> bool | Fault:
    """true or false, in any case: spreadsheets write TRUE."""
    flag = {"true": True, "false": False}.get(text.strip(" ").lower())
    return Fault("E312", f"{column.name} is neither true nor false", "write true or false") if flag is None else flag


def parse_text(text: str, column: Column) -> str | Fault:
    """A printable text of at most 200 characters without spaces around it."""
    problem = text_fault(text)
    if problem is None:
        return text
    return Fault("E313", f"{column.name} {problem}", "write a short printable text without spaces around it")


def parse_identifier(text: str, column: Column) -> str | Fault:
    """A lower-case name such as deferred_annuities."""
    fault = parse_text(text, column)
    if isinstance(fault, Fault) or is_identifier(text):
        return fault
    remedy = "write lower-case letters, digits and underscores, a letter first, such as deferred_annuities"
    return Fault("E313", f"{column.name} is not a lower-case name", remedy)


PARSERS: dict[str, Callable[[str, Column], Any]] = {
    "number": parse_number,
    "whole": parse_number,
    "date": parse_date,
    "choice": parse_choice,
    "flag": parse_flag,
    "text": parse_text,
    "identifier": parse_identifier,
}
