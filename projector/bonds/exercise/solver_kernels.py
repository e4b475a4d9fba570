"""The optimal-stopping recursion, sixteen solves side by side (C4). Plain twin: `plain`.

Lanes are independent: no sum runs across them, and a lane's numbers never depend on its neighbours. Arrays are
[.., lane] with the lane contiguous. Steps are dates of decision, counted from 1; step 0 is the date of the solve.
Payments fall on them, or the same time after each where rights take notice (`lag`).
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from projector.arithmetic.kernels import Flags, Floats, Integers, inlined, kernel
from projector.bonds.exercise.band_kernels import (
    step_back_9_by_1,
    step_back_9_by_16,
    step_back_13_by_1,
    step_back_13_by_16,
    step_back_21_by_1,
    step_back_21_by_16,
)
from projector.bonds.exercise.settle_kernels import (
    NEVER_PUT,
    Space,
    StepTerms,
    interpolate_local,
    settle,
    settle_calls,
)

LANES = 16
GHOSTS = 3
MARGIN = 4  # rows beyond the ghosts


class OperatorTables(NamedTuple):
    """The tables of `step_operator.Operator`, as the kernels take them."""

    half_band: int
    lag: bool  # payments fall after their step's date
    lo: Integers
    hi: Integers
    conv: Floats
    row: int
    band_start: Integers
    weights: Floats
    growth: Floats
    straight_conv: Floats
    first_weights: Floats
    first_local: Flags
    local_x: Floats
    local_weights: Floats


class LaneTerms(NamedTuple):
    """Up to sixteen securities per 100 of par, [k - begin, lane] by step of decision; unused tables have no rows.

    ratio           P0(t_(k+1)) / P0(t_k) on the issuer's curve; holder_ratio the same with the valuation spread
    paid_ratio      P0(payment k) / P0(t_k), and with the valuation spread (only with a lag)
    flow            promised payment of step k, redemption included
    price, bar      dirty price of a call decided at k, and with the issuer's cost; inf: no right is live
    put             dirty price of a put decided at k; -1e18: none
    share           share retired where a sinking payment is doubled, 0: none; its price, and with the cost
    """

    ratio: Floats
    holder_ratio: Floats
    paid_ratio: Floats
    paid_holder_ratio: Floats
    flow: Floats
    price: Floats
    bar: Floats
    put: Floats
    share: Floats
    double_price: Floats
    double_bar: Floats


class Rights(NamedTuple):
    """What a batch holds beside plain calls: steps from decision to effect of calls and of puts, and what to run.

    both     also the holder's recursion (else his value is the issuer's cost); always with puts
    notice   calls take effect after their decision
    """

    call_steps: int
    put_steps: int
    both: bool
    notice: bool
    puts: bool
    doubles: bool


@kernel
def payment_columns(
    lag: bool, row: int, straight_conv: Floats, growth: Floats, k: int, stop: int, final: float, begin: int, lane: int,
    lanes: int, flow: Floats, ratio: Floats, paid_ratio: Floats, lo: int, hi: int, base: int, column: Floats,
) -> None:  # fmt: skip
    """Value at step k, on every node of one lane, of the payments after it up to that of step `stop`, in closed form.

    final  paid on top of the last; at once where there is no lag and `stop` is k
    """
    n, at = np.uint64(lanes), np.uint64((lo - base) * lanes + lane)
    nodes, low = np.uint64(hi + 1 - lo), np.uint64(lo - row)
    now = final if stop == k and not lag else 0.0
    for i in range(nodes):
        column[at + i * n] = now
    forward = 1.0
    for j in range(k, stop + 1):
        if j > k:
            forward = forward * ratio[j - 1 - begin, lane]
        elif not lag:
            continue
        amount = flow[j - begin, lane]
        if j == stop:
            amount += final
        here = forward * paid_ratio[j - begin, lane] if lag else forward
        weight = amount * here * straight_conv[k, j - k]
        if weight != 0.0:
            ahead = np.uint64(j - k)
            for i in range(nodes):
                column[at + i * n] += weight * growth[ahead, low + i]


@kernel
def step_back_any(
    lo: int, hi: int, base: int, row: int, lanes: int, band: int, band_start: Integers, weights: Floats,
    carried: Floats, value: Floats, flow: Floats, factor: Floats, out: Floats,
) -> None:  # fmt: skip
    """One step of the recursion with any band: the same sum in the same order as the unrolled forms."""
    n = np.uint64(lanes)
    for i in range(lo, hi + 1):
        r = np.uint64(i - row)
        s = np.uint64(band_start[r] - base) * n
        o = np.uint64(i - base) * n
        for lane in range(n):
            total = weights[r, np.uint64(0)] * value[s + lane]
            for j in range(np.uint64(1), np.uint64(band)):
                total += weights[r, j] * value[s + lane + j * n]
            out[o + lane] = factor[lane] * (total + carried[r] * flow[lane])


@inlined
def step_back(
    lo: int, hi: int, base: int, row: int, lanes: int, band: int, band_start: Integers, weights: Floats,
    carried: Floats, value: Floats, flow: Floats, factor: Floats, out: Floats,
) -> None:  # fmt: skip
    """One step of the recursion by the form for its band width.

    carried [row] x flow [lane] is what a payment on the way adds before `factor`: e^(-G x) of its time ahead, for one
    at the step come from the sum of the row's weights.
    """
    if lanes == LANES and band == 9:
        step_back_9_by_16(lo, hi, base, row, band_start, weights, carried, value, flow, factor, out)
    elif lanes == LANES and band == 13:
        step_back_13_by_16(lo, hi, base, row, band_start, weights, carried, value, flow, factor, out)
    elif lanes == LANES and band == 21:
        step_back_21_by_16(lo, hi, base, row, band_start, weights, carried, value, flow, factor, out)
    elif lanes == 1 and band == 9:
        step_back_9_by_1(lo, hi, base, row, band_start, weights, carried, value, flow, factor, out)
    elif lanes == 1 and band == 13:
        step_back_13_by_1(lo, hi, base, row, band_start, weights, carried, value, flow, factor, out)
    elif lanes == 1 and band == 21:
        step_back_21_by_1(lo, hi, base, row, band_start, weights, carried, value, flow, factor, out)
    else:
        step_back_any(lo, hi, base, row, lanes, band, band_start, weights, carried, value, flow, factor, out)


@inlined
def weighted_sum(begin: int, lanes: int, weights: Floats, count: int, value: Floats, total: Floats) -> None:
    """Sum over nodes from row `begin` in their order, lane by lane."""
    n = np.uint64(lanes)
    for lane in range(n):
        total[lane] = 0.0
    for i in range(np.uint64(count)):
        at, weight = (np.uint64(begin) + i) * n, weights[i]
        for lane in range(n):
            total[lane] += weight * value[at + lane]


@kernel
def leads(steps: Integers, first: Integers, ratio: Floats, holder_ratio: Floats, flow: Floats, lead: Floats) -> None:
    """Fills `lead` of `solve_lanes` from tables that begin at step 0, payments on their steps."""
    for lane in range(steps.shape[0]):
        for row in range(0, 6, 3):
            discount, paid = 1.0, 0.0
            for k in range(1, steps[lane] + 1):
                discount *= ratio[k - 1, lane] if row == 0 else holder_ratio[k - 1, lane]
                paid += flow[k, lane] * discount
                if k == first[lane]:
                    lead[row, lane], lead[row + 1, lane] = discount, paid
            lead[row + 2, lane] = paid


@kernel
def space(size: int, lanes: int, rights: Rights) -> Space:
    """Room for `size` nodes."""
    n = size * lanes
    other, due, put = n * rights.both, n * rights.notice, n * rights.puts
    return Space(
        np.ones(n), np.ones(other), np.ones(n), np.ones(other), np.zeros(due), np.zeros(due), np.ones(put),
        np.ones(put), np.ones(put), np.ones(put), np.zeros(lanes, dtype=np.int64), np.zeros(lanes, dtype=np.int64),
        np.zeros(lanes, dtype=np.int64), np.zeros(lanes, dtype=np.bool_),
    )  # fmt: skip


@inlined
def call_terms(
    k: int, begin: int, first: Integers, last: Integers, call_bar: Floats, call_price: Floats, bar: Floats,
    price: Floats,
) -> None:  # fmt: skip
    """Bar and price of each lane's call at step k, inf where none is live."""
    for lane in range(first.shape[0]):
        live = first[lane] > 0 and k >= first[lane] and k <= last[lane]
        bar[lane] = call_bar[k - begin, lane] if live else np.inf
        price[lane] = call_price[k - begin, lane] if live else np.inf


