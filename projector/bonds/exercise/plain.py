"""The plain twin of the solver: one security on one curve, written as the method reads, with NumPy and no kernel.

It builds its own weights and its own polynomials, so that a fault in the shared tables or in the unrolled formulas of
`solver_kernels` shows as a disagreement. A thousand times slower; used by tests only.

Source: Hull and White 1990 for the model (see `model`); trapezoidal rule with Gaussian weights, Trefethen and Weideman
2014; jump terms of the Euler-Maclaurin formula, Davis and Rabinowitz 1984, section 2.9 (all cited from memory).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from numpy.polynomial import Polynomial

from projector.bonds.exercise.model import ShortRateModel
from projector.bonds.exercise.step_operator import LOCAL_POINTS, LOCAL_WIDTH, RESOLVED, Grid

Array = npt.NDArray[np.float64]

NODES = np.arange(-2.0, 4.0)  # the six nodes around a kink, node i at 0
GHOST_ROOM = 3
BERNOULLI = {
    1: Polynomial([-1 / 2, 1]),
    2: Polynomial([1 / 6, -1, 1]),
    3: Polynomial([0, 1 / 2, -3 / 2, 1]),
    4: Polynomial([-1 / 30, 0, 1, -2, 1]),
    5: Polynomial([0, -1 / 6, 0, 5 / 3, -5 / 2, 1]),
    6: Polynomial([1 / 42, 0, -1 / 2, 0, 5 / 2, -3, 1]),
}


def lagrange(q: int) -> Polynomial:
    """The quintic that is one at node q and zero at the other five."""
    others = np.delete(NODES, q)
    return Polynomial.fromroots(others) / float(np.prod(NODES[q] - others))


BASIS = [lagrange(q) for q in range(6)]


def through(values: Array) -> Polynomial:
    """The quintic through six values at -2..3."""
    total = Polynomial([0.0])
    for q in range(6):
        total = total + float(values[q]) * BASIS[q]
    return total


def corrections(curve: Polynomial, theta: float, jump: float) -> Array:
    """What to add at the six nodes for a kink, and a jump, at theta. shape (6,)

    curve  continuation around the kink in node units; the value is a constant to the left of theta
    """
    jumps = [jump] + [float(curve.deriv(p)(theta)) for p in range(1, 5)]
    u = 1.0 - theta
    out = np.zeros(6)
    for r in range(5):
        moment = sum(
            float(BERNOULLI[r + p + 1](u)) * jumps[p] / (math.factorial(p) * (r + p + 1))
            for p in range(5)
            if r + p + 1 <= 6
        )
        for q in range(6):
            out[q] += moment * float((BASIS[q].deriv(r) if r else BASIS[q])(theta)) / math.factorial(r)
    return out


def kink_place(curve: Polynomial, bar: float) -> float:
    """Where the continuation meets the bar between nodes 0 and 1, by bisection."""
    low, high = 0.0, 1.0
    for _ in range(200):
        middle = 0.5 * (low + high)
        if curve(middle) > bar:
            low = middle
        else:
            high = middle
    return 0.5 * (low + high)


@dataclass(frozen=True)
class Column:
    """Values on nodes lo..hi."""

    lo: int
    values: Array

    @property
    def hi(self) -> int:
        return self.lo + self.values.size - 1

    def at(self, node: int, flat_low: bool, flat_high: bool) -> float:
        """Value at a node, beyond the range flat where the edge is exercised and geometric elsewhere."""
        v = self.values
        if node < self.lo:
            return float(v[0] if flat_low else v[0] * (v[0] / v[1]) ** (self.lo - node))
        if node > self.hi:
            return float(v[-1] if flat_high else v[-1] * (v[-1] / v[-2]) ** (node - self.hi))
        return float(v[node - self.lo])


@dataclass(frozen=True)
class Solver:
    """One model, one grid, one set of dates t_1, t_2, ... in years."""

    model: ShortRateModel
    step: float
    grid: Grid
    times: Array  # times[0] = 0

    @property
    def h(self) -> float:
        return self.grid.kappa * math.sqrt(self.model.variance(self.step))

    def nodes(self, k: int) -> npt.NDArray[np.int64]:
        """Nodes of step k: centred at the mean, so many standard deviations wide, at least four either side."""
        t = float(self.times[k])
        centre = round(self.model.mean(t) / self.h)
        half = max(4, math.ceil(self.grid.range_width * math.sqrt(self.model.variance(t)) / self.h))
        return np.arange(centre - half, centre + half + 1)

    def expectation(self, node: int, value: Column, flow: float, flat: tuple[bool, bool]) -> float:
        """e^(-G x) times the mean of next step's value and payment, seen from a node of this step."""
        h, b = self.h, self.grid.half_band
        mean = math.exp(-self.model.a * self.step) * node * h + self.model.mean(self.step)
        first = round(mean / h) - b
        columns = np.arange(first, first + 2 * b + 1)
        weight = np.exp(-0.5 * ((columns * h - mean) / math.sqrt(self.model.variance(self.step))) ** 2)
        weight = weight / weight.sum()
        total = sum(w * (value.at(int(j), *flat) + flow) for w, j in zip(weight, columns))
        return float(math.exp(-self.model.g(self.step) * node * h) * total)

    def straight(self, k: int, ratio: Array, flow: Array, steps: int) -> Array:
        """Value at the nodes of step k of all payments after it, in closed form."""
        x = self.nodes(k) * self.h
        total = np.zeros(x.size)
        forward = 1.0
        for j in range(k + 1, steps + 1):
            forward *= ratio[j - 1]
            tau = (j - k) * self.step
            total += (
                flow[j] * forward * self.model.convexity(float(self.times[k]), tau) * np.exp(-self.model.g(tau) * x)
            )
        return total


