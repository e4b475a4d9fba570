"""Forward pass of the exercise set: how likely each right is to be used, and what each payment weighs.

The issuer's boundary at every right comes from one backward pass; mass is then carried forward over the same grid and
what lies beyond the boundary is taken out. Two clocks of probability run side by side: the forward measure of each
date, whose weights times discounts give values, and the pricing measure of rolled-over cash, whose odds add up over
dates. Only their transition weights differ.
"""

from __future__ import annotations

import math

import numpy as np

from projector.arithmetic.elementary import exp_one
from projector.arithmetic.kernels import Floats, Integers, kernel
from projector.bonds.exercise.kink_kernels import crossing, kink_corrections, quintic

GHOSTS = 4  # nodes beyond the band


@kernel
def normal_below(z: float) -> float:
    """Standard normal probability below z. [-]"""
    return 0.5 * math.erfc(-z * 0.7071067811865476)


@kernel
def fill_ghosts(lo: int, hi: int, base: int, reach: int, low_flat: bool, high_flat: bool, v: Floats) -> None:
    """Values beyond the range: the same where the edge is called, else geometric."""
    a, b, y, z = v[lo - base], v[lo + 1 - base], v[hi - 1 - base], v[hi - base]
    up = 1.0 if low_flat or b <= 0.0 else a / b
    down = 1.0 if high_flat or y <= 0.0 else z / y
    for g in range(1, reach + 1):
        v[lo - g - base] = v[lo - g + 1 - base] * up
        v[hi + g - base] = v[hi + g - 1 - base] * down


@kernel
def exercise_line(
    half_band: int, lo: Integers, hi: Integers, conv: Floats, row: int, band_start: Integers, weights: Floats,
    growth: Floats, straight_conv: Floats, steps: int, first: int, last: int, ratio: Floats, flow: Floats, bar: Floats,
    node: Integers, share: Floats,
) -> None:  # fmt: skip
    """The issuer's recursion of one security, kept only for where it meets the bar.

    ratio  [step] P0(t_(k+1)) / P0(t_k); flow, bar [step] as in `pricing.Problem`
    node   [step] out: last called node, lo - 1 when none is; share [step] out: how far to the next node the line lies

    Source: Hull and White 1990 for the transition; optimal stopping by backward induction (cited from memory).
    """
    band, reach = 2 * half_band + 1, half_band + GHOSTS
    low, high = lo[last], hi[last]
    for k in range(first, last):
        low, high = min(low, lo[k]), max(high, hi[k])
    base = low - reach
    c, v = np.zeros(high + reach + 1 - base), np.zeros(high + reach + 1 - base)
    for k in range(last, first - 1, -1):
        a, b = lo[k], hi[k]
        if k == last:
            for i in range(a, b + 1):
                c[i - base] = 0.0
            forward = 1.0
            for j in range(k + 1, steps + 1):
                forward = forward * ratio[j - 1]
                amount = flow[j] * forward * straight_conv[k, j - k]
                if amount != 0.0:
                    for i in range(a, b + 1):
                        c[i - base] += amount * growth[j - k, i - row]
        else:
            factor = ratio[k] * conv[k]
            for i in range(a, b + 1):
                r = i - row
                s = band_start[r] - base
                total = 0.0
                for j in range(band):
                    total += weights[r, j] * v[s + j]
                c[i - base] = factor * (total + growth[1, r] * flow[k + 1])
        i = a - 1  # the continuation falls as rates rise: called up to the line
        while i < b and c[i + 1 - base] >= bar[k]:
            i += 1
        node[k], share[k] = i, 0.5
        for n in range(a, b + 1):
            v[n - base] = bar[k] if n <= i else c[n - base]
        fill_ghosts(a, b, base, reach, i >= a, i >= b, v)
        if i - 2 >= a and i + 3 <= b:
            n = i - base
            b0, b1, b2, b3, b4, b5 = quintic(c[n - 2], c[n - 1], c[n], c[n + 1], c[n + 2], c[n + 3])
            t = crossing(b0, b1, b2, b3, b4, b5, bar[k])
            share[k] = t
            d0, d1, d2, d3, d4, d5 = kink_corrections(t, b1, b2, b3, b4, b5, 0.0)
            v[n - 2] += d0
            v[n - 1] += d1
            v[n] += d2
            v[n + 1] += d3
            v[n + 2] += d4
            v[n + 3] += d5
        elif i >= a and i < b:
            n = i - base
            share[k] = (c[n] - bar[k]) / (c[n] - c[n + 1])


