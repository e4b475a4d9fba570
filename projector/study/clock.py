"""Month ends after the valuation date: the one clock of paths, decisions and roll-forward (C1)."""

from __future__ import annotations

import calendar
from datetime import date


def month_of(day: date, valuation: date) -> int:
    """The month m with `day` in (end of m-1, end of m]; 0 or less on or before the valuation month's end. [month]

    valuation  a month end
    """
    return (day.year - valuation.year) * 12 + day.month - valuation.month


def month_end(month: int, valuation: date) -> date:
    """The last day of month m after the valuation date. Raises ValueError beyond year 9999."""
    index = valuation.year * 12 + valuation.month - 1 + month
    year, month0 = divmod(index, 12)
    return date(year, month0 + 1, calendar.monthrange(year, month0 + 1)[1])


def year_ends(months: int) -> list[int]:
    """Months 12, 24, ... up to the horizon."""
    return list(range(12, months + 1, 12))
