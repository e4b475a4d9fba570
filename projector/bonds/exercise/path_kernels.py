"""From a month's curve to batches of solves: deterministic bounds, lanes packed across securities, straight values.

Tables are [unit, month] per 100 of par on mapped months: `flow` promised payments, `price` dirty call prices (inf where
there is no right). Discounts are one month's P(tau) [tau, path]; spreads are continuously compounded [1/year].
"""

from __future__ import annotations

import numpy as np

from projector.arithmetic.elementary import exp_one
from projector.arithmetic.kernels import Flags, Floats, Integers, kernel
from projector.bonds.exercise.solver_kernels import LANES, solve_lanes


@kernel
def upper_bounds(
    month: int, step: int, units: Integers, maturity: Integers, flow: Floats, price: Floats, cost: float,
    spread: Floats, discount: Floats, alive: Flags, out: Floats,
) -> None:  # fmt: skip
    """Cost of the best policy fixed in advance, an upper bound of the issuer's continuation. [per 100], [unit, path]

    The least over later rights k of the payments up to k and the bar at k, and over running to maturity.
    Paths where the security is gone are given -inf.
    """
    paths = discount.shape[1]
    for n in range(units.shape[0]):
        u = units[n]
        decay = exp_one(-spread[n] * step / 12.0)
        for p in range(paths):
            if not alive[n, p]:
                out[n, p] = -np.inf
                continue
            paid = 0.0
            best = np.inf
            factor = 1.0
            for t in range(month + step, maturity[u] + 1, step):
                factor = factor * decay
                d = discount[t - month, p] * factor
                paid += flow[u, t] * d
                if t < maturity[u] and price[u, t] < np.inf:
                    stop = paid + (price[u, t] + cost) * d
                    if stop < best:
                        best = stop
            out[n, p] = paid if paid < best else best


@kernel
def straight_values(
    month: int, step: int, units: Integers, maturity: Integers, flow: Floats, spread: Floats, discount: Floats,
    wanted: Flags, out: Floats,
) -> None:  # fmt: skip
    """Value of the promised payments after `month`. [per 100], [unit, path]; paths not wanted are left alone.

    step  [month] greatest step on which all payments of these units fall, counted back from maturity
    """
    paths = discount.shape[1]
    for n in range(units.shape[0]):
        u = units[n]
        first = month + 1 + (maturity[u] - month - 1) % step
        start = exp_one(-spread[n] * (first - month) / 12.0)
        decay = exp_one(-spread[n] * step / 12.0)
        for p in range(paths):
            if not wanted[n, p]:
                continue
            total = 0.0
            factor = start
            for t in range(first, maturity[u] + 1, step):
                total += flow[u, t] * discount[t - month, p] * factor
                factor = factor * decay
            out[n, p] = total


@kernel
def first_and_last(
    month: int, offset: int, step: int, maturity: int, unit: int, price: Floats
) -> tuple[int, int]:  # fmt: skip
    """First and last step with a right before maturity, 0 and 0 where there is none."""
    first = 0
    last = 0
    k = 1
    for t in range(month + offset, maturity, step):
        if price[unit, t] < np.inf:
            first = k if first == 0 else first
            last = k
        k += 1
    return first, last


@kernel
def fill_lead(
    lane: int, month: int, offset: int, step: int, first: int, maturity: int, unit: int, path: int, flow: Floats,
    issuer_spread: float, holder_spread: float, discount: Floats, lead: Floats,
) -> None:  # fmt: skip
    """Discount to the first right, value of the payments up to it, and of all of them, for both spreads.

    first  step of the first right, 0: none, and only the last of the three is meant
    """
    issuer, decay = exp_one(-issuer_spread * offset / 12.0), exp_one(-issuer_spread * step / 12.0)
    holder, held = exp_one(-holder_spread * offset / 12.0), exp_one(-holder_spread * step / 12.0)
    stop = month + offset + (first - 1) * step
    paid, kept = 0.0, 0.0
    for t in range(month + offset, maturity + 1, step):
        amount = flow[unit, t]
        if amount != 0.0:
            value = amount * discount[t - month, path]
            paid += value * issuer
            kept += value * holder
        if t == stop:
            here = discount[t - month, path]
            lead[0, lane], lead[1, lane] = here * issuer, paid
            lead[3, lane], lead[4, lane] = here * holder, kept
        issuer = issuer * decay
        holder = holder * held
    lead[2, lane], lead[5, lane] = paid, kept


