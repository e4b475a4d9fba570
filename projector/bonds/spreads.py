"""The three spreads over Treasury, kept apart (C6), continuously compounded.

(i) valuation spread = class spread(rating, remaining life) + the security's residual at month 0, fading over the
stated years; (ii) refunding spread = class spread + new-issue concession, unless stated equal to (i); (iii) purchase
spread, stated with each purchase class. The issuer decides with (ii); the holder's value uses (i) on the issuer's
exercise set, and (i) is calibrated under that same policy.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
import pandas as pd

Array = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

BP = 1e-4


@dataclass(frozen=True)
class ClassSpreads:
    """Class spreads by rating: knots of remaining life [year] and spread [1/year]."""

    life: dict[str, Array]
    spread: dict[str, Array]

    @staticmethod
    def from_table(table: pd.DataFrame) -> ClassSpreads:
        """From columns rating, life_years, spread_bp."""
        ordered = table.sort_values(["rating", "life_years"])
        parts = {str(rating): part for rating, part in ordered.groupby("rating", sort=True)}
        return ClassSpreads(
            {r: part["life_years"].to_numpy(dtype=np.float64) for r, part in parts.items()},
            {r: part["spread_bp"].to_numpy(dtype=np.float64) * BP for r, part in parts.items()},
        )

    def at(self, rating: str, years: Array) -> Array:
        """Spread at a remaining life, linear between the stated lives and flat outside. [1/year]"""
        return np.interp(years, self.life[rating], self.spread[rating])


@dataclass(frozen=True)
class SpreadPath:
    """Class spread along a security's life and the residual's fade: what the spreads at a month are made of.

    class_spread  [security, month] at the remaining life of that month [1/year]
    fade          [month] share of the residual left [-]
    """

    class_spread: Array
    fade: Array
    residual: Array  # [security], from calibration [1/year]
    refunding: Array  # [security, month], the issuer's [1/year]

    def valuation(self, units: IntArray, month: int) -> Array:
        """Valuation spread of some securities at a month. [1/year]"""
        return self.class_spread[units, month] + self.residual[units] * self.fade[month]


def class_spread_table(classes: ClassSpreads, ratings: list[str], maturity: IntArray, months: int) -> Array:
    """Class spread at the remaining life of every month 0..months. [1/year], shape (security, month)"""
    out = np.empty((len(ratings), months + 1))
    m = np.arange(months + 1)
    for s, rating in enumerate(ratings):
        out[s] = classes.at(rating, np.maximum(maturity[s] - m, 0) / 12.0)
    return out


def residual_fade(years: float, months: int) -> Array:
    """Share of the residual left at each month: one for ever when years is 0, else linear to zero. [-]"""
    if years == 0:
        return np.ones(months + 1)
    return np.maximum(1.0 - np.arange(months + 1) / (12.0 * years), 0.0)
