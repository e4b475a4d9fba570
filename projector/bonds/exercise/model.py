"""Closed forms of the Hull-White one-factor model in the state used by the solver.

State: r(t) = phi(t) + x(t), dx = -a x dt + sigma dW, x(0) = 0, where phi carries the curve. The law of x and its
transition over a step do not depend on the curve, which is what makes one table of weights serve every bond, path
and date. All times in years from the date of the solve.

Source: Hull and White, Pricing Interest-Rate-Derivative Securities, Review of Financial Studies 3(4), 1990; Andersen
and Piterbarg, Interest Rate Modeling, vol. 2, 2010, Gaussian short-rate models (both cited from memory, re-derived).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

SMALL_REVERSION = 1e-8


@dataclass(frozen=True)
class ShortRateModel:
    """Mean reversion `a` [1/year] and normal volatility `sigma` [1/year]."""

    a: float
    sigma: float

    def g(self, tau: float) -> float:
        """G(tau) = (1 - e^(-a tau)) / a, the response of a tau-year yield integral to x. [year]"""
        if abs(self.a) < SMALL_REVERSION:
            return tau
        return -math.expm1(-self.a * tau) / self.a

    def variance(self, t: float) -> float:
        """y(t) = Var x(t). [1/year^2]"""
        if abs(self.a) < SMALL_REVERSION:
            return self.sigma**2 * t
        return -(self.sigma**2) * math.expm1(-2.0 * self.a * t) / (2.0 * self.a)

    def mean(self, t: float) -> float:
        """Mean of x(t) under the measure of the discount to t. [1/year]"""
        return -0.5 * self.sigma**2 * self.g(t) ** 2

    def convexity(self, t: float, tau: float) -> float:
        """The factor of P(t, t+tau | x) beside P0(t+tau)/P0(t) and exp(-G(tau) x). [-]"""
        g = self.g(tau)
        return math.exp(-0.5 * g * g * self.variance(t) - 0.5 * g * self.sigma**2 * self.g(t) ** 2)
