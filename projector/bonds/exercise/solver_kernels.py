"""The optimal-stopping recursion, sixteen solves side by side (C4). Plain twin: `plain`.

Lanes are independent: no sum runs across them, and a lane's numbers never depend on its neighbours. Arrays are
[.., lane] with the lane contiguous. Steps are counted from 1; step 0 is the date of the solve.
"""

from __future__ import annotations

import numpy as np

from projector.arithmetic.kernels import Flags, Floats, Integers, inlined, kernel
from projector.bonds.exercise.band_kernels import step_back_9, step_back_13, step_back_21
from projector.bonds.exercise.kink_kernels import crossing, kink_corrections, quintic

LANES = 16
GHOSTS = 3
MARGIN = 4  # rows beyond the ghosts


@kernel
def straight_columns(
    k: int, begin: int, lane: int, lanes: int, steps: int, flow: Floats, ratio: Floats, straight_conv: Floats,
    growth: Floats, row: int, lo: int, hi: int, base: int, column: Floats,
) -> None:  # fmt: skip
    """Value at step k of the payments after it, on every node of one lane: closed form, no right is left."""
    n, at = np.uint64(lanes), np.uint64((lo - base) * lanes + lane)
    nodes, low = np.uint64(hi + 1 - lo), np.uint64(lo - row)
    for i in range(nodes):
        column[at + i * n] = 0.0
    forward = 1.0
    for j in range(k + 1, steps + 1):
        forward = forward * ratio[j - 1 - begin, lane]
        weight = flow[j - begin, lane] * forward * straight_conv[k, j - k]
        if weight != 0.0:
            ahead = np.uint64(j - k)
            for i in range(nodes):
                column[at + i * n] += weight * growth[ahead, low + i]


