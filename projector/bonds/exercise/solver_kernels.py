"""The optimal-stopping recursion, sixteen solves side by side (C4). Plain twin: `plain`.

Lanes are independent: no sum runs across them, and a lane's numbers never depend on its neighbours. Arrays are
[.., lane] with the lane contiguous. Steps are counted from 1; step 0 is the date of the solve.
"""

from __future__ import annotations

import numpy as np

from projector.arithmetic.kernels import Flags, Floats, Integers, kernel
from projector.bonds.exercise.band_kernels import step_back_9, step_back_13, step_back_21
from projector.bonds.exercise.kink_kernels import crossing, kink_corrections, quintic

LANES = 16
GHOSTS = 3


@kernel
def straight_columns(
    k: int, begin: int, lane: int, lanes: int, steps: int, flow: Floats, ratio: Floats, straight_conv: Floats,
    growth: Floats, row: int, lo: int, hi: int, base: int, column: Floats,
) -> None:  # fmt: skip
    """Value at step k of the payments after it, on every node of one lane: closed form, no right is left."""
    for i in range(lo, hi + 1):
        column[(i - base) * lanes + lane] = 0.0
    forward = 1.0
    for j in range(k + 1, steps + 1):
        forward = forward * ratio[j - 1 - begin, lane]
        weight = flow[j - begin, lane] * forward * straight_conv[k, j - k]
        if weight != 0.0:
            for i in range(lo, hi + 1):
                column[(i - base) * lanes + lane] += weight * growth[i - row, j - k]


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
            out[o + lane] = factor[lane] * (total + growth[r, np.uint64(1)] * flow[lane])


@kernel
def step_back(
    lo: int, hi: int, base: int, row: int, lanes: int, band: int, band_start: Integers, weights: Floats,
    growth: Floats, value: Floats, flow: Floats, factor: Floats, out: Floats,
) -> None:  # fmt: skip
    """One step of the recursion by the form for its band width; flow [lane] is paid at the step come from."""
    if band == 9:
        step_back_9(lo, hi, base, row, lanes, band_start, weights, growth, value, flow, factor, out)
    elif band == 13:
        step_back_13(lo, hi, base, row, lanes, band_start, weights, growth, value, flow, factor, out)
    elif band == 21:
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
        for lane in range(n):
            x = c[i * n + lane]
            called = x >= bar[lane]
            v[i * n + lane] = bar[lane] if called else x
            flat_low[lane] += 1.0 if called else 0.0
    if both:
        for i in range(np.uint64(lo - base), np.uint64(hi + 1 - base)):
            for lane in range(n):
                w[i * n + lane] = price[lane] if c[i * n + lane] >= bar[lane] else h[i * n + lane]
    for lane in range(n):
        count = flat_low[lane]  # C decreases in x: exercised below the kink, kept above
        kink[lane] = lo - 1 + int(count)
        flat_low[lane] = 1.0 if count > 0.0 else 0.0
        flat_high[lane] = 1.0 if count > hi - lo else 0.0


@kernel
def gather_six(lane: int, at: int, lanes: int, source: Floats, first: int, work: Floats) -> None:
    """Six values around a kink into rows first .. first + 5 of the work space."""
    for q in range(6):
        work[(first + q) * 16 + lane] = source[(at - 2 + q) * lanes + lane]


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
            at = kink[lane] - base
            for q in range(6):
                value[(at - 2 + q) * lanes + lane] += work[(12 + q) * 16 + lane]


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
        at = (i if inside else lo + 2) - base
        gather_six(lane, at, lanes, c, 0, work)
        if both:
            gather_six(lane, at, lanes, h, 6, work)
    if not any_kink:
        return
    lane_corrections(lanes, 0, bar, False, work)
    scatter_six(lanes, base, kink, work, v)
    if both:
        lane_corrections(lanes, 6, price, True, work)
        scatter_six(lanes, base, kink, work, w)


@kernel
def interpolate_local(
    lane: int, lanes: int, lo: int, hi: int, base: int, local_x: Floats, source: Floats, which: int, local: Floats
) -> None:  # fmt: skip
    """Values on the local grid by quintic interpolation between nodes."""
    for n in range(local_x.shape[0]):
        x = local_x[n]
        i = min(max(int(np.floor(x)), lo + 2), hi - 3)
        t = x - i
        at = (i - base) * lanes + lane
        b0, b1, b2, b3, b4, b5 = quintic(
            source[at - 2 * lanes], source[at - lanes], source[at], source[at + lanes], source[at + 2 * lanes],
            source[at + 3 * lanes],
        )  # fmt: skip
        local[which, n] = b0 + t * (b1 + t * (b2 + t * (b3 + t * (b4 + t * b5))))


@kernel
def first_sum_local(local_weights: Floats, bar: float, price: float, local: Floats) -> tuple[float, float, bool]:
    """The first sum on its own finer grid [2, point]: min, kink correction, weights; issuer, holder, any call."""
    points = local_weights.shape[0]
    below = -1
    while below + 1 < points and local[0, below + 1] >= bar:
        below += 1
    issuer = 0.0
    holder = 0.0
    for n in range(points):
        issuer += local_weights[n] * (bar if n <= below else local[0, n])
        holder += local_weights[n] * (price if n <= below else local[1, n])
    if below >= 2 and below + 3 < points:
        k = below
        b0, b1, b2, b3, b4, b5 = quintic(
            local[0, k - 2], local[0, k - 1], local[0, k], local[0, k + 1], local[0, k + 2], local[0, k + 3]
        )
        t = crossing(b0, b1, b2, b3, b4, b5, bar)
        d = kink_corrections(t, b1, b2, b3, b4, b5, 0.0)
        h0, h1, h2, h3, h4, h5 = quintic(
            local[1, k - 2], local[1, k - 1], local[1, k], local[1, k + 1], local[1, k + 2], local[1, k + 3]
        )
        jump = h0 + t * (h1 + t * (h2 + t * (h3 + t * (h4 + t * h5)))) - price
        e = kink_corrections(t, h1, h2, h3, h4, h5, jump)
        for q in range(6):
            issuer += local_weights[k - 2 + q] * d[q]
            holder += local_weights[k - 2 + q] * e[q]
    return issuer, holder, below >= 0


