"""What happens at one date with rights: who uses which right at which node, and the corrections where that changes.

The issuer calls where going on costs at least the bar; a sinking fund's option to double retires a share where it costs
at least par; the holder, seeing his own value, puts where that is at most the put price. Where notice is due, the price
of a right depends on the node: then the differences to it are settled against nothing and the price is added back.
Arrays are [node x lane], flat, with the lane contiguous; the same code settles a step's nodes and a local grid.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from projector.arithmetic.kernels import Flags, Floats, Integers, inlined, kernel
from projector.bonds.exercise.kink_kernels import crossing, kink_corrections, quintic

NEVER_PUT = -1e18  # a put price no value falls to


class Space(NamedTuple):
    """Values on the nodes of one grid, [node x lane]; arrays of rights that no lane has are empty.

    c, h          going on: issuer's cost, holder's value
    v, w          after the decisions: the same two
    e, eh         what a call announced now is worth to each (only where notice is due)
    p, ph         what a put announced now is worth to each (only where a lane has puts)
    py, pyh       going on less that
    kink          [lane] last node called, lo - 1 where none is
    double_kink   [lane] last node where the sinking payment is doubled
    put_kink      [lane] last node not put, hi where none is put
    used          [lane] whether any right has been used at any node so far
    """

    c: Floats
    h: Floats
    v: Floats
    w: Floats
    e: Floats
    eh: Floats
    p: Floats
    ph: Floats
    py: Floats
    pyh: Floats
    kink: Integers
    double_kink: Integers
    put_kink: Integers
    used: Flags


class StepTerms(NamedTuple):
    """[lane] at one step: bar and price of a call (inf: none), share, bar and price of doubling (share 0: none)."""

    bar: Floats
    price: Floats
    share: Floats
    double_bar: Floats
    double_price: Floats
    call_scale: Floats  # 1 less the share
    put_scale: Floats  # -1: a put's kink turns the other way


@inlined
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


@kernel
def double(lo: int, hi: int, base: int, lanes: int, both: bool, s: Space, t: StepTerms) -> None:
    """Where no call takes all: a share is retired at the nodes where going on costs at least the doubling's bar."""
    bar, price, shares, double_bar, double_price = t.bar, t.price, t.share, t.double_bar, t.double_price
    c, h, v, w, kink, double_kink = s.c, s.h, s.v, s.w, s.kink, s.double_kink
    for lane in range(lanes):
        share, count = shares[lane], 0
        if share > 0.0:
            for i in range(lo - base, hi + 1 - base):
                at = i * lanes + lane
                if c[at] < double_bar[lane]:
                    break
                count += 1
                if i + base > kink[lane]:
                    v[at] = share * double_bar[lane] + (1.0 - share) * c[at]
                    if both:
                        w[at] = share * double_price[lane] + (1.0 - share) * h[at]
            for i in range(lo - base, min(kink[lane], hi) + 1 - base):  # called: the full price, not the bar of C
                v[i * lanes + lane] = share * double_bar[lane] + (1.0 - share) * bar[lane]
                if both:
                    w[i * lanes + lane] = share * double_price[lane] + (1.0 - share) * price[lane]
        double_kink[lane] = lo - 1 + count


@kernel
def put(
    lo: int, hi: int, base: int, lanes: int, s: Space, flat_low: Floats, flat_high: Floats
) -> None:  # fmt: skip
    """Where no call takes all, the holder puts at the nodes where going on is worth at most the price; ties put."""
    v, w, p, ph, pyh, kink = s.v, s.w, s.p, s.ph, s.pyh, s.kink
    put_kink = s.put_kink
    for lane in range(lanes):
        kept = 0
        for i in range(lo - base, hi + 1 - base):
            at = i * lanes + lane
            if pyh[at] > 0.0:
                kept += 1
            elif i + base > kink[lane]:
                v[at] = p[at]
                w[at] = ph[at]
        put_kink[lane] = lo - 1 + kept
        if kept < hi + 1 - lo:
            flat_high[lane] = 1.0
            if kept == 0 and kink[lane] < lo:
                flat_low[lane] = 1.0


