"""From a month's curve to batches of solves: deterministic bounds, lanes packed across securities, straight values.

Tables are [unit, month] per 100 of par on mapped months: `flow` promised payments, `price` dirty call prices (inf where
there is no right). Discounts are one month's P(tau) [tau, path]; spreads are continuously compounded [1/year].
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from projector.arithmetic.elementary import exp_one
from projector.arithmetic.kernels import Flags, Floats, Integers, kernel
from projector.bonds.exercise.settle_kernels import NEVER_PUT
from projector.bonds.exercise.solver_kernels import LANES, LaneTerms, OperatorTables, Rights, solve_lanes


class UnitTables(NamedTuple):
    """Securities on mapped months, [unit, month] per 100 of the par outstanding at month 0.

    price, put     dirty prices paid in a month; inf and -1e18 where no call or put takes effect in it
    outstanding    share of that par left after the month's scheduled payment
    double_share   share of the par left that may be retired at par beside the month's sinking payment
    """

    maturity: Integers
    flow: Floats
    price: Floats
    put: Floats
    outstanding: Floats
    double_share: Floats


class Dates(NamedTuple):
    """One month's solves of securities whose decisions fall on the same months. [month]

    offset    from this month to the first decision; then every `step`
    call_lag  from the decision to call to its payment; put_lag the same of puts
    """

    month: int
    offset: int
    step: int
    call_lag: int
    put_lag: int


@kernel
def upper_bounds(
    at: Dates, units: Integers, tables: UnitTables, cost: float, spread: Floats, discount: Floats, alive: Flags,
    out: Floats,
) -> None:  # fmt: skip
    """Cost of the best policy fixed in advance, an upper bound of the issuer's continuation. [per 100], [unit, path]

    The least over calls that can still be decided later, of the payments up to it and the bar, and over running to
    maturity; inf where the holder may put, since his answer to the policy is not known. -inf where it is gone.
    """
    paths = discount.shape[1]
    flow, price, put_price = tables.flow, tables.price, tables.put
    outstanding, ends = tables.outstanding, tables.maturity
    pace = at.step if at.call_lag % at.step == 0 else 1
    for n in range(units.shape[0]):
        u = units[n]
        decay = exp_one(-spread[n] * pace / 12.0)
        maturity = ends[u]
        puttable = False
        for t in range(at.month + 1, maturity):
            puttable = puttable or put_price[u, t] > NEVER_PUT
        for p in range(paths):
            if not alive[n, p]:
                out[n, p] = -np.inf
                continue
            if puttable:
                out[n, p] = np.inf
                continue
            paid = 0.0
            best = np.inf
            factor = 1.0
            for t in range(at.month + pace, maturity + 1, pace):
                factor = factor * decay
                d = discount[t - at.month, p] * factor
                paid += flow[u, t] * d
                if t < maturity and price[u, t] < np.inf and t - at.call_lag > at.month:
                    stop = paid + (price[u, t] + cost * outstanding[u, t]) * d
                    if stop < best:
                        best = stop
            out[n, p] = paid if paid < best else best


@kernel
def announced_values(
    month: int, units: Integers, effect: Integers, amount: Floats, flow: Floats, spread: Floats, discount: Floats,
    path: Integers, out: Floats,
) -> None:  # fmt: skip
    """Value of what is settled: payments after `month` up to month `effect` and `amount` on it. [per 100], (job,)"""
    for n in range(units.shape[0]):
        total = 0.0
        for t in range(month + 1, effect[n] + 1):
            due = flow[units[n], t] + (amount[n] if t == effect[n] else 0.0)
            if due != 0.0:
                total += due * discount[t - month, path[n]] * exp_one(-spread[n] * (t - month) / 12.0)
        if effect[n] == month:
            total = amount[n]
        out[n] = total


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
def first_and_last(at: Dates, unit: int, tables: UnitTables) -> tuple[int, int]:
    """First and last step at which a right can be decided, 0 and 0 where there is none."""
    ends, call_price, put_price, double_share = tables.maturity, tables.price, tables.put, tables.double_share
    first = 0
    last = 0
    k = 1
    maturity = ends[unit]
    for d in range(at.month + at.offset, maturity, at.step):
        live = d + at.call_lag < maturity and call_price[unit, d + at.call_lag] < np.inf
        live = live or (d + at.put_lag < maturity and put_price[unit, d + at.put_lag] > NEVER_PUT)
        if live or double_share[unit, d] > 0.0:
            first = k if first == 0 else first
            last = k
        k += 1
    return first, last


@kernel
def fill_lead(
    lane: int, at: Dates, lag: int, first: int, unit: int, path: int, tables: UnitTables, issuer_spread: float,
    holder_spread: float, discount: Floats, lead: Floats,
) -> None:  # fmt: skip
    """Discount to the first right, value of the payments up to it, and of all of them, for both spreads.

    lag    months from each step's date to its payment
    first  step of the first right, 0: none, and only the last of the three is meant
    """
    ends, flow = tables.maturity, tables.flow
    ahead = at.offset + lag - (at.step if at.offset + lag > at.step else 0)  # months to the first payment
    issuer, decay = exp_one(-issuer_spread * ahead / 12.0), exp_one(-issuer_spread * at.step / 12.0)
    holder, held = exp_one(-holder_spread * ahead / 12.0), exp_one(-holder_spread * at.step / 12.0)
    stop = at.month + at.offset + (first - 1) * at.step
    paid, kept = 0.0, 0.0
    if first > 0 and lag > 0:
        here = discount[stop - at.month, path]
        lead[0, lane] = here * exp_one(-issuer_spread * (stop - at.month) / 12.0)
        lead[3, lane] = here * exp_one(-holder_spread * (stop - at.month) / 12.0)
        lead[1, lane], lead[4, lane] = 0.0, 0.0
    for t in range(at.month + ahead, ends[unit] + 1, at.step):
        amount = flow[unit, t]
        if amount != 0.0:
            value = amount * discount[t - at.month, path]
            paid += value * issuer
            kept += value * holder
        if t == stop:
            here = discount[t - at.month, path]
            lead[0, lane], lead[3, lane] = here * issuer, here * holder
        if t <= stop:
            lead[1, lane], lead[4, lane] = paid, kept
        issuer = issuer * decay
        holder = holder * held
    lead[2, lane], lead[5, lane] = paid, kept


@kernel
def fill_lane(
    lane: int, at: Dates, lag: int, begin: int, steps: int, unit: int, path: int, tables: UnitTables, cost: float,
    issuer_spread: float, holder_spread: float, discount: Floats, terms: LaneTerms,
) -> None:  # fmt: skip
    """Lays one job out in its lane from step `begin` on; a lane's bits do not depend on its neighbours' rights."""
    ratio, holder_ratio, paid_ratio, paid_holder_ratio, flow_out = (
        terms.ratio,
        terms.holder_ratio,
        terms.paid_ratio,
        terms.paid_holder_ratio,
        terms.flow,
    )
    price_out, bar_out, put_out, share_out, double_price_out = (
        terms.price,
        terms.bar,
        terms.put,
        terms.share,
        terms.double_price,
    )
    double_bar_out = terms.double_bar
    ends, flow, call_price, put_price, outstanding = (
        tables.maturity,
        tables.flow,
        tables.price,
        tables.put,
        tables.outstanding,
    )
    double_share = tables.double_share
    decay, held = exp_one(-issuer_spread * at.step / 12.0), exp_one(-holder_spread * at.step / 12.0)
    late, held_late = exp_one(-issuer_spread * lag / 12.0), exp_one(-holder_spread * lag / 12.0)
    before = discount[at.offset + (begin - 1) * at.step, path] if begin > 0 else 1.0
    maturity = ends[unit]
    for k in range(begin + 1, steps + 1):
        d = at.month + at.offset + (k - 1) * at.step
        here = discount[d - at.month, path]
        n = k - begin
        ratio[n - 1, lane] = here / before * decay
        holder_ratio[n - 1, lane] = here / before * held
        before = here
        flow_out[n, lane] = flow[unit, d + lag]
        if lag > 0:
            paid_ratio[n, lane] = discount[d + lag - at.month, path] / here * late
            paid_holder_ratio[n, lane] = discount[d + lag - at.month, path] / here * held_late
        effect = d + at.call_lag
        if effect < maturity and call_price[unit, effect] < np.inf:
            price_out[n, lane] = call_price[unit, effect]
            bar_out[n, lane] = call_price[unit, effect] + cost * outstanding[unit, effect]
        effect = d + at.put_lag
        if put_out.shape[0] > 0 and effect < maturity:
            put_out[n, lane] = put_price[unit, effect]
        if share_out.shape[0] > 0 and d < maturity and double_share[unit, d] > 0.0:
            share_out[n, lane] = double_share[unit, d]
            double_price_out[n, lane] = 100.0 * outstanding[unit, d]
            double_bar_out[n, lane] = (100.0 + cost) * outstanding[unit, d]


@kernel
def lane_terms(rows: int, lag: int, rights: Rights) -> LaneTerms:
    """Tables of sixteen lanes with no right in them."""
    late, put, share = rows if lag > 0 else 0, rows if rights.puts else 0, rows if rights.doubles else 0
    return LaneTerms(
        np.ones((rows, LANES)), np.ones((rows, LANES)), np.ones((late, LANES)), np.ones((late, LANES)),
        np.zeros((rows, LANES)), np.full((rows, LANES), np.inf), np.full((rows, LANES), np.inf),
        np.full((put, LANES), NEVER_PUT), np.zeros((share, LANES)), np.full((share, LANES), np.inf),
        np.full((share, LANES), np.inf),
    )  # fmt: skip


@kernel
def run_jobs(
    op: OperatorTables, at: Dates, job_unit: Integers, job_path: Integers, tables: UnitTables, cost: float,
    issuer_spread: Floats, holder_spread: Floats, discount: Floats, rights: Rights, issuer_cost: Floats,
    holder_value: Floats,
) -> None:  # fmt: skip
    """Solves every job (unit, path) on that path's own curve of the month, sixteen at a time across units.

    issuer_spread, holder_spread  [job]
    """
    jobs = job_unit.shape[0]
    ends = tables.maturity
    lag = at.call_lag % at.step if rights.notice else (at.put_lag % at.step if rights.puts else 0)
    for start in range(0, jobs, LANES):
        count = min(LANES, jobs - start)
        steps = np.empty(LANES, dtype=np.int64)
        first = np.zeros(LANES, dtype=np.int64)
        last = np.zeros(LANES, dtype=np.int64)
        top = 0
        begin = 1 << 30
        for lane in range(LANES):
            u = job_unit[start + min(lane, count - 1)]  # a short batch is filled with copies of its last job
            steps[lane] = (ends[u] - lag - at.month - at.offset) // at.step + 1
            first[lane], last[lane] = first_and_last(at, u, tables)
            top = max(top, steps[lane])
            begin = min(begin, max(first[lane] if first[lane] > 0 else steps[lane], 1) - 1)
        terms = lane_terms(top - begin + 1, lag, rights)
        lead = np.empty((6, LANES))
        for lane in range(LANES):
            job = start + min(lane, count - 1)
            u, p = job_unit[job], job_path[job]
            fill_lead(lane, at, lag, first[lane], u, p, tables, issuer_spread[job], holder_spread[job], discount, lead)
            fill_lane(
                lane, at, lag, begin, steps[lane], u, p, tables, cost, issuer_spread[job], holder_spread[job],
                discount, terms,
            )  # fmt: skip
        cost_out = np.empty(LANES)
        value_out = np.empty(LANES)
        solve_lanes(op, begin, lead, steps, first, last, terms, rights, cost_out, value_out)
        for lane in range(count):
            issuer_cost[start + lane] = cost_out[lane]
            holder_value[start + lane] = value_out[lane]