@kernel
def step_back_any(
    lo: int, hi: int, base: int, row: int, lanes: int, band: int, band_start: Integers, weights: Floats,
    growth: Floats, value: Floats, flow: Floats, factor: Floats, out: Floats,
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
            out[o + lane] = factor[lane] * (total + growth[np.uint64(1), r] * flow[lane])


@kernel
def step_back(
    lo: int, hi: int, base: int, row: int, lanes: int, band: int, band_start: Integers, weights: Floats,
    growth: Floats, value: Floats, flow: Floats, factor: Floats, out: Floats,
) -> None:  # fmt: skip
    """One step of the recursion by the form for its band width; flow [lane] is paid at the step come from."""
    if lanes == LANES and band == 9:
        step_back_9(lo, hi, base, row, lanes, band_start, weights, growth, value, flow, factor, out)
    elif lanes == LANES and band == 13:
        step_back_13(lo, hi, base, row, lanes, band_start, weights, growth, value, flow, factor, out)
    elif lanes == LANES and band == 21:
        step_back_21(lo, hi, base, row, lanes, band_start, weights, growth, value, flow, factor, out)
    else:
        step_back_any(lo, hi, base, row, lanes, band, band_start, weights, growth, value, flow, factor, out)


@kernel
def extend(
    lo: int, hi: int, base: int, lanes: int, reach: int, flat_low: Floats, flat_high: Floats, value: Floats,
    work: Floats,
) -> None:  # fmt: skip
    """Ghost nodes beyond the range: flat where the edge node is exercised (exact there), else geometric.

    work  [4 x 16] the two edge values and the two ratios of every lane
    """
    n = np.uint64(lanes)
    low, high = np.uint64(lo - base) * n, np.uint64(hi - base) * n
    for lane in range(n):
        a, b = value[low + lane], value[low + n + lane]
        y, z = value[high - n + lane], value[high + lane]
        up = a / (b if b > 0.0 else a)
        down = z / (y if y > 0.0 else z)
        work[lane] = up + flat_low[lane] * (1.0 - up)
        work[np.uint64(16) + lane] = down + flat_high[lane] * (1.0 - down)
    for g in range(np.uint64(1), np.uint64(reach + 1)):
        for lane in range(n):
            value[low - g * n + lane] = value[low - g * n + n + lane] * work[lane]
    for g in range(np.uint64(1), np.uint64(reach + 1)):
        for lane in range(n):
            value[high + g * n + lane] = value[high + g * n - n + lane] * work[np.uint64(16) + lane]


@kernel
def exercise(
    lo: int, hi: int, base: int, lanes: int, bar: Floats, price: Floats, both: bool, c: Floats, h: Floats, v: Floats,
    w: Floats, kink: Integers, flat_low: Floats, flat_high: Floats,
) -> None:  # fmt: skip
    """V = min(C, bar) and the holder's value on the issuer's exercise set, every node and lane; finds the kinks.

    kink[lane] is the last exercised node, or lo - 1 when none is. Ties call. flat_* are 1 where the edge is exercised.
    """
    n = np.uint64(lanes)
    for lane in range(n):
        flat_low[lane] = 0.0
    for i in range(np.uint64(lo - base), np.uint64(hi + 1 - base)):
        at = i * n
        for lane in range(n):
            x = c[at + lane]
            called = x >= bar[lane]
            v[at + lane] = bar[lane] if called else x
            flat_low[lane] += 1.0 if called else 0.0
        if both:
            for lane in range(n):
                paid, kept = price[lane], h[at + lane]  # both are read, so that lanes run side by side
                w[at + lane] = paid if c[at + lane] >= bar[lane] else kept
    for lane in range(n):
        count = flat_low[lane]  # C decreases in x: exercised below the kink, kept above
        kink[lane] = lo - 1 + int(count)
        flat_low[lane] = 1.0 if count > 0.0 else 0.0
        flat_high[lane] = 1.0 if count > hi - lo else 0.0


@inlined
def gather_six(lane: int, start: int, lanes: int, source: Floats, first: int, work: Floats) -> None:
    """Six values around a kink, from place `start` of the source, into rows first .. first + 5 of the work space."""
    n, o = np.uint64(start), np.uint64(first * 16 + lane)
    for _ in range(6):
        work[o] = source[n]
        n += np.uint64(lanes)
        o += np.uint64(16)


@kernel
def lane_corrections(lanes: int, first: int, target: Floats, holder: bool, work: Floats) -> None:
    """Corrections of every lane from its six gathered values, straight-line so that lanes run side by side.

    The issuer's kink sets theta (row 19); the holder's values jump there by C_h - price.
    """
    f = np.uint64(first * 16)
    if not holder:
        for lane in range(np.uint64(lanes)):
            b0, b1, b2, b3, b4, b5 = quintic(
                work[f + lane], work[f + np.uint64(16) + lane], work[f + np.uint64(32) + lane],
                work[f + np.uint64(48) + lane], work[f + np.uint64(64) + lane], work[f + np.uint64(80) + lane],
            )  # fmt: skip
            work[np.uint64(304) + lane] = crossing(b0, b1, b2, b3, b4, b5, target[lane])
    jumps = 1.0 if holder else 0.0
    for lane in range(np.uint64(lanes)):
        b0, b1, b2, b3, b4, b5 = quintic(
            work[f + lane], work[f + np.uint64(16) + lane], work[f + np.uint64(32) + lane],
            work[f + np.uint64(48) + lane], work[f + np.uint64(64) + lane], work[f + np.uint64(80) + lane],
        )  # fmt: skip
        t = work[np.uint64(304) + lane]
        jump = jumps * (b0 + t * (b1 + t * (b2 + t * (b3 + t * (b4 + t * b5)))) - target[lane])
        d0, d1, d2, d3, d4, d5 = kink_corrections(t, b1, b2, b3, b4, b5, jump)
        work[np.uint64(192) + lane] = d0
        work[np.uint64(208) + lane] = d1
        work[np.uint64(224) + lane] = d2
        work[np.uint64(240) + lane] = d3
        work[np.uint64(256) + lane] = d4
        work[np.uint64(272) + lane] = d5


@kernel
def scatter_six(lanes: int, base: int, kink: Integers, work: Floats, value: Floats) -> None:
    """Adds the corrections at the six nodes of every lane whose kink is inside the range (row 18)."""
    for lane in range(lanes):
        if work[18 * 16 + lane] > 0.0:
            n, o = np.uint64((kink[lane] - 2 - base) * lanes + lane), np.uint64(192 + lane)
            for _ in range(6):
                value[n] += work[o]
                n += np.uint64(lanes)
                o += np.uint64(16)


@kernel
def correct(
    lo: int, hi: int, base: int, lanes: int, bar: Floats, price: Floats, both: bool, c: Floats, h: Floats,
    kink: Integers, v: Floats, w: Floats, work: Floats,
) -> None:  # fmt: skip
    """Kink corrections on every lane whose kink has its six nodes in the range."""
    any_kink = False
    for lane in range(lanes):
        i = kink[lane]
        inside = i - 2 >= lo and i + 3 <= hi
        any_kink = any_kink or inside
        work[18 * 16 + lane] = 1.0 if inside else 0.0
        start = ((i if inside else lo + 2) - 2 - base) * lanes + lane
        gather_six(lane, start, lanes, c, 0, work)
        if both:
            gather_six(lane, start, lanes, h, 6, work)
    if not any_kink:
        return
    lane_corrections(lanes, 0, bar, False, work)
    scatter_six(lanes, base, kink, work, v)
    if both:
        lane_corrections(lanes, 6, price, True, work)
        scatter_six(lanes, base, kink, work, w)


@kernel
def interpolate_local(lo: int, hi: int, base: int, lanes: int, local_x: Floats, source: Floats, local: Floats) -> None:
    """Values [point, lane] on the local grid by quintic interpolation between nodes."""
    n = np.uint64(lanes)
    for q in range(local_x.shape[0]):
        i = min(max(int(np.floor(local_x[q])), lo + 2), hi - 3)
        t = local_x[q] - i
        at, out = np.uint64(i - 2 - base) * n, np.uint64(q) * n
        for lane in range(n):
            s = at + lane
            b0, b1, b2, b3, b4, b5 = quintic(
                source[s], source[s + n], source[s + np.uint64(2) * n], source[s + np.uint64(3) * n],
                source[s + np.uint64(4) * n], source[s + np.uint64(5) * n],
            )  # fmt: skip
            local[out + lane] = b0 + t * (b1 + t * (b2 + t * (b3 + t * (b4 + t * b5))))


@kernel
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
    """Fills `lead` of `solve_lanes` from tables that begin at step 0."""
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
def solve_lanes(
    half_band: int, lo: Integers, hi: Integers, conv: Floats, row: int, band_start: Integers, weights: Floats,
    growth: Floats, straight_conv: Floats, first_weights: Floats, first_local: Flags, local_x: Floats,
    local_weights: Floats, begin: int, lead: Floats, steps: Integers, first: Integers, last: Integers, ratio: Floats,
    holder_ratio: Floats, flow: Floats, price: Floats, bar: Floats, both: bool, issuer_cost: Floats,
    holder_value: Floats,
) -> None:  # fmt: skip
    """Issuer's cost and holder's value today of up to sixteen securities per 100 of par (C4).

    steps, first, last  [lane] last payment, first and last step with a right (first = 0: no right)
    begin               rows of the tables below start at step `begin`, before every lane's first right
    lead                [6, lane] by the issuer's spread and then by the holder's: discount to the first right, value of
                        the payments up to it, value of all payments (the plain bond, where no right is ever used)
    ratio               [k - begin, lane] P0(t_(k+1)) / P0(t_k) on the issuer's curve
    holder_ratio        the same on the curve with the valuation spread
    flow                [k - begin, lane] promised payment at step k, redemption included
    price, bar          [k - begin, lane] dirty price paid at a call, and with the issuer's cost; inf: no right is live
    both                also run the holder's recursion (else holder_value is the issuer's cost)
    """
    lanes = steps.shape[0]
    band = 2 * half_band + 1
    reach = half_band + GHOSTS
    top = 0
    bottom = 1 << 30
    for lane in range(lanes):
        if first[lane] > 0:
            top = max(top, last[lane])
            bottom = min(bottom, first[lane])
    low_node, high_node = (lo[top], hi[top]) if top > 0 else (0, 0)
    for k in range(bottom, top):
        low_node, high_node = min(low_node, lo[k]), max(high_node, hi[k])
    base = low_node - reach - MARGIN
    width = (high_node + reach + MARGIN - base + 1) * lanes
    points = local_weights.shape[0]
    other = 1 if both else 0  # the holder's arrays are not touched unless both recursions run
    c, v, h, w = np.ones(width), np.ones(width), np.ones(width * other), np.ones(width * other)
    near, near_v = np.empty(points * lanes), np.empty(points * lanes)
    near_h, near_w = np.empty(points * lanes * other), np.empty(points * lanes * other)
    work = np.zeros(20 * 16)
    kink, near_kink = np.zeros(lanes, dtype=np.int64), np.zeros(lanes, dtype=np.int64)
    flat_low, flat_high = np.zeros(lanes), np.zeros(lanes)
    sums, sums_h = np.zeros(lanes), np.zeros(lanes)
    touched = np.zeros(lanes, dtype=np.bool_)
    bars, prices, factor, factor_h = np.empty(lanes), np.empty(lanes), np.empty(lanes), np.empty(lanes)
    for lane in range(lanes):
        issuer_cost[lane] = 0.0
        holder_value[lane] = 0.0
    for k in range(top, bottom - 1, -1):
        a, b = lo[k], hi[k]
        ends = False
        for lane in range(lanes):
            live = first[lane] > 0 and k >= first[lane] and k <= last[lane]
            bars[lane] = bar[k - begin, lane] if live else np.inf
            prices[lane] = price[k - begin, lane] if live else np.inf
            factor[lane] = ratio[k - begin, lane] * conv[k] if live else 1.0
            factor_h[lane] = holder_ratio[k - begin, lane] * conv[k] if live else 1.0
            ends = ends or first[lane] == k
        if k < top:  # lanes not live run along on harmless numbers
            paid = flow[k + 1 - begin]
            step_back(a, b, base, row, lanes, band, band_start, weights, growth, v, paid, factor, c)
            if both:
                step_back(a, b, base, row, lanes, band, band_start, weights, growth, w, paid, factor_h, h)
        for lane in range(lanes):
            if first[lane] > 0 and k == last[lane]:
                n = steps[lane]
                straight_columns(k, begin, lane, lanes, n, flow, ratio, straight_conv, growth, row, a, b, base, c)
                if both:
                    straight_columns(
                        k, begin, lane, lanes, n, flow, holder_ratio, straight_conv, growth, row, a, b, base, h
                    )
        exercise(a, b, base, lanes, bars, prices, both, c, h, v, w, kink, flat_low, flat_high)
        for lane in range(lanes):
            touched[lane] = touched[lane] or kink[lane] >= a
        extend(a, b, base, lanes, reach, flat_low, flat_high, v, work)
        if both:
            extend(a, b, base, lanes, reach, flat_low, flat_high, w, work)
        correct(a, b, base, lanes, bars, prices, both, c, h, kink, v, w, work)
        if not ends:
            continue
        if first_local[k]:
            interpolate_local(a, b, base, lanes, local_x[k], c, near)
            if both:
                interpolate_local(a, b, base, lanes, local_x[k], h, near_h)
            end = points - 1
            exercise(0, end, 0, lanes, bars, prices, both, near, near_h, near_v, near_w, near_kink, flat_low, flat_high)
            correct(0, end, 0, lanes, bars, prices, both, near, near_h, near_kink, near_v, near_w, work)
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
                touched[lane] = touched[lane] or (first_local[k] and near_kink[lane] >= 0)
    for lane in range(lanes):
        used = touched[lane]
        issuer_cost[lane] = lead[1, lane] + lead[0, lane] * issuer_cost[lane] if used else lead[2, lane]
        if both:
            holder_value[lane] = lead[4, lane] + lead[3, lane] * holder_value[lane] if used else lead[5, lane]
        else:
            holder_value[lane] = issuer_cost[lane]