@inlined
def gather_six(lane: int, start: int, lanes: int, source: Floats, first: int, work: Floats) -> None:
    """Six values around a kink, from place `start` of the source, into rows first .. first + 5 of the work space."""
    n, o = np.uint64(start), np.uint64(first * 16 + lane)
    for _ in range(6):
        work[o] = source[n]
        n += np.uint64(lanes)
        o += np.uint64(16)


@kernel
def lane_corrections(lanes: int, first: int, target: Floats, second: bool, work: Floats) -> None:
    """Corrections of every lane from its six gathered values, straight-line so that lanes run side by side.

    The values that decide (in rows 0-5) set theta (row 19), where they meet the target; there the other values, of
    those who suffer the decision (`second`), jump by their distance from their own target.
    """
    f = np.uint64(first * 16)
    if not second:
        for lane in range(np.uint64(lanes)):
            b0, b1, b2, b3, b4, b5 = quintic(
                work[f + lane], work[f + np.uint64(16) + lane], work[f + np.uint64(32) + lane],
                work[f + np.uint64(48) + lane], work[f + np.uint64(64) + lane], work[f + np.uint64(80) + lane],
            )  # fmt: skip
            work[np.uint64(304) + lane] = crossing(b0, b1, b2, b3, b4, b5, target[lane])
    jumps = 1.0 if second else 0.0
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
def scatter_six(lanes: int, base: int, kink: Integers, scale: Floats, work: Floats, value: Floats) -> None:
    """Adds the corrections at the six nodes of every lane whose kink is inside the range (row 18)."""
    for lane in range(lanes):
        if work[18 * 16 + lane] > 0.0:
            n, o = np.uint64((kink[lane] - 2 - base) * lanes + lane), np.uint64(192 + lane)
            for _ in range(6):
                value[n] += scale[lane] * work[o]
                n += np.uint64(lanes)
                o += np.uint64(16)


@inlined
def correct(
    lo: int, hi: int, base: int, lanes: int, bar: Floats, price: Floats, scale: Floats, both: bool, c: Floats,
    h: Floats, kink: Integers, v: Floats, w: Floats, work: Floats,
) -> None:  # fmt: skip
    """Kink corrections on every lane whose kink has its six nodes in the range.

    c decides at `bar` and its values after are v; h and w follow, from `price`
    scale  [lane] share of the par that changes hands at the kink, negative where the high side is exercised
    """
    any_kink = False
    for lane in range(lanes):
        i = kink[lane]
        inside = i - 2 >= lo and i + 3 <= hi and scale[lane] != 0.0
        any_kink = any_kink or inside
        work[18 * 16 + lane] = 1.0 if inside else 0.0
        start = ((i if inside else lo + 2) - 2 - base) * lanes + lane
        gather_six(lane, start, lanes, c, 0, work)
        if both:
            gather_six(lane, start, lanes, h, 6, work)
    if not any_kink:
        return
    lane_corrections(lanes, 0, bar, False, work)
    scatter_six(lanes, base, kink, scale, work, v)
    if both:
        lane_corrections(lanes, 6, price, True, work)
        scatter_six(lanes, base, kink, scale, work, w)


@inlined
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
def add_columns(lo: int, hi: int, base: int, lanes: int, sign: float, source: Floats, target: Floats) -> None:
    """target += sign x source on every node and lane."""
    for n in range(np.uint64((lo - base) * lanes), np.uint64((hi + 1 - base) * lanes)):
        target[n] += sign * source[n]


@inlined
def settle_calls(
    lo: int, hi: int, base: int, lanes: int, reach: int, both: bool, bar: Floats, price: Floats, scale: Floats,
    c: Floats, h: Floats, v: Floats, w: Floats, kink: Integers, used: Flags, flat_low: Floats, flat_high: Floats,
    work: Floats,
) -> None:  # fmt: skip
    """`settle` where there are calls without notice and nothing else."""
    exercise(lo, hi, base, lanes, bar, price, both, c, h, v, w, kink, flat_low, flat_high)
    for lane in range(lanes):
        used[lane] = used[lane] or kink[lane] >= lo
    if reach > 0:
        extend(lo, hi, base, lanes, reach, flat_low, flat_high, v, work)
        if both:
            extend(lo, hi, base, lanes, reach, flat_low, flat_high, w, work)
    correct(lo, hi, base, lanes, bar, price, scale, both, c, h, kink, v, w, work)


