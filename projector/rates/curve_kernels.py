"""Hot loops of the curve: interpolation, half-year bootstrap, discounts month by month (C5)."""

from __future__ import annotations

import numpy as np

from projector.arithmetic.elementary import exp_one, log_one
from projector.arithmetic.kernels import Floats, Integers, kernel


@kernel
def monotone_slopes(x: Floats, y: Floats, slope: Floats) -> None:
    """Fritsch-Carlson slopes with harmonic means at interior knots and one-sided three-point ends.

    Source: Fritsch and Butland, A method for constructing local monotone piecewise cubic interpolants, SIAM J. Sci.
    Stat. Comput. 5(2), 1984 (cited from memory).
    """
    n = x.shape[0]
    if n == 1:
        slope[0] = 0.0
        return
    if n == 2:
        slope[0] = slope[1] = (y[1] - y[0]) / (x[1] - x[0])
        return
    for i in range(1, n - 1):
        h0 = x[i] - x[i - 1]
        h1 = x[i + 1] - x[i]
        d0 = (y[i] - y[i - 1]) / h0
        d1 = (y[i + 1] - y[i]) / h1
        if d0 * d1 <= 0.0:
            slope[i] = 0.0
        else:
            w0 = 2.0 * h1 + h0
            w1 = h1 + 2.0 * h0
            slope[i] = (w0 + w1) / (w0 / d0 + w1 / d1)
    for end in range(2):
        a, b, c = (0, 1, 2) if end == 0 else (n - 1, n - 2, n - 3)
        h0 = x[b] - x[a]
        h1 = x[c] - x[b]
        d0 = (y[b] - y[a]) / h0
        d1 = (y[c] - y[b]) / h1
        s = ((2.0 * h0 + h1) * d0 - h0 * d1) / (h0 + h1)
        if s * d0 <= 0.0:
            s = 0.0
        elif d0 * d1 <= 0.0 and abs(s) > 3.0 * abs(d0):
            s = 3.0 * d0
        slope[a] = s


@kernel
def half_year_yields(x: Floats, y: Floats, slope: Floats, linear: bool, out: Floats) -> None:
    """Yields at 0.5, 1.0, ... years from the knots (x in years); flat outside the knots."""
    n = x.shape[0]
    i = 0
    for k in range(out.shape[0]):
        t = 0.5 * (k + 1)
        if t <= x[0]:
            out[k] = y[0]
            continue
        if t >= x[n - 1]:
            out[k] = y[n - 1]
            continue
        while x[i + 1] < t:
            i += 1
        h = x[i + 1] - x[i]
        u = (t - x[i]) / h
        if linear:
            out[k] = y[i] + u * (y[i + 1] - y[i])
        else:
            w = 1.0 - u
            out[k] = (
                y[i] * (1.0 + 2.0 * u) * w * w
                + y[i + 1] * u * u * (3.0 - 2.0 * u)
                + h * slope[i] * u * w * w
                - h * slope[i + 1] * u * u * w
            )


@kernel
def log_discounts(
    yields: Floats, short_from: Integers, knot_years: Floats, knot_from: Integers, par_basis: bool, linear: bool,
    quoted_half_years: int, out: Floats,
) -> None:  # fmt: skip
    """ln P at the curve nodes 1, 3, 6, 12, 18, ..., 360 months for every month and path.

    yields             [month, tenor, path] quoted yields [1/year]
    short_from         which tenor serves the nodes at 1 and 3 months (index into tenors), simple yields
    knot_years         [knot] maturities of the knots [year], knot_from [knot] their tenor index
    par_basis          par yields, bond-equivalent; otherwise bond-equivalent zero yields
    quoted_half_years  half-years up to the longest quoted tenor; flat forward beyond
    out                [month, node, path]

    A path on which a par yield cannot be discounted (a discount would not be positive) is given nan.
    """
    months, _, paths = yields.shape
    knots = knot_years.shape[0]
    y = np.empty(knots)
    slope = np.empty(knots)
    half = np.empty(60)
    for m in range(months):
        for p in range(paths):
            for j in range(knots):
                y[j] = yields[m, knot_from[j], p]
            if not linear:
                monotone_slopes(knot_years, y, slope)
            half_year_yields(knot_years, y, slope, linear, half)
            out[m, 0, p] = -log_one(1.0 + yields[m, short_from[0], p] / 12.0)
            out[m, 1, p] = -log_one(1.0 + yields[m, short_from[1], p] / 4.0)
            annuity = 0.0
            for k in range(quoted_half_years):
                if par_basis:
                    c = 0.5 * half[k]
                    discount = (1.0 - c * annuity) / (1.0 + c)
                    annuity += discount
                    out[m, 2 + k, p] = log_one(discount) if discount > 0.0 else np.nan
                else:
                    out[m, 2 + k, p] = -(k + 1.0) * log_one(1.0 + 0.5 * half[k])
            last = 1 + quoted_half_years
            previous = out[m, last - 1, p] if quoted_half_years > 1 else 0.0
            forward = out[m, last, p] - previous
            for k in range(quoted_half_years, 60):
                out[m, 2 + k, p] = out[m, 1 + k, p] + forward


@kernel
def discounts_by_month(log_discount: Floats, node_months: Integers, out: Floats) -> None:
    """P(tau) for tau = 0..last month from one month's node values: an exponential per node and per node ratio,
    multiplications between, restarted at each node; flat forward beyond the last node.

    log_discount  [node, path]; out [tau, path]
    """
    nodes, paths = log_discount.shape
    last = out.shape[0] - 1
    for p in range(paths):
        out[0, p] = 1.0
        start = 0
        log_start = 0.0
        step = 1.0
        for n in range(nodes):
            end = node_months[n]
            if start >= last:
                break
            log_end = log_discount[n, p]
            step = exp_one((log_end - log_start) / (end - start))
            value = exp_one(log_start)
            stop = min(end, last + 1)
            for tau in range(start + 1, stop):
                value = value * step
                out[tau, p] = value
            if end <= last:
                out[end, p] = exp_one(log_end)
            start = end
            log_start = log_end
        if start < last:
            value = out[start, p]
            for tau in range(start + 1, last + 1):
                value = value * step
                out[tau, p] = value
