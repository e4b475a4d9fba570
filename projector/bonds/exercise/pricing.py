"""The pricing function: arrays in, numbers out, any number of solves in batches of sixteen lanes (C4)."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from projector.bonds.exercise.settle_kernels import NEVER_PUT
from projector.bonds.exercise.solver_kernels import (
    LANES,
    LaneTerms,
    OperatorTables,
    Rights,
    leads,
    solve_batch,
)
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
    price         dirty call price ex coupon paid for a call decided at step k, inf where there is no right
    bar           price plus the issuer's cost
    put           dirty put price paid for a put decided at step k, -1e18 where there is none (None: no puts)
    share         share that may be retired at 100 at step k beside a sinking payment, and the par then left (None: no)
    call_steps    whole steps from the decision to call to the payment; put_steps the same of puts

    Payments here fall on the steps; securities whose notice is no whole number of steps go through `path_kernels`.
    """

    steps: IntArray
    ratio: Array
    holder_ratio: Array
    flow: Array
    price: Array
    bar: Array
    put: Array | None = None
    share: Array | None = None
    left: Array | None = None
    call_steps: int = 0
    put_steps: int = 0


def first_and_last_right(problem: Problem) -> tuple[IntArray, IntArray]:
    """First and last step with a right before maturity, 0 and 0 where there is none. shape (solve,)"""
    rows, steps = np.arange(problem.bar.shape[0])[:, None], problem.steps
    live = np.isfinite(problem.bar)
    if problem.put is not None:
        live = live | (problem.put > NEVER_PUT)
    if problem.share is not None:
        live = live | (problem.share > 0.0)
    live = live & (rows >= 1) & (rows < steps[None, :])
    any_right = live.any(axis=0)
    first = np.where(any_right, live.argmax(axis=0), 0)
    last = np.where(any_right, live.shape[0] - 1 - live[::-1].argmax(axis=0), 0)
    return first.astype(np.int64), last.astype(np.int64)


def operator_tables(op: Operator) -> OperatorTables:
    """The operator's tables as the kernels take them."""
    return OperatorTables(
        op.half_band, op.lag > 0.0, op.lo, op.hi, op.conv, op.first_row, op.band_start, op.weights, op.growth,
        op.straight_conv, op.first_weights, op.first_local, op.local_x, op.local_weights,
    )  # fmt: skip


def lane_tables(problem: Problem) -> LaneTerms:
    """The problem's columns as the kernels take them."""
    none = np.empty((0, problem.steps.size))
    par = 100.0 * problem.left if problem.left is not None else none
    if problem.share is not None and problem.left is None:
        par = np.full_like(problem.share, 100.0)
    return LaneTerms(
        problem.ratio, problem.holder_ratio, none, none, problem.flow, problem.price, problem.bar,
        none if problem.put is None else problem.put, none if problem.share is None else problem.share, par, par,
    )  # fmt: skip


def solve(op: Operator, problem: Problem, both: bool = True) -> tuple[Array, Array]:
    """Issuer's cost and holder's value today, ex coupon. [per 100], shape (solve,)

    A short batch is filled with copies of its last solve, never with zeros.
    """
    count = problem.steps.size
    issuer, holder = np.empty(count), np.empty(count)
    first, last = first_and_last_right(problem)
    tables, terms = operator_tables(op), lane_tables(problem)
    puts = problem.put is not None
    notice = problem.call_steps > 0
    rights = Rights(problem.call_steps, problem.put_steps, both or puts, notice, puts, problem.share is not None)
    lanes = LANES if count > 1 else 1
    lead = np.empty((6, count))
    leads(problem.steps, first, problem.ratio, problem.holder_ratio, problem.flow, lead)
    if count == lanes:  # already one full batch
        solve_batch(*tables, lead, problem.steps, first, last, *terms, *rights, issuer, holder)
        return issuer, holder
    out_issuer, out_holder = np.empty(lanes), np.empty(lanes)
    for start in range(0, count, lanes):
        take = np.minimum(np.arange(start, start + lanes), count - 1)
        part = LaneTerms(*(np.ascontiguousarray(table[:, take]) for table in terms))
        some = np.ascontiguousarray(lead[:, take])
        rows = problem.steps[take], first[take], last[take]
        solve_batch(*tables, some, *rows, *part, *rights, out_issuer, out_holder)
        stop = min(start + lanes, count)
        issuer[start:stop] = out_issuer[: stop - start]
        holder[start:stop] = out_holder[: stop - start]
    return issuer, holder


def operator_for(
    a: float, sigma: float, step_months: int, offset_months: int, steps: int, grid: Grid, lag_months: int = 0
) -> Operator:
    """The operator with room for `steps` steps, shared between calls; numbers do not depend on the room."""
    room = max(8, -(-steps // 40) * 40)
    return build_operator(a, sigma, step_months, offset_months, room, grid, lag_months)
