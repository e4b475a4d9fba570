"""Kinks and jumps between nodes: where they lie, and what the trapezoid sum needs at six nodes to see them.

Small formulas put in place inside the lane loops of `solver_kernels`.
"""

from __future__ import annotations

import numpy as np

from projector.arithmetic.kernels import Floats, inlined


def lagrange_monomials() -> Floats:
    """Coefficients [node, power] of the six Lagrange polynomials on -2, -1, 0, 1, 2, 3."""
    nodes = np.arange(-2.0, 4.0)
    rows = []
    for q in range(6):
        others = np.delete(nodes, q)
        rows.append(np.poly1d(others, r=True).coeffs[::-1] / np.prod(nodes[q] - others))
    return np.array(rows)


_A = lagrange_monomials()
(A00, A01, A02, A03, A04, A05) = (float(v) for v in _A[0])
(A10, A11, A12, A13, A14, A15) = (float(v) for v in _A[1])
(A20, A21, A22, A23, A24, A25) = (float(v) for v in _A[2])
(A30, A31, A32, A33, A34, A35) = (float(v) for v in _A[3])
(A40, A41, A42, A43, A44, A45) = (float(v) for v in _A[4])
(A50, A51, A52, A53, A54, A55) = (float(v) for v in _A[5])


@inlined
def quintic(
    g0: float, g1: float, g2: float, g3: float, g4: float, g5: float
) -> tuple[float, float, float, float, float, float]:  # fmt: skip
    """Monomial coefficients of the quintic through values at -2..3."""
    return (
        g2,
        g0 * A01 + g1 * A11 + g2 * A21 + g3 * A31 + g4 * A41 + g5 * A51,
        g0 * A02 + g1 * A12 + g2 * A22 + g3 * A32 + g4 * A42 + g5 * A52,
        g0 * A03 + g1 * A13 + g2 * A23 + g3 * A33 + g4 * A43 + g5 * A53,
        g0 * A04 + g1 * A14 + g2 * A24 + g3 * A34 + g4 * A44 + g5 * A54,
        g0 * A05 + g1 * A15 + g2 * A25 + g3 * A35 + g4 * A45 + g5 * A55,
    )


@inlined
def newton(t: float, c0: float, b1: float, b2: float, b3: float, b4: float, b5: float) -> float:
    """One Newton step towards the root of the quintic, kept between its nodes 0 and 1."""
    value = c0 + t * (b1 + t * (b2 + t * (b3 + t * (b4 + t * b5))))
    slope = b1 + t * (2.0 * b2 + t * (3.0 * b3 + t * (4.0 * b4 + t * 5.0 * b5)))
    slope = slope if slope < -1e-300 else -1e-300
    t = t - value / slope
    t = t if t > 0.0 else 0.0
    return t if t < 1.0 else 1.0


@inlined
def crossing(b0: float, b1: float, b2: float, b3: float, b4: float, b5: float, target: float) -> float:
    """Where the quintic meets the target between its nodes 0 and 1: secant start, two Newton steps, clamped."""
    c0 = b0 - target
    rise = b1 + b2 + b3 + b4 + b5
    rise = rise if rise < -1e-300 else -1e-300
    t = -c0 / rise
    t = t if t > 0.0 else 0.0
    t = t if t < 1.0 else 1.0
    t = newton(t, c0, b1, b2, b3, b4, b5)
    return newton(t, c0, b1, b2, b3, b4, b5)


@inlined
def node_shares(
    theta: float, m0: float, m1: float, m2: float, m3: float, m4: float, a0: float, a1: float, a2: float, a3: float,
    a4: float, a5: float,
) -> float:  # fmt: skip
    """Sum over r of M_r times the r-th derivative over r! of one Lagrange polynomial at theta."""
    t = theta
    l0 = a0 + t * (a1 + t * (a2 + t * (a3 + t * (a4 + t * a5))))
    l1 = a1 + t * (2.0 * a2 + t * (3.0 * a3 + t * (4.0 * a4 + t * 5.0 * a5)))
    l2 = a2 + t * (3.0 * a3 + t * (6.0 * a4 + t * 10.0 * a5))
    l3 = a3 + t * (4.0 * a4 + t * 10.0 * a5)
    l4 = a4 + t * 5.0 * a5
    return m0 * l0 + m1 * l1 + m2 * l2 + m3 * l3 + m4 * l4


@inlined
def kink_corrections(
    theta: float, b1: float, b2: float, b3: float, b4: float, b5: float, jump: float
) -> tuple[float, float, float, float, float, float]:  # fmt: skip
    """What to add at the six nodes so that the trapezoid sum sees the kink (and the jump) at theta.

    From the Euler-Maclaurin sums on both sides of theta: with u = 1 - theta, jumps J_p = (right - left) of the p-th
    derivative in node units and Bernoulli polynomials B, the moments are
    M_r = sum over p of B_(r+p+1)(u) J_p / (p! (r+p+1)), kept to B_6, spread on six nodes so that moments 0..4 are met.

    Source: Euler-Maclaurin formula with an interior singular point, as in Davis and Rabinowitz, Methods of Numerical
    Integration, 2nd ed. 1984, section 2.9 (cited from memory); Bernoulli polynomials: NIST DLMF 24.2.
    """
    t = theta
    j0 = jump
    j1 = b1 + t * (2.0 * b2 + t * (3.0 * b3 + t * (4.0 * b4 + t * 5.0 * b5)))
    j2 = 2.0 * b2 + t * (6.0 * b3 + t * (12.0 * b4 + t * 20.0 * b5))
    j3 = 6.0 * b3 + t * (24.0 * b4 + t * 60.0 * b5)
    j4 = 24.0 * b4 + t * 120.0 * b5
    u = 1.0 - t
    u2 = u * u
    v = u2 - u
    p1 = u - 0.5
    p2 = v + 1.0 / 6.0
    p3 = u * v - 0.5 * u2 + 0.5 * u
    p4 = v * v - 1.0 / 30.0
    p5 = v * p1 * (v - 1.0 / 3.0)
    p6 = u2 * u2 * u2 - 3.0 * u2 * u2 * u + 2.5 * u2 * u2 - 0.5 * u2 + 1.0 / 42.0
    m0 = p1 * j0 + p2 * j1 / 2.0 + p3 * j2 / 6.0 + p4 * j3 / 24.0 + p5 * j4 / 120.0
    m1 = p2 * j0 / 2.0 + p3 * j1 / 3.0 + p4 * j2 / 8.0 + p5 * j3 / 30.0 + p6 * j4 / 144.0
    m2 = p3 * j0 / 3.0 + p4 * j1 / 4.0 + p5 * j2 / 10.0 + p6 * j3 / 36.0
    m3 = p4 * j0 / 4.0 + p5 * j1 / 5.0 + p6 * j2 / 12.0
    m4 = p5 * j0 / 5.0 + p6 * j1 / 6.0
    return (
        node_shares(t, m0, m1, m2, m3, m4, A00, A01, A02, A03, A04, A05),
        node_shares(t, m0, m1, m2, m3, m4, A10, A11, A12, A13, A14, A15),
        node_shares(t, m0, m1, m2, m3, m4, A20, A21, A22, A23, A24, A25),
        node_shares(t, m0, m1, m2, m3, m4, A30, A31, A32, A33, A34, A35),
        node_shares(t, m0, m1, m2, m3, m4, A40, A41, A42, A43, A44, A45),
        node_shares(t, m0, m1, m2, m3, m4, A50, A51, A52, A53, A54, A55),
    )
