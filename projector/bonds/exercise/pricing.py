"""The pricing function: arrays in, numbers out, any number of solves in batches of sixteen lanes (C4)."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from projector.bonds.exercise.solver_kernels import LANES, leads, solve_lanes
from projector.bonds.exercise.step_operator import Grid, Operator, build_operator

Array = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]


@dataclass(frozen=True)
class Problem:
    """Solves that share a step and an offset, per 100 of par; [step, solve] arrays, step 0 is today.

    steps         [solve] number of steps to maturity
    ratio         P0(t_(k+1)) / P0(t_k) of the issuer's curve, in row k
    holder_ratio  the same with the valuation spread
    flow          promised payments at step k, redemption included (row 0 unused)
    price         dirty call price ex coupon at step k, inf where there is no right
    bar           price plus the issuer's cost
    """

    steps: IntArray
    ratio: Array
    holder_ratio: Array
    flow: Array
    price: Array
    bar: Array


def first_and_last_right(bar: Array, steps: IntArray) -> tuple[IntArray, IntArray]:
    """First and last step with a right before maturity, 0 and 0 where there is none. shape (solve,)"""
    rows = np.arange(bar.shape[0])[:, None]
    live = np.isfinite(bar) & (rows >= 1) & (rows < steps[None, :])
    any_right = live.any(axis=0)
    first = np.where(any_right, live.argmax(axis=0), 0)
    last = np.where(any_right, bar.shape[0] - 1 - live[::-1].argmax(axis=0), 0)
    return first.astype(np.int64), last.astype(np.int64)


def operator_arguments(op: Operator) -> tuple[object, ...]:
    """The operator's tables in the order the kernel takes them."""
    return (
        op.half_band, op.lo, op.hi, op.conv, op.first_row, op.band_start, op.weights, op.growth, op.straight_conv,
        op.first_weights, op.first_local, op.local_x, op.local_weights,
    )  # fmt: skip


def solve(op: Operator, problem: Problem, both: bool = True) -> tuple[Array, Array]:
    """Issuer's cost and holder's value today, ex coupon. [per 100], shape (solve,)

    A short batch is filled with copies of its last solve, never with zeros.
    """
    count = problem.steps.size
    issuer, holder = np.empty(count), np.empty(count)
    first, last = first_and_last_right(problem.bar, problem.steps)
    arguments = operator_arguments(op)
    lanes = LANES if count > 1 else 1
    lead = np.empty((6, count))
    leads(problem.steps, first, problem.ratio, problem.holder_ratio, problem.flow, lead)
    given = (problem.ratio, problem.holder_ratio, problem.flow, problem.price, problem.bar)
    if count == lanes:  # already one full batch
        solve_lanes(*arguments, 0, lead, problem.steps, first, last, *given, both, issuer, holder)
        return issuer, holder
    out_issuer, out_holder = np.empty(lanes), np.empty(lanes)
    for start in range(0, count, lanes):
        take = np.minimum(np.arange(start, start + lanes), count - 1)
        tables = (table[:, take] for table in given)
        solve_lanes(
            *arguments, 0, lead[:, take], problem.steps[take], first[take], last[take], *tables, both, out_issuer,
            out_holder,
        )  # fmt: skip
        stop = min(start + lanes, count)
        issuer[start:stop] = out_issuer[: stop - start]
        holder[start:stop] = out_holder[: stop - start]
    return issuer, holder


def operator_for(a: float, sigma: float, step_months: int, offset_months: int, steps: int, grid: Grid) -> Operator:
    """The operator with room for `steps` steps, shared between calls; numbers do not depend on the room."""
    room = max(8, -(-steps // 40) * 40)
    return build_operator(a, sigma, step_months, offset_months, room, grid)
