"""The seven deterministic paths of the asset adequacy regulations, with each reading chosen in the study.

Source: New York 11 NYCRR 95.10(d) and Nevada Administrative Code 681B.240 (1): the seven changes and the floor at
half the starting five-year Treasury yield. Nevada's printed sixth path names five years for the way back; ten is the
only reading that returns to the start, as New York's text has it. The texts leave three points open, and each is a
choice of the study: what the floor limits, whether yearly changes come at year ends or evenly within the year, and
how the sixth path recovers when the floor was reached. A path that changes "immediately" applies from month 1.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[np.float64]

TITLES = ("Level", "Gradual up", "Up and down", "Pop up", "Gradual down", "Down and up", "Pop down")


def shift_at(path: int, years: float) -> float:
    """Shift of one path without a floor [1/year]; path 1..7, years >= 0 after the valuation date.

    Source: 11 NYCRR 95.10(d)(1)-(7).
    """
    if path == 2:
        return 0.005 * min(years, 10.0)
    if path == 3:
        return 0.01 * (min(years, 5.0) - max(min(years, 10.0) - 5.0, 0.0))
    if path == 4:
        return 0.03 if years > 0.0 else 0.0
    if path == 5:
        return -0.005 * min(years, 10.0)
    if path == 6:
        return -0.01 * (min(years, 5.0) - max(min(years, 10.0) - 5.0, 0.0))
    if path == 7:
        return -0.03 if years > 0.0 else 0.0
    return 0.0


def read_years(month: int, within_year: str, path: int) -> float:
    """Years of change seen at a month: whole years passed, or months over twelve; jumps are seen at once."""
    if within_year == "linear" or path in (4, 7):
        return month / 12.0
    return float(month // 12)


def floored(shift: float, limit: float) -> float:
    """A shift no lower than `limit` [1/year] (a negative number)."""
    return max(shift, limit)


def recovery_from_floor(years: float, limit: float) -> float:
    """Sixth path rising by one point a year from the floor right after year 5, to zero at the most. [1/year]"""
    if years <= 5.0:
        return floored(shift_at(6, years), limit)
    return min(floored(shift_at(6, 5.0), limit) + 0.01 * (years - 5.0), 0.0)


def floored_shift(path: int, years: float, limit: float, recovery: str) -> float:
    """Shift of one path under a floor on the shift. [1/year]"""
    if path == 6 and recovery == "from_floor":
        return recovery_from_floor(years, limit)
    return floored(shift_at(path, years), limit)


def tenor_shift(path: int, years: float, limit: float, recovery: str) -> float:
    """Shift of one tenor kept at half its own start; a tenor that starts at or below zero has no floor. [1/year]"""
    return floored_shift(path, years, limit, recovery) if limit < 0.0 else shift_at(path, years)


def seven_paths(start: Array, five_year: float, months: int, floor: str, within_year: str, recovery: str) -> Array:
    """Yields on the seven paths. [1/year], shape (month 0..months, tenor, 7)

    start      starting yields by tenor [1/year]
    five_year  starting five-year yield [1/year], which sets the floor on the shift
    floor      "none", "shift" (no shift below half the five-year yield), "every_tenor" (each tenor keeps half its own)
    """
    out = np.empty((months + 1, start.size, 7))
    for m in range(months + 1):
        for k in range(1, 8):
            years = read_years(m, within_year, k)
            if floor == "every_tenor":
                shifts = np.array([tenor_shift(k, years, -0.5 * y, recovery) for y in start])
            elif floor == "shift" and five_year > 0.0:
                shifts = np.full(start.size, floored_shift(k, years, -0.5 * five_year, recovery))
            else:
                shifts = np.full(start.size, shift_at(k, years))
            out[m, :, k - 1] = start + shifts
    return out