@kernel
def settle(
    lo: int, hi: int, base: int, lanes: int, reach: int, both: bool, notice: bool, puts: bool, doubles: bool, s: Space,
    t: StepTerms, flat_low: Floats, flat_high: Floats, zero: Floats, work: Floats,
) -> None:  # fmt: skip
    """All decisions of one step on one grid: v and w from c and h, with ghost nodes (reach > 0) and corrections.

    With notice c and h are left as their differences to what a call is worth; `bar` is then 0, or inf.
    """
    bar, price, share, double_bar, double_price = t.bar, t.price, t.share, t.double_bar, t.double_price
    call_scale, put_scale = t.call_scale, t.put_scale
    c, h, v, w, e, eh = s.c, s.h, s.v, s.w, s.e, s.eh
    p, ph, py, pyh, kink, double_kink = s.p, s.ph, s.py, s.pyh, s.kink, s.double_kink
    put_kink, used = s.put_kink, s.used
    if puts:
        for n in range(np.uint64((lo - base) * lanes), np.uint64((hi + 1 - base) * lanes)):
            py[n] = c[n] - p[n]
            pyh[n] = h[n] - ph[n]
    if notice:
        add_columns(lo, hi, base, lanes, -1.0, e, c)
        if both:
            add_columns(lo, hi, base, lanes, -1.0, eh, h)
    exercise(lo, hi, base, lanes, bar, price, both, c, h, v, w, kink, flat_low, flat_high)
    if doubles:
        double(lo, hi, base, lanes, both, s, t)
    if notice:
        add_columns(lo, hi, base, lanes, 1.0, e, v)
        if both:
            add_columns(lo, hi, base, lanes, 1.0, eh, w)
    if puts:
        put(lo, hi, base, lanes, s, flat_low, flat_high)
    if reach > 0:
        if notice:  # what is exercised there still depends on the node
            flat_low[:] = 0.0
            flat_high[:] = 0.0
        extend(lo, hi, base, lanes, reach, flat_low, flat_high, v, work)
        if both:
            extend(lo, hi, base, lanes, reach, flat_low, flat_high, w, work)
    for lane in range(lanes):
        doubled = doubles and double_kink[lane] >= lo
        used[lane] = used[lane] or kink[lane] >= lo or doubled or (puts and put_kink[lane] < hi)
    correct(lo, hi, base, lanes, bar, price, call_scale, both, c, h, kink, v, w, work)
    if doubles:
        correct(lo, hi, base, lanes, double_bar, double_price, share, both, c, h, double_kink, v, w, work)
    if puts:
        for lane in range(lanes):  # a put that begins where calls end has no kink of its own
            if put_kink[lane] <= kink[lane]:
                put_kink[lane] = lo - 1
        correct(lo, hi, base, lanes, zero, zero, put_scale, True, pyh, py, put_kink, w, v, work)


@kernel
def interpolate_local(lo: int, hi: int, base: int, lanes: int, local_x: Floats, source: Floats, local: Floats) -> None:
    """Values [point, lane] on the local grid by quintic interpolation between nodes."""
    n = np.uint64(lanes)
    for q in range(local_x.shape[0]):
        i = min(max(int(np.floor(local_x[q])), lo + 2), hi - 3)
        t = local_x[q] - i
        at, out = np.uint64(i - 2 - base) * n, np.uint64(q) * n
        for lane in range(n):
            k = at + lane
            b0, b1, b2, b3, b4, b5 = quintic(
                source[k], source[k + n], source[k + np.uint64(2) * n], source[k + np.uint64(3) * n],
                source[k + np.uint64(4) * n], source[k + np.uint64(5) * n],
            )  # fmt: skip
            local[out + lane] = b0 + t * (b1 + t * (b2 + t * (b3 + t * (b4 + t * b5))))
