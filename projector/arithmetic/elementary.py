"""Own exp and log: the same bits on every processor, which vendor vector libraries do not promise (C15).

Plain multiplications and additions in a fixed order, no fused instructions. Largest relative errors measured
against 50-digit arithmetic: exp 2.3e-16 on [-700, 700], log 2.3e-16 on [1e-300, 1e300] (see the tests).

Source: argument reduction and series as in Muller, Elementary Functions: Algorithms and Implementation, chapters
on range reduction and polynomial approximation (cited from memory).
"""

from __future__ import annotations

import math

import numpy as np

from projector.arithmetic.kernels import Floats, kernel

LOG2_E = 1.4426950408889634
LN2_HIGH = 6.93147180369123816490e-01  # its last 32 bits are zero, so n * LN2_HIGH is exact
LN2_LOW = 1.90821492927058770002e-10
SQRT_HALF = 0.7071067811865476


@kernel
def exp_one(x: float) -> float:
    """e^x [-]; 0 below -700 and inf above 700, beyond any discount or growth factor used here."""
    if x != x:
        return x
    if x > 700.0:
        return np.inf
    if x < -700.0:
        return 0.0
    n = np.rint(x * LOG2_E)
    r = (x - n * LN2_HIGH) - n * LN2_LOW
    p = 1.0 / 87178291200.0
    p = p * r + 1.0 / 6227020800.0
    p = p * r + 1.0 / 479001600.0
    p = p * r + 1.0 / 39916800.0
    p = p * r + 1.0 / 3628800.0
    p = p * r + 1.0 / 362880.0
    p = p * r + 1.0 / 40320.0
    p = p * r + 1.0 / 5040.0
    p = p * r + 1.0 / 720.0
    p = p * r + 1.0 / 120.0
    p = p * r + 1.0 / 24.0
    p = p * r + 1.0 / 6.0
    p = p * r + 0.5
    p = p * r * r + r
    return math.ldexp(1.0 + p, int(n))


@kernel
def log_one(x: float) -> float:
    """ln x [-] for x > 0; -inf at 0, nan below."""
    if x != x or x < 0.0:
        return np.nan
    if x == 0.0:
        return -np.inf
    if x == np.inf:
        return np.inf
    k = 0
    m = x
    while m > 1.4142135623730951:
        m *= 0.5
        k += 1
    while m < SQRT_HALF:
        m *= 2.0
        k -= 1
    f = m - 1.0
    s = f / (2.0 + f)
    z = s * s
    # ln(1+f) = f - f^2/2 + s (f^2/2 + R), R = series of 2 atanh(s) beyond the first term
    r = 2.0 / 21.0
    r = r * z + 2.0 / 19.0
    r = r * z + 2.0 / 17.0
    r = r * z + 2.0 / 15.0
    r = r * z + 2.0 / 13.0
    r = r * z + 2.0 / 11.0
    r = r * z + 2.0 / 9.0
    r = r * z + 2.0 / 7.0
    r = r * z + 2.0 / 5.0
    r = r * z + 2.0 / 3.0
    r = r * z
    half_square = 0.5 * f * f
    return k * LN2_HIGH - ((half_square - (s * (half_square + r) + k * LN2_LOW)) - f)


@kernel
def exp_into(x: Floats, out: Floats) -> None:
    """e^x for every element of a flat array, into `out`."""
    for i in range(x.shape[0]):
        out[i] = exp_one(x[i])


def exp_array(x: Floats) -> Floats:
    """e^x [-] for an array of any shape, with the bits of `exp_one`."""
    flat = np.ascontiguousarray(x, dtype=np.float64).ravel()
    out = np.empty_like(flat)
    exp_into(flat, out)
    return out.reshape(np.shape(x))
