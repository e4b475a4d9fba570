"""The plain twin of the solver: one security on one curve, written as the method reads, with NumPy and no kernel.

It builds its own weights and its own polynomials, so that a fault in the shared tables or in the unrolled formulas of
`solver_kernels` shows as a disagreement. A thousand times slower; used by tests only.
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

    Source: Euler-Maclaurin formula on both sides of an interior singular point, as in Davis and Rabinowitz, Methods of
    Numerical Integration, 2nd ed. 1984, section 2.9 (cited from memory); Bernoulli polynomials: NIST DLMF 24.2.
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
    """Where the continuation meets the bar between nodes 0 and 1: secant, then two Newton steps, kept inside. [node]

    The method stops there, and so does the twin: going on to the root moves a value by up to 1e-8 per 100.
    """
    miss = curve - bar
    theta = float(np.clip(miss(0.0) / (miss(0.0) - miss(1.0)), 0.0, 1.0))
    for _ in range(2):
        theta = float(np.clip(theta - miss(theta) / miss.deriv()(theta), 0.0, 1.0))
    return theta


@dataclass(frozen=True)
class Column:
    """Values on nodes lo, lo + 1, ... of one step.

    edges  the same before correction: what the nodes beyond the range continue
    flat   whether the low and the high edge node are exercised: there the value beyond is the same, else geometric
    """

    lo: int
    values: Array
    edges: Array
    flat: tuple[bool, bool]

    def at(self, node: int) -> float:
        """Value at a node, inside the range or beyond it."""
        e, high = self.edges, self.lo + self.edges.size - 1
        if node < self.lo:
            return float(e[0] if self.flat[0] else e[0] * (e[0] / e[1]) ** (self.lo - node))
        if node > high:
            return float(e[-1] if self.flat[1] else e[-1] * (e[-1] / e[-2]) ** (node - high))
        return float(self.values[node - self.lo])


@dataclass(frozen=True)
class Solver:
    """One model, one grid, one set of dates t_1, t_2, ... in years."""

    model: ShortRateModel
    step: float
    grid: Grid
    times: Array  # times[0] = 0

    @property
    def h(self) -> float:
        """Distance of two nodes. [1/year]"""
        return self.grid.kappa * math.sqrt(self.model.variance(self.step))

    def nodes(self, k: int) -> npt.NDArray[np.int64]:
        """Nodes of step k: centred at the mean, so many standard deviations wide, at least four either side."""
        t = float(self.times[k])
        centre = round(self.model.mean(t) / self.h)
        half = max(4, math.ceil(self.grid.range_width * math.sqrt(self.model.variance(t)) / self.h))
        return np.arange(centre - half, centre + half + 1)

    def expectation(self, node: int, value: Column, flow: float) -> float:
        """e^(-G x) times the mean of next step's value and payment, seen from a node of this step. [per 100]

        Source: Hull and White, Review of Financial Studies 3(4), 1990, for the transition under the forward measure;
        Trefethen and Weideman, SIAM Review 56(3), 2014, for the trapezoidal sum (both cited from memory).
        """
        h, b, model = self.h, self.grid.half_band, self.model
        mean = math.exp(-model.a * self.step) * node * h + model.mean(self.step)
        columns = round(mean / h) + np.arange(-b, b + 1)
        weight = np.exp(-0.5 * ((columns * h - mean) / math.sqrt(model.variance(self.step))) ** 2)
        total = sum(w * (value.at(int(j)) + flow) for w, j in zip(weight / weight.sum(), columns))
        return float(math.exp(-model.g(self.step) * node * h) * total)

    def back(self, k: int, value: Column, ratio: float, flow: float) -> Array:
        """Cost of going on at the nodes of step k, from the values and the payment of step k + 1. [per 100]"""
        factor = ratio * self.model.convexity(float(self.times[k]), self.step)
        return np.array([factor * self.expectation(int(i), value, flow) for i in self.nodes(k)])

    def straight(self, k: int, ratio: Array, flow: Array, steps: int) -> Array:
        """Value at the nodes of step k of all payments after it, in closed form. [per 100]

        Source: Hull and White 1990, bond prices given the short rate (cited from memory).
        """
        x, t = self.nodes(k) * self.h, float(self.times[k])
        total = np.zeros(x.size)
        forward = 1.0
        for j in range(k + 1, steps + 1):
            forward *= ratio[j - 1]
            tau = (j - k) * self.step
            total += flow[j] * forward * self.model.convexity(t, tau) * np.exp(-self.model.g(tau) * x)
        return total

    def first_sum(self, k: int, c: Array, h: Array, price: float, bar: float) -> tuple[float, float, bool]:
        """The one exact jump from today to step k: on the grid, or on a local grid where that is too coarse.

        Issuer's and holder's mean at step k, and whether the right is used anywhere.
        """
        t, lo = float(self.times[k]), int(self.nodes(k)[0])
        mean, deviation = self.model.mean(t), math.sqrt(self.model.variance(t))
        z = (self.nodes(k) * self.h - mean) / deviation
        any_node = bool((c >= bar).any())
        if deviation < RESOLVED * self.h:
            z = np.linspace(-LOCAL_WIDTH, LOCAL_WIDTH, LOCAL_POINTS)
            places = (mean + z * deviation) / self.h
            c, h = local_values(c, lo, places), local_values(h, lo, places)
        v, w, called = settled(lo, c, h, price, bar)
        weight = np.exp(-0.5 * z**2)
        weight = weight / weight.sum()
        return float(weight @ v.values), float(weight @ w.values), any_node or called > 0


def settled(lo: int, c: Array, h: Array, price: float, bar: float) -> tuple[Column, Column, int]:
    """Issuer's and holder's values after the decision at one step, and how many nodes from the left are called.

    The holder has the price where the issuer calls and his own continuation elsewhere. The corrections need the kink's
    six nodes inside the range.
    """
    called = c >= bar
    count, flat = int(called.sum()), (bool(called.any()), bool(called.all()))
    plain_v, plain_w = np.where(called, bar, c), np.where(called, price, h)
    v, w = plain_v.copy(), plain_w.copy()
    i = count - 1
    if i - 2 >= 0 and i + 3 <= c.size - 1:
        six = slice(i - 2, i + 4)
        mine, theirs = through(c[six]), through(h[six])
        theta = kink_place(mine, bar)
        v[six] += corrections(mine, theta, 0.0)
        w[six] += corrections(theirs, theta, float(theirs(theta)) - price)
    return Column(lo, v, plain_v, flat), Column(lo, w, plain_w, flat), count


def local_values(c: Array, lo: int, places: Array) -> Array:
    """Values between nodes by the quintic around them, the last one inside near the edges. places in node units"""
    out = np.empty(places.size)
    for n, x in enumerate(places):
        i = min(max(math.floor(x), lo + 2), lo + c.size - 1 - 3)
        out[n] = through(c[i - 2 - lo : i + 4 - lo])(x - i)
    return out


def discounted(ratio: Array, flow: Array, steps: int) -> float:
    """Payments of steps 1..steps discounted to today. [per 100]"""
    discount, total = 1.0, 0.0
    for k in range(1, steps + 1):
        discount *= float(ratio[k - 1])
        total += float(flow[k]) * discount
    return total


def plain_values(
    model: ShortRateModel, step_months: int, offset_months: int, grid: Grid, steps: int, ratio: Array,
    holder_ratio: Array, flow: Array, price: Array, bar: Array,
) -> tuple[float, float]:  # fmt: skip
    """Issuer's cost and holder's value today, ex coupon. [per 100]

    Arrays by step, as the columns of `pricing.Problem`; step 0 is today. Where no right is used at any node the plain
    bond comes back. No range is checked: `price` and `bar` are inf where there is no right.

    Source: Hull and White 1990 for the model; optimal stopping by backward induction, with the issuer's cost inside
    every later comparison, after Mauer, J. Financial Research 16(1), 1993 (both cited from memory).
    """
    rights = [k for k in range(1, steps) if np.isfinite(bar[k])]
    plain = (discounted(ratio, flow, steps), discounted(holder_ratio, flow, steps))
    if not rights:
        return plain
    step, first, last = step_months / 12.0, rights[0], rights[-1]
    times = np.array([0.0] + [offset_months / 12.0 + (k - 1) * step for k in range(1, steps + 1)])
    s = Solver(model, step, grid, times)
    c, h = s.straight(last, ratio, flow, steps), s.straight(last, holder_ratio, flow, steps)
    used = False
    for k in range(last, first, -1):
        v, w, called = settled(int(s.nodes(k)[0]), c, h, price[k], bar[k])
        used = used or called > 0
        c, h = s.back(k - 1, v, ratio[k - 1], flow[k]), s.back(k - 1, w, holder_ratio[k - 1], flow[k])
    issuer, holder, called_first = s.first_sum(first, c, h, price[first], bar[first])
    if not (used or called_first):
        return plain
    return (
        discounted(ratio, flow, first) + float(np.prod(ratio[:first])) * issuer,
        discounted(holder_ratio, flow, first) + float(np.prod(holder_ratio[:first])) * holder,
    )


def plain_upper_bound(discount: Array, flow: Array, bar: Array) -> float:
    """Least over later rights of payments up to it and the bar there, and over maturity. [per 100]

    discount, flow, bar  by month ahead 1..life on the issuer's curve; bar inf where there is no right

    Source: own; the issuer may follow any date fixed in advance, so the best of them cannot cost less than the optimum.
    """
    paid = np.cumsum(flow * discount)
    return float(min(np.min(paid[:-1] + bar[:-1] * discount[:-1], initial=np.inf), paid[-1]))


def plain_straight_value(discount: Array, flow: Array) -> float:
    """Promised payments of months ahead 1..life discounted. [per 100]"""
    return math.fsum(flow * discount)