@kernel
def fill_lane(
    lane: int, month: int, offset: int, step: int, begin: int, steps: int, maturity: int, unit: int, path: int,
    flow: Floats, price: Floats, cost: float, issuer_spread: float, holder_spread: float, discount: Floats,
    ratio: Floats, holder_ratio: Floats, flows: Floats, prices: Floats, bars: Floats,
) -> None:  # fmt: skip
    """Lays one job out in its lane from step `begin` on; a lane's bits do not depend on its neighbours' rights."""
    decay, held = exp_one(-issuer_spread * step / 12.0), exp_one(-holder_spread * step / 12.0)
    t = month + offset + (begin - 1) * step
    before = discount[t - month, path] if begin > 0 else 1.0
    for k in range(begin + 1, steps + 1):
        t = month + offset + (k - 1) * step
        here = discount[t - month, path]
        n = k - begin
        ratio[n - 1, lane] = here / before * decay
        holder_ratio[n - 1, lane] = here / before * held
        before = here
        flows[n, lane] = flow[unit, t]
        if t < maturity and price[unit, t] < np.inf:
            prices[n, lane] = price[unit, t]
            bars[n, lane] = price[unit, t] + cost


@kernel
def run_jobs(
    half_band: int, lo: Integers, hi: Integers, conv: Floats, row: int, band_start: Integers, weights: Floats,
    growth: Floats, straight_conv: Floats, first_weights: Floats, first_local: Flags, local_x: Floats,
    local_weights: Floats, month: int, offset: int, step: int, job_unit: Integers, job_path: Integers,
    maturity: Integers, flow: Floats, price: Floats, cost: float, issuer_spread: Floats, holder_spread: Floats,
    discount: Floats, both: bool, issuer_cost: Floats, holder_value: Floats,
) -> None:  # fmt: skip
    """Solves every job (unit, path) on that path's own curve of `month`, sixteen at a time across units.

    issuer_spread, holder_spread  [job]
    offset                        months to the first step of these units' grids
    """
    jobs = job_unit.shape[0]
    for start in range(0, jobs, LANES):
        count = min(LANES, jobs - start)
        steps = np.empty(LANES, dtype=np.int64)
        first = np.zeros(LANES, dtype=np.int64)
        last = np.zeros(LANES, dtype=np.int64)
        top = 0
        begin = 1 << 30
        for lane in range(LANES):
            u = job_unit[start + min(lane, count - 1)]  # a short batch is filled with copies of its last job
            steps[lane] = (maturity[u] - month - offset) // step + 1
            first[lane], last[lane] = first_and_last(month, offset, step, maturity[u], u, price)
            top = max(top, steps[lane])
            begin = min(begin, max(first[lane] if first[lane] > 0 else steps[lane], 1) - 1)
        rows = top - begin + 1
        ratio, holder_ratio = np.ones((rows, LANES)), np.ones((rows, LANES))
        flows, lead = np.zeros((rows, LANES)), np.empty((6, LANES))
        prices, bars = np.full((rows, LANES), np.inf), np.full((rows, LANES), np.inf)
        for lane in range(LANES):
            job = start + min(lane, count - 1)
            u, p = job_unit[job], job_path[job]
            fill_lead(
                lane, month, offset, step, first[lane], maturity[u], u, p, flow, issuer_spread[job],
                holder_spread[job], discount, lead,
            )  # fmt: skip
            fill_lane(
                lane, month, offset, step, begin, steps[lane], maturity[u], u, p, flow, price, cost,
                issuer_spread[job], holder_spread[job], discount, ratio, holder_ratio, flows, prices, bars,
            )  # fmt: skip
        cost_out = np.empty(LANES)
        value_out = np.empty(LANES)
        solve_lanes(
            half_band, lo, hi, conv, row, band_start, weights, growth, straight_conv, first_weights, first_local,
            local_x, local_weights, begin, lead, steps, first, last, ratio, holder_ratio, flows, prices, bars, both,
            cost_out, value_out,
        )  # fmt: skip
        for lane in range(count):
            issuer_cost[start + lane] = cost_out[lane]
            holder_value[start + lane] = value_out[lane]