@kernel
def step_terms(
    k: int, begin: int, first: Integers, last: Integers, terms: LaneTerms, rights: Rights, out: StepTerms
) -> None:  # fmt: skip
    """Fills in what each lane's rights are at step k. With notice the differences are settled against nothing."""
    out_bar, out_price, out_share, out_double_bar, out_double_price, out_call_scale = (
        out.bar,
        out.price,
        out.share,
        out.double_bar,
        out.double_price,
        out.call_scale,
    )
    call_price, call_bar, double_share, double_price, double_bar = (
        terms.price,
        terms.bar,
        terms.share,
        terms.double_price,
        terms.double_bar,
    )
    for lane in range(first.shape[0]):
        live = first[lane] > 0 and k >= first[lane] and k <= last[lane]
        bar = call_bar[k - begin, lane] if live else np.inf
        price = call_price[k - begin, lane] if live else np.inf
        if rights.notice:
            bar, price = (0.0 if bar < np.inf else np.inf), 0.0
        out_bar[lane], out_price[lane] = bar, price
        if rights.doubles:
            share = double_share[k - begin, lane] if live else 0.0
            out_share[lane] = share
            out_double_bar[lane] = double_bar[k - begin, lane] if live else np.inf
            out_double_price[lane] = double_price[k - begin, lane] if live else np.inf
            out_call_scale[lane] = 1.0 - share
            if share > 0.0 and bar < np.inf:  # the call of all, as a threshold of going on before the doubling
                out_bar[lane] = (bar - share * out_double_bar[lane]) / (1.0 - share)
                out_price[lane] = (price - share * out_double_price[lane]) / (1.0 - share)


