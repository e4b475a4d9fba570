"""Earned rate of a segment over the last twelve completed months (C11)."""

from __future__ import annotations

from collections import deque
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from projector.balance.month import MonthRecord, State
from projector.run.prepare import Prepared

Array = npt.NDArray[np.float64]

MONTHS = 12


@dataclass
class EarnedRate:
    """Net income and opening base of the last twelve months. [currency], each (segment, path)

    Income: coupons as earned, cash interest, accretion less amortisation, less default cost and investment expense;
    realised gains are out. Before month 12 the missing months take the opening net book yield on the opening base.
    """

    income: deque[Array]
    base: deque[Array]
    opening: Array

    @staticmethod
    def at_start(prepared: Prepared, state: State) -> EarnedRate:
        base = state.statement_start + state.cash
        income = opening_income(prepared, state)
        return EarnedRate(deque([income] * MONTHS, MONTHS), deque([base] * MONTHS, MONTHS), base)

    def month(self, state: State, happened: MonthRecord) -> None:
        """Takes in a completed month."""
        flows = happened.flows
        self.income.append(
            happened.interest_earned + flows[("segment", "cash_interest")] + happened.book["accretion"]
            - happened.default_cost + flows[("segment", "investment_expense")]
        )  # fmt: skip
        self.base.append(self.opening)
        self.opening = state.statement_start + state.statement_bought + state.cash

    def rate(self) -> Array:
        """Income of twelve months over their mean opening base; 0 where the base is nothing. [1/year]"""
        income, base = np.zeros(self.opening.shape), np.zeros(self.opening.shape)
        for i, b in zip(self.income, self.base):
            income = income + i
            base = base + b
        mean = base / MONTHS
        return np.where(mean > 0.0, income / np.where(mean > 0.0, mean, 1.0), 0.0)


def opening_income(prepared: Prepared, state: State) -> Array:
    """One month's income at the opening net book yield: effective interest less default cost and expense. [currency]"""
    interest, cost = np.zeros(state.cash.shape), np.zeros(state.cash.shape)
    h = prepared.holdings
    lost = 1.0 - prepared.survival[h.security, 1]
    recovered = np.array([prepared.terms.recovery[prepared.bonds.ratings[s]] for s in h.security])
    value = h.par / 100.0 * (h.book[:, 0] + prepared.bonds.accrued[h.security, 0] - 100.0 * recovered)
    for n in range(h.security.size):
        interest[h.segment[n]] += h.opening_interest[n]
        cost[h.segment[n]] += lost[n] * value[n]
    return interest - cost - state.statement_start * prepared.strategy.expense