@kernel
def take_called(lo: int, hi: int, node: int, share: float, q: Floats) -> float:
    """Takes the mass up to the line out of the nodes lo..hi and returns it; what stays and what goes sum to q. [-]

    The density is smooth, so the cut between two nodes is corrected as a jump, like the kink of a value.
    """
    if node < lo:
        return 0.0
    before = 0.0
    for n in range(hi - lo + 1):
        before += q[n]
    i = node - lo
    inside = i - 2 >= 0 and i + 3 <= hi - lo
    d0, d1, d2, d3, d4, d5 = 0.0, 0.0, 0.0, 0.0, 0.0, 0.0
    if inside:
        b0, b1, b2, b3, b4, b5 = quintic(q[i - 2], q[i - 1], q[i], q[i + 1], q[i + 2], q[i + 3])
        t = share
        jump = b0 + t * (b1 + t * (b2 + t * (b3 + t * (b4 + t * b5))))
        d0, d1, d2, d3, d4, d5 = kink_corrections(t, b1, b2, b3, b4, b5, jump)
    for n in range(min(i, hi - lo) + 1):
        q[n] = 0.0
    if inside:
        q[i - 2] += d0
        q[i - 1] += d1
        q[i] += d2
        q[i + 1] += d3
        q[i + 2] += d4
        q[i + 3] += d5
    after = 0.0
    for n in range(hi - lo + 1):
        after += q[n]
    return before - after


@kernel
def after_first(
    line: float, mean_1: float, variance_1: float, mean_2: float, variance_2: float, decay: float, h: float, lo: int,
    hi: int, q: Floats,
) -> None:  # fmt: skip
    """Mass on the nodes of the second step of what was not called at the first: a normal times a normal probability.

    line               x at the first right below which the issuer calls, minus or plus infinity allowed
    mean_1, mean_2     of x at both dates under the measure of the second

    Source: own; the two states are jointly normal, so no grid is needed where the first date is a few days off.
    """
    covariance = decay * variance_1
    spread = math.sqrt(variance_1 - covariance * covariance / variance_2)
    scale = h / math.sqrt(2.0 * math.pi * variance_2)
    for n in range(hi - lo + 1):
        z = (lo + n) * h - mean_2
        seen = mean_1 + covariance / variance_2 * z
        q[n] = scale * exp_one(-0.5 * z * z / variance_2) * normal_below((seen - line) / spread)


@kernel
def carry(
    lo: Integers, hi: Integers, row: int, band: int, band_start: Integers, weights: Floats, factor: Floats, first: int,
    last: int, bar: Floats, node: Integers, share: Floats, q: Floats, called: Floats, alive: Floats,
) -> None:  # fmt: skip
    """Carries mass q from step first + 1 to the last right, calling at each right; leaves in q what was never called.

    called, alive  [step] out: called at the step; there before its decision. Mass beyond the range is kept at its edge.
    """
    fresh = np.zeros(q.shape[0])
    for k in range(first + 1, last + 1):
        a, b = lo[k], hi[k]
        total = 0.0
        for n in range(b - a + 1):
            total += q[n]
        alive[k] = total
        if bar[k] < np.inf:
            called[k] = take_called(a, b, node[k], share[k], q)
        if k == last:
            return
        c, d = lo[k + 1], hi[k + 1]
        for n in range(d - c + 1):
            fresh[n] = 0.0
        for i in range(a, b + 1):
            r = i - row
            mass = q[i - a] * factor[k]
            if mass == 0.0:
                continue
            s = band_start[r]
            for j in range(band):
                fresh[min(max(s + j, c), d) - c] += mass * weights[r, j]
        for n in range(d - c + 1):
            q[n] = fresh[n]