@kernel
def right_columns(
    op: OperatorTables, k: int, begin: int, first: Integers, last: Integers, terms: LaneTerms, rights: Rights, lo: int,
    hi: int, base: int, s: Space,
) -> None:  # fmt: skip
    """What a call or a put decided at step k is worth at every node: payments until it takes effect, and its price."""
    e, eh, p, ph = s.e, s.eh, s.p, s.ph
    ratio, holder_ratio, paid_ratio, paid_holder_ratio, flow, call_price = (
        terms.ratio,
        terms.holder_ratio,
        terms.paid_ratio,
        terms.paid_holder_ratio,
        terms.flow,
        terms.price,
    )
    call_bar, put_price = terms.bar, terms.put
    lag, row, straight_conv, growth = op.lag, op.row, op.straight_conv, op.growth
    lanes = first.shape[0]
    for lane in range(lanes):
        live = first[lane] > 0 and k >= first[lane] and k <= last[lane]
        if rights.notice:
            bar = call_bar[k - begin, lane] if live else np.inf
            if bar < np.inf:
                stop = k + rights.call_steps
                payment_columns(
                    lag, row, straight_conv, growth, k, stop, bar, begin, lane,
                    lanes, flow, ratio, paid_ratio, lo, hi, base, e,
                )  # fmt: skip
                if rights.both:
                    payment_columns(
                        lag, row, straight_conv, growth, k, stop, call_price[k - begin, lane], begin,
                        lane, lanes, flow, holder_ratio, paid_holder_ratio, lo, hi, base, eh,
                    )  # fmt: skip
            else:
                for i in range(lo - base, hi + 1 - base):
                    e[i * lanes + lane] = 0.0
                    if rights.both:
                        eh[i * lanes + lane] = 0.0
        if rights.puts:
            price = put_price[k - begin, lane] if live else NEVER_PUT
            if price > NEVER_PUT:
                stop = k + rights.put_steps
                payment_columns(
                    lag, row, straight_conv, growth, k, stop, price, begin, lane,
                    lanes, flow, ratio, paid_ratio, lo, hi, base, p,
                )  # fmt: skip
                payment_columns(
                    lag, row, straight_conv, growth, k, stop, price, begin, lane,
                    lanes, flow, holder_ratio, paid_holder_ratio, lo, hi, base, ph,
                )  # fmt: skip
            else:
                for i in range(lo - base, hi + 1 - base):
                    p[i * lanes + lane] = NEVER_PUT
                    ph[i * lanes + lane] = NEVER_PUT


@kernel
def local_columns(op: OperatorTables, k: int, base: int, lanes: int, rights: Rights, s: Space, near: Space) -> None:
    """Everything a settlement asks for, on the local grid of the first sum."""
    near_c, near_h, near_e, near_eh, near_p, near_ph = near.c, near.h, near.e, near.eh, near.p, near.ph
    c, h, e, eh, p, ph = s.c, s.h, s.e, s.eh, s.p, s.ph
    op_lo, op_hi, local_x = op.lo, op.hi, op.local_x
    a, b, x = op_lo[k], op_hi[k], local_x[k]
    interpolate_local(a, b, base, lanes, x, c, near_c)
    if rights.both:
        interpolate_local(a, b, base, lanes, x, h, near_h)
    if rights.notice:
        interpolate_local(a, b, base, lanes, x, e, near_e)
        if rights.both:
            interpolate_local(a, b, base, lanes, x, eh, near_eh)
    if rights.puts:
        interpolate_local(a, b, base, lanes, x, p, near_p)
        interpolate_local(a, b, base, lanes, x, ph, near_ph)


