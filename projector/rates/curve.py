"""The Treasury curve of every month and path, and the one rule that turns it into discounts (C5).

Quoted yields are bond-equivalent par yields (or zero yields, when the study says so); tenors under half a year are
simple yields. Between quoted tenors of half a year and more the yield is interpolated, bootstrapped on a half-year
grid, and the logarithm of the discount is linear between nodes; forwards are flat beyond the last quoted tenor.

Source: 31 CFR Part 356 Appendix B for the meaning of a bond-equivalent par yield; bootstrap as in Hull, Options,
Futures, and Other Derivatives, chapter on interest rates (both cited from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from projector.rates.curve_kernels import discounts_by_month, log_discounts

Array = npt.NDArray[np.float64]

NODE_MONTHS = np.array([1, 3] + [6 * k for k in range(1, 61)], dtype=np.int64)


class CurveError(ValueError):
    """A yield curve cannot be turned into positive discounts; says which month and path (counted from 0)."""

    def __init__(self, month: int, path: int) -> None:
        super().__init__(f"the yields of month {month}, path number {path + 1}, leave no positive discount")
        self.month, self.path = month, path


@dataclass(frozen=True)
class CurveReading:
    """How quoted tenors become nodes: fixed once per study."""

    tenor_months: tuple[int, ...]
    par_basis: bool
    linear: bool

    def knots(self) -> npt.NDArray[np.int64]:
        """Tenors (by index) that carry the interpolation: half a year and up, and the nearest below when
        the six-month tenor itself is not quoted."""
        tenors = np.array(self.tenor_months)
        long = np.flatnonzero(tenors >= 6)
        if 6 not in self.tenor_months and (tenors < 6).any():
            long = np.concatenate([np.flatnonzero(tenors < 6)[-1:], long])
        return long

    def short_tenor(self, node: int) -> int:
        """Index of the tenor that serves a node under half a year: itself, else the nearest quoted one."""
        tenors = np.array(self.tenor_months)
        return int(np.argmin(np.abs(tenors - node) * 1000 + tenors))

    def unused_tenors(self) -> tuple[int, ...]:
        """Quoted tenors that no node reads: `check` lists them."""
        used = {self.short_tenor(1), self.short_tenor(3), *self.knots().tolist()}
        return tuple(t for i, t in enumerate(self.tenor_months) if i not in used)


def log_discount_nodes(yields: Array, reading: CurveReading) -> Array:
    """ln P at `NODE_MONTHS`. [-], shape (month, node, path)

    yields  quoted yields [1/year], shape (month, tenor, path)
    Raises CurveError where a discount would not be positive.
    """
    knots = reading.knots()
    tenors = np.array(reading.tenor_months, dtype=np.float64)
    out = np.empty((yields.shape[0], NODE_MONTHS.size, yields.shape[2]))
    log_discounts(
        np.ascontiguousarray(yields),
        np.array([reading.short_tenor(1), reading.short_tenor(3)]),
        tenors[knots] / 12.0,
        knots,
        reading.par_basis,
        reading.linear,
        max(1, int(reading.tenor_months[-1]) // 6),
        out,
    )
    if not np.isfinite(out).all():
        month, _, path = (int(i[0]) for i in np.nonzero(~np.isfinite(out)))
        raise CurveError(month, path)
    return out


def monthly_discounts(log_discount: Array, last_month: int) -> Array:
    """Discounts of one month's curve to 0..last_month months ahead. [-], shape (tau, path)

    log_discount  ln P at the nodes, shape (node, path)
    """
    out = np.empty((last_month + 1, log_discount.shape[1]))
    discounts_by_month(np.ascontiguousarray(log_discount), NODE_MONTHS, out)
    return out


def par_yield(discount: Array, months: int) -> Array:
    """Bond-equivalent par yield for a whole number of half-years. [1/year], shape (path,)

    discount  P(tau), shape (tau, path)
    """
    annuity = np.zeros(discount.shape[1])
    for tau in range(6, months + 1, 6):
        annuity = annuity + discount[tau]
    return 2.0 * (1.0 - discount[months]) / annuity
