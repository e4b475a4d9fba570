"""Day counts by their FpML names, and the calendar arithmetic that needs no business days.

Dates are plain `datetime.date`; everything here holds for the years 1900 to 2500 and beyond, as the calendar does.
A fraction is in years. The two counts that depend on the coupon period (ACT/ACT.ICMA, ACT/365L) are told it; the one
that treats the last day of the contract apart (30E/360.ISDA) is told that day.
"""

from __future__ import annotations

import calendar
from datetime import date
from types import MappingProxyType

DAY_COUNTS = (
    "30/360",
    "30E/360",
    "30E/360.ISDA",
    "ACT/ACT.ISDA",
    "ACT/ACT.ICMA",
    "ACT/365.FIXED",
    "ACT/360",
    "ACT/365L",
)

# Interest computation method codes of ISO 20022 (external code set, cited from memory). Codes whose rule is none of
# ours (A002, A003, A010, A012, A013, A014) are left out, so that they are refused instead of guessed.
ISO_20022 = MappingProxyType(
    {
        "A001": "30/360",
        "A004": "ACT/360",
        "A005": "ACT/365.FIXED",
        "A006": "ACT/ACT.ICMA",
        "A007": "30E/360.ISDA",
        "A008": "ACT/ACT.ISDA",
        "A009": "ACT/365L",
        "A011": "30E/360",
    }
)


MONTH_LENGTHS = (31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31)


def day_count_named(text: str) -> str:
    """The FpML name for a name or an ISO 20022 code; ValueError when it is neither."""
    name = ISO_20022.get(text, text)
    if name not in DAY_COUNTS:
        raise ValueError(f"day count {text!r} is unknown; allowed are {', '.join(DAY_COUNTS)}")
    return name


def is_month_end(day: date) -> bool:
    """Whether the day is the last of its month."""
    return day.day == month_length(day.year, day.month)


def month_length(year: int, month: int) -> int:
    """Days of a month; asked for every payment of every security, where the calendar module is slow. [day]"""
    return 29 if month == 2 and calendar.isleap(year) else MONTH_LENGTHS[month - 1]


def months_before(day: date, months: int, *, month_end: bool) -> date:
    """The same day of the month so many months earlier (later when negative), the last day of a shorter month.

    month_end  whether a last day of the month stays the last day
    """
    year, month = divmod(day.year * 12 + day.month - 1 - months, 12)
    last = month_length(year, month + 1)
    return date(year, month + 1, last if month_end and is_month_end(day) else min(day.day, last))


def actual_days(start: date, end: date) -> int:
    """Calendar days from start to end, the start counted and the end not. [day]"""
    return (end - start).days


def thirty_360_days(start: date, end: date) -> int:
    """Days of 30/360, the bond basis. [day]

    A 31st at the start is a 30th; a 31st at the end is a 30th only when the start is a 30th or 31st. February is left
    as it is, so half-years that start or end there do not have 180 days.

    Source: 2006 ISDA Definitions, section 4.16(f) (from memory; tested on ISDA's worked sheet of 2008).
    """
    first = min(start.day, 30)
    last = 30 if end.day == 31 and first == 30 else end.day
    return _thirty_day_months(start, end) + last - first


def thirty_e_360_days(start: date, end: date) -> int:
    """Days of 30E/360, the Eurobond basis: every 31st is a 30th, February is left as it is. [day]

    Source: 2006 ISDA Definitions, section 4.16(g) (from memory; tested on ISDA's worked sheet of 2008).
    """
    return _thirty_day_months(start, end) + min(end.day, 30) - min(start.day, 30)


def thirty_e_360_isda_days(start: date, end: date, termination: date | None) -> int:
    """Days of 30E/360 (ISDA): every month end is a 30th, but not the last day of February at termination. [day]

    termination  last day of the contract; None means that the end is not that day

    Source: 2006 ISDA Definitions, section 4.16(h) (from memory; tested on ISDA's worked sheet of 2008).
    """
    first = 30 if is_month_end(start) else start.day
    kept = end.month == 2 and end == termination
    last = 30 if is_month_end(end) and not kept else end.day
    return _thirty_day_months(start, end) + last - first