def exercised(c: Array, h: Array, price: float, bar: float) -> tuple[Array, Array, int]:
    """Issuer's and holder's values before correction, and how many nodes from the left are called."""
    called = c >= bar
    return np.where(called, bar, c), np.where(called, price, h), int(called.sum())


def corrected(v: Array, w: Array, c: Array, h: Array, price: float, bar: float, called: int) -> tuple[Array, Array]:
    """Adds the corrections when the kink has its six nodes inside."""
    i = called - 1
    if i - 2 < 0 or i + 3 > c.size - 1:
        return v, w
    mine, theirs = through(c[i - 2 : i + 4]), through(h[i - 2 : i + 4])
    theta = kink_place(mine, bar)
    v, w = v.copy(), w.copy()
    v[i - 2 : i + 4] += corrections(mine, theta, 0.0)
    w[i - 2 : i + 4] += corrections(theirs, theta, float(theirs(theta)) - price)
    return v, w


def local_values(c: Array, lo: int, places: Array) -> Array:
    """Values between nodes by the quintic around them, the last one inside near the edges. places in node units"""
    out = np.empty(places.size)
    for n, x in enumerate(places):
        i = min(max(math.floor(x), lo + 2), lo + c.size - 1 - 3)
        out[n] = through(c[i - 2 - lo : i + 4 - lo])(x - i)
    return out


