"""Net present value and internal rate of return of periodic flows.

Only products and sums are taken over arrays, so the same bits come out on every machine; a rate is per period of the
flows, and `annual_effective` brings a monthly one to a year.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]

STATUSES = ("none", "one", "several")
SAME_ROOT = 1e-7  # [-] roots closer than this, relative to the growth 1 + rate, are one
ROUNDING = 2.0**-52  # [-] Horner's value of n terms is known to n times this share of the sum of their sizes


def npv(flows: ArrayLike, rate: float, *, first_time: int) -> float | Array:
    """Present value at time 0 of flows one period apart. [as the flows]

    flows       first axis is time; further axes (paths) are kept [currency]
    rate        per period, above -1 [1/period]
    first_time  time of the first flow: 0 = now (the convention of an outlay), 1 = at the end of the first period (the
                convention of a spreadsheet's NPV)

    Source: definition; Horner's scheme.
    """
    if rate <= -1.0:
        raise ValueError(f"a rate of {rate} a period is not above -100 %")
    if first_time < 0:
        raise ValueError(f"the first flow at time {first_time} lies in the past")
    amounts = np.asarray(flows, dtype=np.float64)
    discount = 1.0 / (1.0 + rate)
    value = np.zeros(amounts.shape[1:])
    for flow in amounts[::-1]:
        value = value * discount + flow
    for _ in range(first_time):
        value = value * discount
    return value if value.ndim else float(value)


def npv_at_period_rates(flows: ArrayLike, discounts: ArrayLike) -> float | Array:
    """Present value at time 0 of flows at the ends of periods, each with its own one-period discount. [as the flows]

    flows      first axis is time, the first flow at the end of the first period [currency]
    discounts  value at the start of each period of 1 at its end [-], same first axis; other axes broadcast

    Source: definition; the innermost bracket is the last period.
    """
    amounts, factors = np.asarray(flows, dtype=np.float64), np.asarray(discounts, dtype=np.float64)
    if len(amounts) != len(factors):
        raise ValueError(f"{len(amounts)} flows do not go with {len(factors)} discounts")
    value = np.zeros(np.broadcast_shapes(amounts.shape[1:], factors.shape[1:]))
    for flow, factor in zip(amounts[::-1], factors[::-1], strict=True):
        value = (value + flow) * factor
    return value if value.ndim else float(value)


def annual_effective(monthly_rate: float) -> float:
    """The yearly rate that twelve months at the monthly rate make. [1/year]

    monthly_rate  above -1 [1/month]
    """
    if monthly_rate <= -1.0:
        raise ValueError(f"a rate of {monthly_rate} a month is not above -100 %")
    square = (1.0 + monthly_rate) * (1.0 + monthly_rate)
    third = square * square
    return third * third * third - 1.0


@dataclass(frozen=True)
class InternalRates:
    """Every rate above -100 % a period at which the flows are worth nothing."""

    status: str  # one of STATUSES
    rates: tuple[float, ...]  # ascending [1/period]

    @property
    def rate(self) -> float | None:
        """The rate when there is exactly one, otherwise None: no choice among several is made."""
        return self.rates[0] if self.status == "one" else None


def internal_rates(flows: Sequence[float] | Array) -> InternalRates:
    """All internal rates of return of flows one period apart. [1/period]

    flows  finite [currency]; the unit of money and the time of the first flow do not matter

    With v = 1 / (1 + i) the present value is a polynomial, and rates above -100 % are its positive roots. Rates from 0
    up are sought in v up to 1, rates below 0 in 1 + i up to 1 with the coefficients reversed, so that nothing
    overflows. One change of sign among the flows means exactly one root (Descartes). Otherwise both ranges are scanned
    on a grid, each change of sign is solved, and each turning point towards zero is looked at, which finds pairs of
    roots between two grid points and roots where the value touches zero. Three or more roots within two neighbouring
    steps of the grid (5 % of the rate each) could be missed in pairs.

    Source: Descartes' rule of signs; Norstrom, A Sufficient Condition for a Unique Nonnegative Internal Rate of Return,
    1972 (cited from memory), for why several roots must be expected.
    """
    amounts = np.asarray(flows, dtype=np.float64)
    if amounts.ndim != 1 or not np.isfinite(amounts).all():
        raise ValueError("flows must be one row of finite numbers")
    filled = np.flatnonzero(amounts)
    if len(filled) == 0:
        return InternalRates("none", ())
    terms = amounts[filled[0] : filled[-1] + 1] / np.abs(amounts).max()
    signs = np.sign(terms[terms != 0.0])
    changes = int(np.count_nonzero(signs[1:] != signs[:-1]))
    if changes == 0:
        return InternalRates("none", ())
    found = [1.0 / v - 1.0 for v in _roots(terms, changes)]
    found += [growth - 1.0 for growth in _roots(terms[::-1], changes)]
    rates = _distinct(sorted(found))
    return InternalRates("none" if not rates else "one" if len(rates) == 1 else "several", rates)


def _distinct(rates: list[float]) -> tuple[float, ...]:
    kept: list[float] = []
    for rate in rates:
        if not kept or rate - kept[-1] > SAME_ROOT * (1.0 + rate):
            kept.append(rate)
    return tuple(kept)


def _grid() -> Array:
    """Points of [0, 1], ascending: 1 / (1 + i) for i falling from 1e4 to 1e-6 by 5 % a step, with both ends.

    One point beyond 1 lets a turning point at a rate of 0 be seen.
    """
    points = [0.0]
    rate = 1e4
    while rate > 1e-6:
        points.append(1.0 / (1.0 + rate))
        rate /= 1.05
    return np.array([*points, 1.0, 1.0 + 2e-6])


GRID = _grid()


def _horner(terms: Sequence[float], x: float) -> float:
    value = 0.0
    for term in reversed(terms):
        value = value * x + term
    return value


def _horner_on_grid(terms: Sequence[float]) -> Array:
    value = np.zeros_like(GRID)
    for term in reversed(terms):
        value *= GRID
        value += term
    return value


def _roots(coefficients: Array, changes: int) -> list[float]:
    """Roots in (0, 1] of sum(coefficients[k] x^k), whose first and last coefficients are not 0."""
    terms = coefficients.tolist()
    if changes == 1:
        at_one = _horner(terms, 1.0)
        if at_one * terms[0] > 0.0:
            return []
        return [_solve(terms, 0.0, 1.0)]
    values = _horner_on_grid(terms)
    roots = [float(x) for x in GRID[values == 0.0]]
    signs = np.sign(values)
    crossing = np.flatnonzero(signs[:-1] * signs[1:] < 0.0)
    roots += [_solve(terms, float(GRID[k]), float(GRID[k + 1])) for k in crossing]
    return roots + _roots_at_turning_points(terms, values)


def _solve(terms: Sequence[float], low: float, high: float) -> float:
    from scipy.optimize import brentq  # here, not above: it takes a quarter of a second that `check` need not wait

    return float(brentq(lambda x: _horner(terms, x), low, high, xtol=1e-16, rtol=1e-15, maxiter=500))


def _roots_at_turning_points(terms: Sequence[float], values: Array) -> list[float]:
    """Roots where the value comes nearest to zero between three grid points of one sign: none, one or two each."""
    size, signs = np.abs(values), np.sign(values)
    one_sign = (signs[:-2] * signs[1:-1] > 0.0) & (signs[1:-1] * signs[2:] > 0.0)
    nearest = (size[1:-1] <= size[:-2]) & (size[1:-1] <= size[2:])
    slopes = [power * term for power, term in enumerate(terms)][1:]
    roots: list[float] = []
    for k in np.flatnonzero(one_sign & nearest):
        low, high = float(GRID[k]), float(GRID[k + 2])
        if _horner(slopes, low) * _horner(slopes, high) >= 0.0:
            continue
        turn = _solve(slopes, low, high)
        value = _horner(terms, turn)
        if abs(value) <= ROUNDING * len(terms) * _horner([abs(term) for term in terms], turn):
            roots.append(turn)
        elif value * values[k + 1] < 0.0:
            roots += [_solve(terms, low, turn), _solve(terms, turn, high)]
    return roots