@kernel
def finish(
    lane: int, begin: int, lead_discount: float, lead_paid: float, steps: Integers, first: Integers, ratio: Floats,
    flow: Floats, touched: bool, value: Floats,
) -> None:  # fmt: skip
    """Discounts the first sum to today and adds the payments up to it; the plain bond where no right was ever used."""
    discount = lead_discount
    total = lead_paid
    stop = first[lane] if touched else steps[lane]
    for k in range(begin + 1, stop + 1):
        discount = discount * ratio[k - 1 - begin, lane]
        total += flow[k - begin, lane] * discount
    value[lane] = total + discount * value[lane] if touched else total


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
    begin, lead         rows of the tables below start at step `begin`, before every lane's first right; lead [4, lane]:
                        the issuer's discount to it and value of payments up to it, then the holder's (1, 0, 1, 0 at 0)
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
    base = row - reach - 2
    width = band_start.shape[0] + 2 * reach + 4
    c = np.ones(width * lanes)
    v = np.ones(width * lanes)
    # the holder's arrays are not touched unless both recursions run
    h = np.ones(width * lanes if both else 0)
    w = np.ones(width * lanes if both else 0)
    work = np.zeros(20 * 16)
    local = np.zeros((2, local_weights.shape[0]))
    kink = np.zeros(lanes, dtype=np.int64)
    flat_low, flat_high = np.zeros(lanes), np.zeros(lanes)
    touched = np.zeros(lanes, dtype=np.bool_)
    bars, prices, factor, factor_h = np.empty(lanes), np.empty(lanes), np.empty(lanes), np.empty(lanes)
    for lane in range(lanes):
        issuer_cost[lane] = 0.0
        holder_value[lane] = 0.0
    for k in range(top, bottom - 1, -1):
        a, b = lo[k], hi[k]
        if k < top:
            for lane in range(lanes):
                live = first[lane] > 0 and k >= first[lane] and k < last[lane]
                factor[lane] = ratio[k - begin, lane] * conv[k] if live else 1.0
                factor_h[lane] = holder_ratio[k - begin, lane] * conv[k] if live else 1.0
            paid = flow[k + 1 - begin]
            step_back(a, b, base, row, lanes, band, band_start, weights, growth, v, paid, factor, c)
            if both:
                step_back(a, b, base, row, lanes, band, band_start, weights, growth, w, paid, factor_h, h)
        for lane in range(lanes):
            live = first[lane] > 0 and k >= first[lane] and k <= last[lane]
            bars[lane] = bar[k - begin, lane] if live else np.inf
            prices[lane] = price[k - begin, lane] if live else np.inf
            if not live:
                for i in range(a - base, b - base + 1):
                    c[i * lanes + lane] = 1.0
                    if both:
                        h[i * lanes + lane] = 1.0
            elif k == last[lane]:
                n = steps[lane]
                straight_columns(k, begin, lane, lanes, n, flow, ratio, straight_conv, growth, row, a, b, base, c)
                if both:
                    straight_columns(
                        k, begin, lane, lanes, n, flow, holder_ratio, straight_conv, growth, row, a, b, base, h
                    )
        exercise(a, b, base, lanes, bars, prices, both, c, h, v, w, kink, flat_low, flat_high)
        for lane in range(lanes):
            touched[lane] = touched[lane] or kink[lane] >= a
            if first[lane] == k and first_local[k]:
                interpolate_local(lane, lanes, a, b, base, local_x[k], c, 0, local)
                interpolate_local(lane, lanes, a, b, base, local_x[k], h if both else c, 1, local)
                issuer, holder, hit = first_sum_local(local_weights, bars[lane], prices[lane], local)
                issuer_cost[lane] = issuer
                holder_value[lane] = holder
                touched[lane] = touched[lane] or hit
        extend(a, b, base, lanes, reach, flat_low, flat_high, v, work)
        if both:
            extend(a, b, base, lanes, reach, flat_low, flat_high, w, work)
        correct(a, b, base, lanes, bars, prices, both, c, h, kink, v, w, work)
        for lane in range(lanes):
            if first[lane] == k and not first_local[k]:
                for i in range(b - a + 1):
                    issuer_cost[lane] += first_weights[k, i] * v[(a + i - base) * lanes + lane]
                    if both:
                        holder_value[lane] += first_weights[k, i] * w[(a + i - base) * lanes + lane]
    for lane in range(lanes):
        finish(lane, begin, lead[0, lane], lead[1, lane], steps, first, ratio, flow, touched[lane], issuer_cost)
        if both:
            finish(
                lane, begin, lead[2, lane], lead[3, lane], steps, first, holder_ratio, flow, touched[lane], holder_value
            )
        else:
            holder_value[lane] = issuer_cost[lane]