def plain_values(
    model: ShortRateModel, step_months: int, offset_months: int, grid: Grid, steps: int, ratio: Array,
    holder_ratio: Array, flow: Array, price: Array, bar: Array,
) -> tuple[float, float]:  # fmt: skip
    """Issuer's cost and holder's value today, ex coupon. [per 100]

    Arrays by step, as the columns of `pricing.Problem`; step 0 is today.
    """
    rights = [k for k in range(1, steps) if np.isfinite(bar[k])]
    step = step_months / 12.0
    times = np.array([0.0] + [offset_months / 12.0 + (k - 1) * step for k in range(1, steps + 1)])
    plain = (discounted(ratio, flow, steps), discounted(holder_ratio, flow, steps))
    if not rights:
        return plain
    s = Solver(model, step, grid, times)
    first, last = rights[0], rights[-1]
    c, h = s.straight(last, ratio, flow, steps), s.straight(last, holder_ratio, flow, steps)
    touched = False
    for k in range(last, first - 1, -1):
        lo = int(s.nodes(k)[0])
        v, w, called = exercised(c, h, price[k], bar[k])
        touched = touched or called > 0
        if k == first:
            issuer, holder, hit = first_sum(s, k, lo, c, h, v, w, price[k], bar[k], called)
            break
        flat = (called > 0, called == c.size)
        vg, wg = Edges.of(v, lo, flat), Edges.of(w, lo, flat)
        v, w = corrected(v, w, c, h, price[k], bar[k], called)
        now = s.nodes(k - 1)
        conv = model.convexity(float(times[k - 1]), step)
        c = np.array([ratio[k - 1] * conv * s.expectation(int(i), vg.with_values(v), flow[k], flat) for i in now])
        h = np.array(
            [holder_ratio[k - 1] * conv * s.expectation(int(i), wg.with_values(w), flow[k], flat) for i in now]
        )
    if not (touched or hit):
        return plain
    return (
        discounted(ratio, flow, first) + float(np.prod(ratio[:first])) * issuer,
        discounted(holder_ratio, flow, first) + float(np.prod(holder_ratio[:first])) * holder,
    )


@dataclass(frozen=True)
class Edges:
    """Ghost nodes are set from the values before correction: `before` holds them, `values` what lies inside."""

    before: Column
    values: Array

    @staticmethod
    def of(v: Array, lo: int, flat: tuple[bool, bool]) -> Edges:
        return Edges(Column(lo, v), v)

    def with_values(self, v: Array) -> Column:
        return EdgedColumn(self.before.lo, v, self.before.values)


@dataclass(frozen=True)
class EdgedColumn(Column):
    """A corrected column whose ghosts come from the values before correction."""

    before: Array

    def at(self, node: int, flat_low: bool, flat_high: bool) -> float:
        if self.lo <= node <= self.hi:
            return float(self.values[node - self.lo])
        return Column(self.lo, self.before).at(node, flat_low, flat_high)


def discounted(ratio: Array, flow: Array, steps: int) -> float:
    """Payments of steps 1..steps discounted to today. [per 100]"""
    discount, total = 1.0, 0.0
    for k in range(1, steps + 1):
        discount *= float(ratio[k - 1])
        total += float(flow[k]) * discount
    return total


def first_sum(
    s: Solver, k: int, lo: int, c: Array, h: Array, v: Array, w: Array, price: float, bar: float, called: int
) -> tuple[float, float, bool]:
    """The one exact jump from today to step k: on the grid, or on a local grid where that is too coarse."""
    t = float(s.times[k])
    mean, deviation = s.model.mean(t), math.sqrt(s.model.variance(t))
    if deviation >= RESOLVED * s.h:
        v, w = corrected(v, w, c, h, price, bar, called)
        weight = np.exp(-0.5 * ((s.nodes(k) * s.h - mean) / deviation) ** 2)
        weight = weight / weight.sum()
        return float(weight @ v), float(weight @ w), called > 0
    points = np.linspace(-LOCAL_WIDTH, LOCAL_WIDTH, LOCAL_POINTS)
    places = (mean + points * deviation) / s.h
    fine_c, fine_h = local_values(c, lo, places), local_values(h, lo, places)
    v, w, hit = exercised(fine_c, fine_h, price, bar)
    v, w = corrected(v, w, fine_c, fine_h, price, bar, hit)
    weight = np.exp(-0.5 * points**2)
    weight = weight / weight.sum()
    return float(weight @ v), float(weight @ w), hit > 0


def plain_upper_bound(discount: Array, flow: Array, bar: Array) -> float:
    """Least over later rights of payments up to it and the bar there, and over maturity. [per 100]

    discount, flow, bar  by month ahead 1..life on the issuer's curve; bar inf where there is no right
    """
    paid = np.cumsum(flow * discount)
    return float(min(np.min(paid[:-1] + bar[:-1] * discount[:-1], initial=np.inf), paid[-1]))
