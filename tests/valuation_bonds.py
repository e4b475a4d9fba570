"""Bonds on mapped months and curves for the tests of sensitivities, call odds and refunding yields."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from projector.bonds.exercise.settle_kernels import NEVER_PUT
from projector.bonds.mapped import MappedBonds
from projector.bonds.solving import ExerciseModel, MonthSolver
from projector.bonds.spreads import SpreadPath
from projector.rates.curve import CurveReading

TENORS = (1, 3, 6, 12, 24, 36, 60, 84, 120, 240, 360)
HUMPED = np.array([0.041, 0.044, 0.0476, 0.0473, 0.0441, 0.0422, 0.0399, 0.0396, 0.0388, 0.0414, 0.0397])


def reading(par: bool = True, linear: bool = False) -> CurveReading:
    return CurveReading(TENORS, par, linear)


@dataclass(frozen=True)
class Terms:
    """One bond: life [month], grid step, coupon [per 100 a year], months between coupons, clean call price by month."""

    maturity: int
    step: int = 6
    coupon: float = 5.0
    period: int = 6
    calls: Mapping[int, float] = field(default_factory=dict)


def mapped(*terms: Terms) -> MappedBonds:
    """The bonds in the order given."""
    count, last = len(terms), max(t.maturity for t in terms)
    coupon, accrued = np.zeros((count, last + 1)), np.zeros((count, last + 1))
    price = np.full((count, last + 1), np.inf)
    for u, t in enumerate(terms):
        amount, months = t.coupon * t.period / 12.0, np.arange(t.maturity)
        coupon[u, np.arange(t.maturity, 0, -t.period)] = amount
        accrued[u, : t.maturity] = amount * ((months - t.maturity) % t.period) / t.period
        for month, k in t.calls.items():
            price[u, month] = k
    maturity = np.array([t.maturity for t in terms])
    months = np.arange(coupon.shape[1])[None, :]
    outstanding = np.where(months < maturity[:, None], 1.0, 0.0)
    principal = np.where(months == maturity[:, None], 100.0, 0.0)
    none = np.zeros(count, dtype=np.int64)
    return MappedBonds(
        ids=tuple(f"B{u}" for u in range(count)), ratings=("A",) * count, maturity=maturity,
        step=np.array([t.step for t in terms]), coupon_step=np.array([t.period for t in terms]), coupon=coupon,
        accrued=accrued, clean_price=price, put_price=np.full(coupon.shape, NEVER_PUT), outstanding=outstanding,
        principal=principal, redemption=np.full(count, 100.0), double_share=np.zeros(coupon.shape), call_lag=none,
        put_lag=none, announced=np.zeros(count, dtype=np.bool_),
    )  # fmt: skip


def solver(
    *terms: Terms, refunding: float = 0.01, valuation: float = 0.012, cost: float = 0.5, sigma: float = 0.01,
    reversion: float = 0.03,
) -> MonthSolver:  # fmt: skip
    """The bonds with level spreads. [1/year]; cost [per 100]"""
    bonds = mapped(*terms)
    shape = (len(terms), bonds.last_month + 1)
    spreads = SpreadPath(
        np.full(shape, valuation), np.ones(shape[1]), np.zeros(len(terms)), np.full(shape, refunding)
    )  # fmt: skip
    return MonthSolver(bonds, spreads, ExerciseModel(reversion, sigma, cost))


def every(first: int, stop: int, step: int, price: float = 100.0, fall: float = 0.0) -> dict[int, float]:
    """A call schedule: month -> clean price, falling by `fall` at each right down to 100."""
    return {m: max(100.0, price - fall * i) for i, m in enumerate(range(first, stop, step))}


# every grid step, offsets from one month to a whole step, one right and many, near and far
MIXED = (
    Terms(120, 6, 5.0, 6, every(12, 120, 6)),
    Terms(119, 6, 6.0, 6, every(5, 119, 6, 103.0, 0.25)),
    Terms(115, 6, 5.5, 6, every(1, 115, 6)),
    Terms(240, 1, 5.5, 6, every(1, 240, 1)),
    Terms(87, 1, 4.5, 6, every(40, 87, 1, 102.0, 0.05)),
    Terms(96, 3, 5.0, 3, every(24, 96, 3)),
    Terms(360, 12, 6.0, 12, every(60, 360, 12, 104.0, 0.5)),
    Terms(120, 6, 5.2, 6, {60: 100.0}),
    Terms(117, 6, 5.2, 6, {3: 100.0}),
    Terms(60, 6, 5.0, 6),
)
