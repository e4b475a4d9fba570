"""Purchases: bullets at par on the path's curve, kept as cohorts, against plain sums over what was bought."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest

from projector.balance import purchases
from projector.balance.purchases import Cohorts, Mix
from projector.rates.curve import CurveReading, log_discount_nodes, monthly_discounts

TERMS, SPREADS, WEIGHTS = (12, 36, 120), (0.004, 0.0115, 0.0165), (0.2, 0.5, 0.3)
SURVIVAL, RECOVERY = (1.0, 0.9995, 0.999), (0.0, 0.4, 0.3)
PATHS, SEGMENTS, MONTHS = 3, 2, 40


@pytest.fixture(scope="module")
def mix() -> Mix:
    ages = np.array([[s**a for a in range(121)] for s in SURVIVAL])
    return Mix(
        ("1", "3", "10"), np.array(TERMS), np.array(SPREADS), np.array(WEIGHTS), np.array(SURVIVAL),
        np.array(RECOVERY), ages, 0.8,
    )  # fmt: skip


@pytest.fixture(scope="module")
def discounts() -> list[np.ndarray]:
    """P(tau) by month, [tau, path]: each month another curve."""
    rng = np.random.default_rng(4)
    yields = np.array([0.045, 0.046, 0.04, 0.038])[None, :, None] + rng.uniform(-0.01, 0.01, (MONTHS + 1, 1, PATHS))
    nodes = log_discount_nodes(np.ascontiguousarray(yields), CurveReading((3, 12, 60, 120), True, False))
    return [monthly_discounts(n, 130) for n in nodes]


class Plain:
    """The same purchases as a list of bonds, one a class and month, without any of the program's sums."""

    def __init__(self, mix: Mix) -> None:
        self.mix = mix
        self.bonds: list[tuple[int, int, np.ndarray, np.ndarray]] = []  # class, month, par [segment, path], coupon

    def buy(self, m: int, cash: np.ndarray, coupon: np.ndarray) -> None:
        for c in range(3):
            self.bonds.append((c, m, np.maximum(cash, 0.0) * 0.8 * WEIGHTS[c], coupon[c]))

    def alive(self, c: int, bought: int, m: int) -> float:
        return SURVIVAL[c] ** (m - bought) if m - bought < TERMS[c] else 0.0

    def each(self, m: int) -> Any:
        """Class, age and what is left of each bond bought before month m, and its coupon rate."""
        for c, bought, par, coupon in self.bonds:
            if bought < m:
                yield c, m - bought, par, coupon

    def coupons(self, m: int) -> np.ndarray:
        total = np.zeros((SEGMENTS, PATHS))
        for c, age, par, coupon in self.each(m):
            if age % 6 == 0 and age <= TERMS[c]:
                total += par * SURVIVAL[c] ** age * coupon / 2.0
        return total

    def principal(self, m: int) -> np.ndarray:
        total = np.zeros((SEGMENTS, PATHS))
        for c, age, par, _ in self.each(m):
            if age == TERMS[c]:
                total += par * SURVIVAL[c] ** age
        return total

    def lost(self, m: int) -> np.ndarray:
        """By class, [class, segment, path]."""
        total = np.zeros((3, SEGMENTS, PATHS))
        for c, age, par, _ in self.each(m):
            if age <= TERMS[c]:
                total[c] += par * (SURVIVAL[c] ** (age - 1) - SURVIVAL[c] ** age)
        return total

    def accrued(self, m: int) -> np.ndarray:
        total = np.zeros((SEGMENTS, PATHS))
        for c, bought, par, coupon in self.bonds:
            total += par * self.alive(c, bought, m) * coupon / 2.0 * ((m - bought) % 6) / 6.0
        return total

    def par(self, m: int) -> np.ndarray:
        total = np.zeros((SEGMENTS, PATHS))
        for c, bought, par, _ in self.bonds:
            total += par * self.alive(c, bought, m)
        return total

    def value(self, m: int, discount: np.ndarray) -> np.ndarray:
        total = np.zeros((SEGMENTS, PATHS))
        for c, bought, par, coupon in self.bonds:
            left = TERMS[c] - (m - bought)
            for tau in range(1, left + 1):
                if (left - tau) % 6 == 0:
                    flow = coupon / 2.0 + (1.0 if tau == left else 0.0)
                    worth = flow * discount[tau] * math.exp(-SPREADS[c] * tau / 12.0)
                    total += par * self.alive(c, bought, m) * worth
        return total


def test_limit_the_coupon_is_the_one_at_which_the_bullet_is_worth_par(mix: Mix, discounts: Any) -> None:
    for discount in discounts[:6]:
        coupon = mix.coupons(discount)
        for c in range(3):
            for p in range(PATHS):
                price = math.fsum(
                    (50.0 * coupon[c, p] + (100.0 if tau == TERMS[c] else 0.0))
                    * float(discount[tau, p]) * math.exp(-SPREADS[c] * tau / 12.0)
                    for tau in range(6, TERMS[c] + 1, 6)
                )  # fmt: skip
                assert price == pytest.approx(100.0, abs=1e-11)