@kernel
def solve_lanes(
    op: OperatorTables, begin: int, lead: Floats, steps: Integers, first: Integers, last: Integers, terms: LaneTerms,
    rights: Rights, issuer_cost: Floats, holder_value: Floats,
) -> None:  # fmt: skip
    """Issuer's cost and holder's value today of up to sixteen securities per 100 of par (C4).

    steps, first, last  [lane] last payment, first and last step with a right (first = 0: no right)
    begin               rows of the tables begin at step `begin`, before every lane's first right
    lead                [6, lane] by the issuer's spread and then by the holder's: discount to the first right, value of
                        the payments up to it, value of all payments (the plain bond, where no right is ever used)
    """
    ratio, holder_ratio, paid_ratio, paid_holder_ratio, flow = (
        terms.ratio,
        terms.holder_ratio,
        terms.paid_ratio,
        terms.paid_holder_ratio,
        terms.flow,
    )
    half_band, lag, op_lo, op_hi, conv, row = op.half_band, op.lag, op.lo, op.hi, op.conv, op.row
    band_start, weights, growth, straight_conv, first_weights, first_local = (
        op.band_start,
        op.weights,
        op.growth,
        op.straight_conv,
        op.first_weights,
        op.first_local,
    )
    local_weights = op.local_weights
    call_bar, call_price, local_x = terms.bar, terms.price, op.local_x
    lanes = steps.shape[0]
    both = rights.both
    reach = half_band + GHOSTS
    top = 0
    bottom = 1 << 30
    for lane in range(lanes):
        if first[lane] > 0:
            top = max(top, last[lane])
            bottom = min(bottom, first[lane])
    low_node, high_node = (op_lo[top], op_hi[top]) if top > 0 else (0, 0)
    for k in range(bottom, top):
        low_node, high_node = min(low_node, op_lo[k]), max(high_node, op_hi[k])
    base = low_node - reach - MARGIN
    points = local_weights.shape[0]
    s = space(high_node + reach + MARGIN - base + 1, lanes, rights)
    near = space(points, lanes, rights)
    c, h, v, w, kink, used = s.c, s.h, s.v, s.w, s.kink, s.used
    near_c, near_h, near_v, near_w, near_kink, near_used = near.c, near.h, near.v, near.w, near.kink, near.used
    plain = not (rights.notice or rights.puts or rights.doubles)  # most are: no record is looked at step by step
    none = np.zeros(lanes)
    t = StepTerms(
        np.empty(lanes), np.empty(lanes), np.zeros(lanes), np.empty(lanes), np.empty(lanes), np.ones(lanes),
        np.full(lanes, -1.0),
    )  # fmt: skip
    bars, prices, whole = t.bar, t.price, t.call_scale
    work = np.zeros(20 * 16)
    flat_low, flat_high = np.zeros(lanes), np.zeros(lanes)
    sums, sums_h = np.zeros(lanes), np.zeros(lanes)
    factor, factor_h, paid, paid_h = np.empty(lanes), np.empty(lanes), np.empty(lanes), np.empty(lanes)
    carried = growth[0 if lag else 1]
    for lane in range(lanes):
        issuer_cost[lane] = 0.0
        holder_value[lane] = 0.0
    for k in range(top, bottom - 1, -1):
        a, b = op_lo[k], op_hi[k]
        ends = False
        for lane in range(lanes):
            live = first[lane] > 0 and k >= first[lane] and k <= last[lane]
            factor[lane] = ratio[k - begin, lane] * conv[k] if live else 1.0
            factor_h[lane] = holder_ratio[k - begin, lane] * conv[k] if live else 1.0
            ends = ends or first[lane] == k
        if k < top:  # lanes not live run along on harmless numbers
            for lane in range(lanes):
                if lag:
                    amount = flow[k - begin, lane] * straight_conv[k, 0]
                    paid[lane] = amount * paid_ratio[k - begin, lane] / factor[lane]
                    paid_h[lane] = amount * paid_holder_ratio[k - begin, lane] / factor_h[lane]
                else:
                    paid[lane] = flow[k + 1 - begin, lane]
                    paid_h[lane] = paid[lane]
            step_back(a, b, base, row, lanes, 2 * half_band + 1, band_start, weights, carried, v, paid,
                      factor, c)  # fmt: skip
            if both:
                step_back(a, b, base, row, lanes, 2 * half_band + 1, band_start, weights, carried, w,
                          paid_h, factor_h, h)  # fmt: skip
        for lane in range(lanes):
            if first[lane] > 0 and k == last[lane]:
                payment_columns(
                    lag, row, straight_conv, growth, k, steps[lane], 0.0, begin, lane,
                    lanes, flow, ratio, paid_ratio, a, b, base, c,
                )  # fmt: skip
                if both:
                    payment_columns(
                        lag, row, straight_conv, growth, k, steps[lane], 0.0, begin, lane,
                        lanes, flow, holder_ratio, paid_holder_ratio, a, b, base, h,
                    )  # fmt: skip
        local = ends and first_local[k]
        if plain:
            call_terms(k, begin, first, last, call_bar, call_price, bars, prices)
            if local:
                interpolate_local(a, b, base, lanes, local_x[k], c, near_c)
                if both:
                    interpolate_local(a, b, base, lanes, local_x[k], h, near_h)
            settle_calls(a, b, base, lanes, reach, both, bars, prices, whole, c, h, v, w, kink, used, flat_low,
                         flat_high, work)  # fmt: skip
        else:
            step_terms(k, begin, first, last, terms, rights, t)
            if rights.notice or rights.puts:
                right_columns(op, k, begin, first, last, terms, rights, a, b, base, s)
            if local:
                local_columns(op, k, base, lanes, rights, s, near)
            settle(a, b, base, lanes, reach, both, rights.notice, rights.puts, rights.doubles, s, t, flat_low,
                   flat_high, none, work)  # fmt: skip
        if not ends:
            continue
        if local:
            near_used[:] = False
            if plain:
                settle_calls(0, points - 1, 0, lanes, 0, both, bars, prices, whole, near_c, near_h, near_v, near_w,
                             near_kink, near_used, flat_low, flat_high, work)  # fmt: skip
            else:
                settle(0, points - 1, 0, lanes, 0, both, rights.notice, rights.puts, rights.doubles, near, t, flat_low,
                       flat_high, none, work)  # fmt: skip
            weighted_sum(0, lanes, local_weights, points, near_v, sums)
            if both:
                weighted_sum(0, lanes, local_weights, points, near_w, sums_h)
        else:
            weighted_sum(a - base, lanes, first_weights[k], b - a + 1, v, sums)
            if both:
                weighted_sum(a - base, lanes, first_weights[k], b - a + 1, w, sums_h)
        for lane in range(lanes):
            if first[lane] == k:
                issuer_cost[lane] = sums[lane]
                holder_value[lane] = sums_h[lane]
                used[lane] = used[lane] or (local and near_used[lane])
    for lane in range(lanes):
        touched = used[lane]
        issuer_cost[lane] = lead[1, lane] + lead[0, lane] * issuer_cost[lane] if touched else lead[2, lane]
        if both:
            holder_value[lane] = lead[4, lane] + lead[3, lane] * holder_value[lane] if touched else lead[5, lane]
        else:
            holder_value[lane] = issuer_cost[lane]


