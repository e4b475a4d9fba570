"""What the projection buys: a fixed mix of bullets at par, kept as cohorts by month bought (C8)."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from projector.balance.holdings import DefaultTerms
from projector.balance.purchase_kernels import bullet_coupons, cohort_month, cohort_values
from projector.bonds.spreads import BP
from projector.study.records import Purchases

Array = npt.NDArray[np.float64]
BoolArray = npt.NDArray[np.bool_]
IntArray = npt.NDArray[np.int64]


@dataclass(frozen=True)
class Mix:
    """The purchase classes as arrays, in the study's order."""

    names: tuple[str, ...]
    term: IntArray  # [month]
    spread: Array  # [1/year]
    weight: Array  # [-]
    survival: Array  # monthly [-]
    recovery: Array  # [-]
    age_survival: Array  # [class, age in months]
    invested: float  # share of positive cash

    @staticmethod
    def from_study(choice: Purchases, terms: DefaultTerms) -> Mix:
        classes = choice.classes if choice.share_of_cash_invested > 0.0 else ()
        term = np.array([12 * c.term_years for c in classes], dtype=np.int64)
        survival = np.array([terms.survival[c.rating] for c in classes])
        ages = np.ones((len(classes), int(term.max(initial=0)) + 1))
        for a in range(1, ages.shape[1]):
            ages[:, a] = ages[:, a - 1] * survival
        return Mix(
            tuple(c.name for c in classes),
            term,
            np.array([c.spread_bp * BP for c in classes]),
            np.array([c.weight for c in classes]),
            survival,
            np.array([terms.recovery[c.rating] for c in classes]),
            ages,
            choice.share_of_cash_invested if classes else 0.0,
        )

    def coupons(self, discount: Array) -> Array:
        """Par coupons on one month's curves. [1/year], shape (class, path)"""
        out = np.empty((self.term.size, discount.shape[1]))
        bullet_coupons(self.term, self.spread, discount, out)
        return out

    def net_yield(self, discount: Array) -> Array:
        """Yield of the mix at par, bond-equivalent, less its yearly default cost. [1/year], shape (path,)"""
        lost = 1.0 - self.age_survival[:, 12] * 1.0 if self.term.size else np.zeros(0)
        coupon = self.coupons(discount) - (lost * (1.0 - self.recovery))[:, None]
        total = np.zeros(discount.shape[1])
        for c in range(self.term.size):
            total = total + self.weight[c] * coupon[c]
        return total


@dataclass
class Cohorts:
    """Purchases alive: see `purchase_kernels` for the shapes. Changed in place by the month step that owns it."""

    principal: Array
    running: Array
    par: Array
    coupon: Array

    @staticmethod
    def none(mix: Mix, months: int, segments: int, paths: int) -> Cohorts:
        c = mix.term.size
        return Cohorts(
            np.zeros((c, months + 1, segments, paths)),
            np.zeros((c, 6, segments, paths)),
            np.zeros((c, segments, paths)),
            np.zeros((c, months + 1, paths)),
        )


@dataclass(frozen=True)
class CohortFlows:
    """One month of purchases in total. [currency], shape (segment, path)"""

    coupon: Array
    principal: Array
    default_par: Array
    default_accrued: Array
    recoverable: Array


def class_total(values: Array) -> Array:
    """Sum over classes in their order; (class, segment, path) -> (segment, path)."""
    total = np.zeros(values.shape[1:])
    for c in range(values.shape[0]):
        total = total + values[c]
    return total


def month_flows(cohorts: Cohorts, mix: Mix, m: int) -> CohortFlows:
    """Runs month m of the cohorts: defaults, coupons, redemptions."""
    shape = cohorts.par.shape
    paid, matured, lost, accrued = (np.zeros(shape) for _ in range(4))
    cohort_month(
        m, mix.term, mix.survival, mix.age_survival, cohorts.principal, cohorts.running, cohorts.par, cohorts.coupon,
        paid, matured, lost, accrued,
    )  # fmt: skip
    return CohortFlows(
        class_total(paid), class_total(matured), class_total(lost), class_total(accrued),
        class_total(lost * mix.recovery[:, None, None]),
    )  # fmt: skip


def accrued(cohorts: Cohorts, m: int) -> Array:
    """Accrued interest of purchases at month end m. [currency], shape (segment, path)"""
    total = np.zeros(cohorts.par.shape[1:])
    for c in range(cohorts.par.shape[0]):
        for q in range(6):
            total = total + cohorts.running[c, q] * (((m - q) % 6) / 6.0)
    return total


def buy(cohorts: Cohorts, mix: Mix, m: int, cash: Array, discount: Array) -> Array:
    """Invests the stated share of positive cash at par. Returns what was paid [currency], (segment, path)."""
    spent = np.zeros(cash.shape)
    if mix.term.size == 0:
        return spent
    cohorts.coupon[:, m] = mix.coupons(discount)
    budget = np.maximum(cash, 0.0) * mix.invested
    for c in range(mix.term.size):
        par = budget * mix.weight[c]
        cohorts.principal[c, m] = par
        cohorts.running[c, m % 6] += 0.5 * par * cohorts.coupon[c, m]
        cohorts.par[c] += par
        spent = spent + par
    return spent


def values(cohorts: Cohorts, mix: Mix, m: int, discount: Array, wanted: BoolArray) -> Array:
    """Market value incl. accrued. [currency], shape (segment, path), 0 where not wanted."""
    out = np.zeros(cohorts.par.shape[1:])
    if mix.term.size:
        cohort_values(
            m, mix.term, mix.spread, mix.age_survival, cohorts.principal, cohorts.coupon, discount, wanted, out
        )
    return out


def sell_share(cohorts: Cohorts, share: Array) -> None:
    """Takes one share of every cohort; a path with share 0 keeps its bits."""
    keep = 1.0 - share
    cohorts.principal *= keep
    cohorts.running *= keep
    cohorts.par *= keep
