"""Values on shifted curves at the valuation date, and what they say: effective duration, convexity, key-rate durations.

Each shifted curve is one more path of the same solve, so that all curves of all securities of one grid go through the
solver together. Spreads, volatility and mean reversion are held; the issuer decides anew on every curve.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from projector.bonds.exercise.path_kernels import straight_values
from projector.bonds.exercise.step_operator import GRID_FINE, Grid
from projector.bonds.solving import Jobs, MonthSolver

Array = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

SHIFT = 0.0025  # smaller shifts see the grid, not the bond: 1 bp misses a convexity by hundreds
# A shift of one par yield moves far forwards many times as much: at 25 bp third-order terms part the sum of the keys
# from the duration by up to 0.09 years, at 5 bp by 0.004, while the fine grid adds 0.00005.
KEY_SHIFT = 0.0005


@dataclass(frozen=True)
class RateSensitivity:
    """Model value at month 0 and its answers to shifts of the quoted yields; mapped months (C1). shape (unit,)"""

    value: Array  # dirty [per 100]
    duration: Array  # [year]
    convexity: Array  # [year^2], not halved
    key_rate: Array  # [unit, key] [year]


def straight_on_curves(solver: MonthSolver, units: IntArray, discount: Array) -> Array:
    """Promised payments at the valuation spread, on every curve. [per 100 dirty], shape (unit, curve)

    discount  P(tau) of month 0 [tau, curve]
    """
    out, bonds = np.empty((units.size, discount.shape[1])), solver.bonds
    spread = solver.spreads.valuation(units, 0)
    for step in sorted(set(bonds.coupon_step[units].tolist())):
        rows = np.flatnonzero(bonds.coupon_step[units] == step)
        part = np.empty((rows.size, discount.shape[1]))
        wanted = np.ones(part.shape, dtype=np.bool_)
        straight_values(
            0, int(step), units[rows], bonds.maturity, bonds.flow, spread[rows], discount, wanted, part
        )  # fmt: skip
        out[rows] = part
    return out


def values_on_curves(solver: MonthSolver, units: IntArray, discount: Array, grid: Grid = GRID_FINE) -> Array:
    """Holder's value at month 0 on every curve, the issuer deciding on that curve. [per 100 dirty], (unit, curve)

    discount  P(tau) of month 0 [tau, curve]
    """
    bonds, curves = solver.bonds, discount.shape[1]
    out = np.empty((units.size, curves))
    live = bonds.with_rights()[units]
    out[~live] = straight_on_curves(solver, units[~live], discount)
    with_rights = np.flatnonzero(live)
    for at, part in solver.groups(0, units[with_rights]):
        rows = with_rights[part]
        paths = np.tile(np.arange(curves), rows.size)
        jobs = Jobs(at, np.repeat(units[rows], curves), paths)
        both = solver.needs_holder(0, units[rows])
        out[rows] = solver.solve(jobs, discount, grid, both)[1].reshape(rows.size, curves)
    return out


def central_duration(up: Array, down: Array, value: Array, shift: float) -> Array:
    """Minus the two-sided slope of the value over the value. [year]

    up, down, value  with yields raised, lowered, unchanged [per 100 dirty]
    shift            size of the shift [1/year]

    Source: Fabozzi, Fixed Income Mathematics, effective duration (cited from memory).
    """
    return (down - up) / (2.0 * shift * value)


def central_convexity(up: Array, down: Array, value: Array, shift: float) -> Array:
    """Second difference of the value over the value, not halved. [year^2]

    The value moves by about value x (-duration x change + convexity / 2 x change^2).

    Source: Fabozzi, Fixed Income Mathematics, effective convexity (cited from memory), without its factor one half.
    """
    return (up + down - 2.0 * value) / (value * shift * shift)


def rate_sensitivity(
    solver: MonthSolver, units: IntArray, discount: Array, shift: float = SHIFT, key_shift: float = KEY_SHIFT
) -> RateSensitivity:
    """All sensitivities from one set of values.

    discount          P(tau) of month 0 [tau, curve], curves in the order none, up, down, keys up, keys down
    shift, key_shift  that made them [1/year]
    """
    values = values_on_curves(solver, units, discount)
    keys = (values.shape[1] - 3) // 2
    base, up, down = values[:, 0], values[:, 1], values[:, 2]
    key_up, key_down = values[:, 3 : 3 + keys], values[:, 3 + keys :]
    return RateSensitivity(
        value=base,
        duration=central_duration(up, down, base, shift),
        convexity=central_convexity(up, down, base, shift),
        key_rate=central_duration(key_up, key_down, base[:, None], key_shift),
    )