def _thirty_day_months(start: date, end: date) -> int:
    return 360 * (end.year - start.year) + 30 * (end.month - start.month)


def actual_actual_isda(start: date, end: date) -> float:
    """Days in leap years over 366 and the others over 365. [year]

    Source: 2006 ISDA Definitions, section 4.16(b) (cited from memory; tested on ISDA's memo of 1998).
    """
    if start.year == end.year:
        return actual_days(start, end) / _year_days(start.year)
    head = actual_days(start, date(start.year + 1, 1, 1)) / _year_days(start.year)
    tail = actual_days(date(end.year, 1, 1), end) / _year_days(end.year)
    return head + (end.year - start.year - 1) + tail


def actual_actual_icma(start: date, end: date, period: tuple[date, date], frequency: int) -> float:
    """Days over (coupons a year x days of the regular coupon period they lie in). [year]

    period     first and last day of the regular coupon period; start and end lie in it
    frequency  coupons a year

    Source: ICMA Rule 251.1(iii) (cited from memory; tested on ISDA's memo of 1998).
    """
    if not period[0] <= start <= end <= period[1] or period[0] == period[1]:
        raise ValueError(f"{start} to {end} does not lie in the coupon period {period[0]} to {period[1]}")
    return actual_days(start, end) / (frequency * actual_days(*period))


def actual_365l(start: date, end: date, period: tuple[date, date], frequency: int) -> float:
    """Days over 366 or 365, by the coupon period. [year]

    Annual coupons: 366 when a 29 February lies after the first day of the period and up to its last. Otherwise: 366
    when the period ends in a leap year.

    Source: ICMA Rule 251.1(i)(2) and 2006 ISDA Definitions, section 4.16(i) (cited from memory).
    """
    if frequency == 1:
        leap = any(period[0] < date(year, 2, 29) <= period[1] for year in _leap_years(period))
    else:
        leap = calendar.isleap(period[1].year)
    return actual_days(start, end) / (366 if leap else 365)


def _leap_years(period: tuple[date, date]) -> list[int]:
    return [year for year in range(period[0].year, period[1].year + 1) if calendar.isleap(year)]


def _year_days(year: int) -> int:
    return 366 if calendar.isleap(year) else 365


def year_fraction(
    name: str,
    start: date,
    end: date,
    *,
    period: tuple[date, date] | None = None,
    frequency: int | None = None,
    termination: date | None = None,
) -> float:
    """The fraction of a year from start to end under a named day count. [year]

    name         one of `DAY_COUNTS`
    period       coupon period the dates lie in: needed by ACT/ACT.ICMA and ACT/365L
    frequency    coupons a year: needed by the same two
    termination  last day of the contract: read by 30E/360.ISDA only

    ValueError when the end is before the start, the name is unknown, or a needed argument is missing.
    Source: named at each rule above.
    """
    if end < start:
        raise ValueError(f"the end {end} is before the start {start}")
    match day_count_named(name):
        case "30/360":
            return thirty_360_days(start, end) / 360
        case "30E/360":
            return thirty_e_360_days(start, end) / 360
        case "30E/360.ISDA":
            return thirty_e_360_isda_days(start, end, termination) / 360
        case "ACT/365.FIXED":
            return actual_days(start, end) / 365
        case "ACT/360":
            return actual_days(start, end) / 360
        case "ACT/ACT.ISDA":
            return actual_actual_isda(start, end)
    if period is None or not frequency:
        raise ValueError(f"{name} needs the coupon period and the coupons a year")
    rule = actual_actual_icma if day_count_named(name) == "ACT/ACT.ICMA" else actual_365l
    return rule(start, end, period, frequency)