@kernel
def solve_batch(
    half_band: int, lag: bool, lo: Integers, hi: Integers, conv: Floats, row: int, band_start: Integers,
    weights: Floats, growth: Floats, straight_conv: Floats, first_weights: Floats, first_local: Flags,
    local_x: Floats, local_weights: Floats, lead: Floats, steps: Integers, first: Integers, last: Integers,
    ratio: Floats, holder_ratio: Floats, paid_ratio: Floats, paid_holder_ratio: Floats, flow: Floats, price: Floats,
    bar: Floats, put: Floats, share: Floats, double_price: Floats, double_bar: Floats, call_steps: int, put_steps: int,
    both: bool, notice: bool, puts: bool, doubles: bool, issuer_cost: Floats, holder_value: Floats,
) -> None:  # fmt: skip
    """`solve_lanes` from step 0 on, for callers outside: records are taken apart, since looking at them costs more than
    a solve.
    """
    op = OperatorTables(
        half_band, lag, lo, hi, conv, row, band_start, weights, growth, straight_conv, first_weights, first_local,
        local_x, local_weights,
    )  # fmt: skip
    terms = LaneTerms(
        ratio, holder_ratio, paid_ratio, paid_holder_ratio, flow, price, bar, put, share, double_price, double_bar
    )
    rights = Rights(call_steps, put_steps, both, notice, puts, doubles)
    solve_lanes(op, 0, lead, steps, first, last, terms, rights, issuer_cost, holder_value)