@kernel
def odds_of_units(
    half_band: int, lo: Integers, hi: Integers, conv: Floats, row: int, band_start: Integers, weights: Floats,
    growth: Floats, straight_conv: Floats, cash_start: Integers, cash_weights: Floats, h: float, decay: float,
    variance: Floats, mean: Floats, ahead: Floats, offset: int, step: int, units: Integers, maturity: Integers,
    flow: Floats, price: Floats, cost: float, spread: Floats, discount: Floats, odds: Floats, never: Floats,
    called: Floats, alive: Floats,
) -> None:  # fmt: skip
    """Odds of being called and weights of every payment, security by security, seen from month 0.

    cash_start, cash_weights  the transition of rolled-over cash, as band_start and weights
    variance, mean, ahead     [step] of x; its mean under the measure of that date; G of so many steps
    odds    [unit, month] out: chance of being called then (pricing measure); never [unit] out: of reaching maturity
    called  [unit, month] out: weight of a payment made at a call of that month
    alive   [unit, month] out: weight of a promised payment of that month
    """
    band = 2 * half_band + 1
    width = 1
    for k in range(1, lo.shape[0]):
        width = max(width, hi[k] - lo[k] + 1)
    ones = np.ones(conv.shape[0])
    for n in range(units.shape[0]):
        u = units[n]
        steps = (maturity[u] - offset) // step + 1
        ratio, paid, bar = np.ones(steps + 1), np.zeros(steps + 1), np.full(steps + 1, np.inf)
        first, last = 0, 0
        slide = exp_one(-spread[n] * step / 12.0)
        for k in range(1, steps + 1):
            t = offset + (k - 1) * step
            paid[k] = flow[u, t]
            if k < steps:
                ratio[k] = discount[t + step] / discount[t] * slide
                if price[u, t] < np.inf:
                    bar[k] = price[u, t] + cost
                    first = k if first == 0 else first
                    last = k
            alive[n, t] = 1.0
        never[n] = 1.0
        if first == 0:
            continue
        node, share = np.zeros(steps + 1, dtype=np.int64), np.zeros(steps + 1)
        exercise_line(
            half_band, lo, hi, conv, row, band_start, weights, growth, straight_conv, steps, first, last, ratio, paid,
            bar, node, share,
        )  # fmt: skip
        line = (node[first] + share[first]) * h
        if node[first] < lo[first]:
            line = -np.inf
        elif node[first] >= hi[first]:
            line = np.inf
        when = offset + (first - 1) * step
        y1, deviation = variance[first], math.sqrt(variance[first])
        odds[n, when] = normal_below(line / deviation)
        called[n, when] = normal_below((line - mean[first]) / deviation)
        if first == last:
            never[n] = 1.0 - odds[n, when]
            for k in range(first + 1, steps + 1):
                seen = mean[first] - ahead[k - first] * y1
                alive[n, offset + (k - 1) * step] = normal_below((seen - line) / deviation)
            continue
        k, q = first + 1, np.zeros(width)
        there, gone = np.zeros(steps + 1), np.zeros(steps + 1)
        after_first(line, 0.0, y1, 0.0, variance[k], decay, h, lo[k], hi[k], q)
        total = 0.0
        for i in range(hi[k] - lo[k] + 1):
            total += q[i]
        # The nodes are centred for the other measure, whose drift is downward: what they miss lies above them.
        q[hi[k] - lo[k]] += 1.0 - odds[n, when] - total
        carry(
            lo, hi, row, band, cash_start, cash_weights, ones, first, last, bar, node, share, q, gone, there
        )  # fmt: skip
        kept = 0.0
        for i in range(hi[last] - lo[last] + 1):
            kept += q[i]
        never[n] = kept
        for k in range(first + 1, last + 1):
            odds[n, offset + (k - 1) * step] = gone[k]
            gone[k] = 0.0
        k = first + 1
        after_first(line, mean[first] - ahead[1] * y1, y1, mean[k], variance[k], decay, h, lo[k], hi[k], q)
        carry(lo, hi, row, band, band_start, weights, conv, first, last, bar, node, share, q, gone, there)
        for k in range(first + 1, last + 1):
            called[n, offset + (k - 1) * step], alive[n, offset + (k - 1) * step] = gone[k], there[k]
        for k in range(last + 1, steps + 1):
            total = 0.0
            for i in range(hi[last] - lo[last] + 1):
                total += q[i] * growth[k - last, lo[last] + i - row]
            alive[n, offset + (k - 1) * step] = total * straight_conv[last, k - last]
