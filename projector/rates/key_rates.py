"""Shifts of the starting curve: parallel, and twelve triangular ones that add up to it (C5).

The quoted curve is first written out at every node it is bootstrapped on, so that a key tenor need not be quoted and a
shift never passes through the interpolation: the shifted curve is the interpolated one plus the shift.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from projector.rates.curve import CurveReading, log_discount_nodes, monthly_discounts
from projector.rates.curve_kernels import half_year_yields, monotone_slopes

Array = npt.NDArray[np.float64]

KEY_MONTHS = (1, 3, 6, 12, 24, 36, 60, 84, 120, 180, 240, 360)
KEY_NAMES = ("1m", "3m", "6m", "1y", "2y", "3y", "5y", "7y", "10y", "15y", "20y", "30y")


def written_out(yields: Array, reading: CurveReading) -> tuple[Array, CurveReading]:
    """The quoted yields at every node up to the longest quoted tenor, and how to read them back. [1/year]

    yields  quoted, on the study's basis [1/year], shape (tenor,)

    The curve read back is the same: nodes of 1 and 3 months carry the tenor that serves them, half-years the
    interpolated yield.
    """
    knots = reading.knots()
    x = np.array(reading.tenor_months, dtype=np.float64)[knots] / 12.0
    y, slope = np.ascontiguousarray(yields[knots]), np.zeros(knots.size)
    if not reading.linear:
        monotone_slopes(x, y, slope)
    half = np.empty(max(1, int(reading.tenor_months[-1]) // 6))
    half_year_yields(x, y, slope, reading.linear, half)
    tenors = (1, 3, *(6 * (k + 1) for k in range(half.size)))
    short = [float(yields[reading.short_tenor(node)]) for node in (1, 3)]
    return np.concatenate([short, half]), CurveReading(tenors, reading.par_basis, linear=True)


def triangular_shares(tenor_months: tuple[int, ...]) -> Array:
    """Share of a one-point shift that each key passes to each tenor: the twelve add to one. [-], shape (key, tenor)

    A key's share falls linearly to nothing at its two neighbours; before the first and after the last key it is flat.

    Source: Ho, Key Rate Durations: Measures of Interest Rate Risks, Journal of Fixed Income 2(2), 1992 (cited from
    memory).
    """
    at, keys = np.array(tenor_months, dtype=np.float64), np.array(KEY_MONTHS, dtype=np.float64)
    return np.array([np.interp(at, keys, one) for one in np.eye(keys.size)])


def shifted_discounts(yields: Array, reading: CurveReading, shifts: Array, last_month: int) -> Array:
    """P(tau) of a written-out curve under several shifts. [-], shape (tau 0..last_month, shift)

    yields  of `written_out` [1/year], shape (tenor,)
    shifts  added to them [1/year], shape (tenor, shift) or (1, shift) for parallel ones

    CurveError where a discount would not be positive.
    """
    moved = yields[:, None] + shifts
    return monthly_discounts(log_discount_nodes(moved[None, :, :], reading)[0], last_month)


def key_rate_shifts(tenor_months: tuple[int, ...], size: float, key_size: float) -> Array:
    """Columns: none, parallel up and down, then every key up and every key down. [1/year], shape (tenor, 3 + 24)

    size, key_size  of the parallel shifts and of the keys' [1/year], 0.0025 = 25 bp
    """
    keys = key_size * triangular_shares(tenor_months).T
    level = np.full((keys.shape[0], 1), size)
    return np.hstack([np.zeros_like(level), level, -level, keys, -keys])


def par_yield_at(discount: Array, years: Array) -> Array:
    """Par yield of a curve at any life: bond-equivalent from half a year, simple below. [1/year], shape of `years`

    discount  P(tau) by month, shape (tau,), long enough for the longest life
    years     at least 0

    Linear between 1, 3, 6, 12, 18, ... months; flat before the first.

    Source: 31 CFR 356, Appendix B, for the meaning of a bond-equivalent par yield (cited from memory).
    """
    months = np.arange(6, discount.size, 6)
    par = 2.0 * (1.0 - discount[months]) / np.cumsum(discount[months])
    short = [12.0 / m * (1.0 / discount[m] - 1.0) for m in (1, 3)]
    at = np.concatenate([[1.0, 3.0], months]) / 12.0
    return np.asarray(np.interp(years, at, np.concatenate([short, par])), dtype=np.float64)