def test_known_coupon_on_a_flat_curve(mix: Mix) -> None:
    """At 6 % Treasury a spread that turns 1.03 into 1.035 a half-year gives a 7 % coupon for every term."""
    nodes = log_discount_nodes(np.full((1, 3, 1), 0.06), CurveReading((3, 12, 120), True, False))
    spread = 2.0 * math.log(1.035 / 1.03)
    flat = Mix(mix.names, mix.term, np.full(3, spread), mix.weight, mix.survival, mix.recovery, mix.age_survival, 1.0)
    np.testing.assert_allclose(flat.coupons(monthly_discounts(nodes[0], 120)), 0.07, rtol=0, atol=1e-14)


def test_limit_market_value_just_after_buying_is_the_cash_paid(mix: Mix, discounts: Any) -> None:
    cohorts = Cohorts.none(mix, MONTHS, SEGMENTS, PATHS)
    cash = np.array([[1e6, 2.5e5, -3e4], [0.0, 7.0, 1e9]])
    spent = purchases.buy(cohorts, mix, 1, cash, discounts[1])
    np.testing.assert_allclose(spent, 0.8 * np.maximum(cash, 0.0), rtol=1e-15)
    everywhere = np.ones(cash.shape, dtype=np.bool_)
    np.testing.assert_allclose(purchases.values(cohorts, mix, 1, discounts[1], everywhere), spent, rtol=1e-13)
    np.testing.assert_array_equal(purchases.accrued(cohorts, 1), 0.0)


def test_known_forty_months_of_cohorts_against_a_plain_list_of_bonds(mix: Mix, discounts: Any) -> None:
    rng = np.random.default_rng(9)
    cohorts, plain = Cohorts.none(mix, MONTHS, SEGMENTS, PATHS), Plain(mix)
    everywhere = np.ones((SEGMENTS, PATHS), dtype=np.bool_)
    for m in range(1, MONTHS + 1):
        flows = purchases.month_flows(cohorts, mix, m)
        close = {"rtol": 1e-11, "atol": 1e-6}
        np.testing.assert_allclose(flows.coupon, plain.coupons(m), **close)
        np.testing.assert_allclose(flows.principal, plain.principal(m), **close)
        lost = plain.lost(m)
        np.testing.assert_allclose(flows.default_par, lost.sum(axis=0), **close)
        np.testing.assert_allclose(flows.recoverable, (lost * np.array(RECOVERY)[:, None, None]).sum(axis=0), **close)
        cash = rng.uniform(-2e5, 1e6, (SEGMENTS, PATHS))
        purchases.buy(cohorts, mix, m, cash, discounts[m])
        plain.buy(m, cash, mix.coupons(discounts[m]))
        np.testing.assert_allclose(purchases.class_total(cohorts.par), plain.par(m), **close)
        np.testing.assert_allclose(purchases.accrued(cohorts, m), plain.accrued(m), **close)
        if m % 7 == 0 or m > 34:
            found = purchases.values(cohorts, mix, m, discounts[m], everywhere)
            np.testing.assert_allclose(found, plain.value(m, discounts[m]), rtol=1e-11)


def test_limit_a_share_sold_leaves_the_rest_of_every_cohort(mix: Mix, discounts: Any) -> None:
    cohorts = Cohorts.none(mix, MONTHS, SEGMENTS, PATHS)
    everywhere = np.ones((SEGMENTS, PATHS), dtype=np.bool_)
    for m in range(1, 9):
        purchases.month_flows(cohorts, mix, m)
        purchases.buy(cohorts, mix, m, np.full((SEGMENTS, PATHS), 1e5 * m), discounts[m])
    before = [purchases.values(cohorts, mix, 8, discounts[8], everywhere), purchases.accrued(cohorts, 8),
              purchases.class_total(cohorts.par)]  # fmt: skip
    share = np.array([[0.0, 0.25, 1.0], [0.5, 0.0, 0.1]])
    purchases.sell_share(cohorts, share)
    after = [purchases.values(cohorts, mix, 8, discounts[8], everywhere), purchases.accrued(cohorts, 8),
             purchases.class_total(cohorts.par)]  # fmt: skip
    for one, other in zip(before, after):
        np.testing.assert_allclose(other, one * (1.0 - share), rtol=1e-14, atol=1e-9)
        np.testing.assert_array_equal(other[share == 0.0], one[share == 0.0])  # who sells nothing keeps every bit


def test_limit_only_the_values_asked_for_are_worked_out(mix: Mix, discounts: Any) -> None:
    cohorts = Cohorts.none(mix, MONTHS, SEGMENTS, PATHS)
    purchases.buy(cohorts, mix, 1, np.full((SEGMENTS, PATHS), 1e5), discounts[1])
    wanted = np.array([[True, False, True], [False, False, True]])
    whole = purchases.values(cohorts, mix, 1, discounts[1], np.ones_like(wanted))
    np.testing.assert_array_equal(purchases.values(cohorts, mix, 1, discounts[1], wanted), np.where(wanted, whole, 0.0))


def test_known_net_yield_is_coupon_less_a_year_of_default_cost(mix: Mix, discounts: Any) -> None:
    coupon = mix.coupons(discounts[3])
    cost = [(1.0 - s**12) * (1.0 - r) for s, r in zip(SURVIVAL, RECOVERY)]
    expected = sum(w * (coupon[c] - cost[c]) for c, w in enumerate(WEIGHTS))
    np.testing.assert_allclose(mix.net_yield(discounts[3]), expected, rtol=1e-14)
