"""The invented liabilities of the Harbour Ridge demo: monthly roll-forward of four blocks over the horizon.

Only multiplication, addition, Python's power of a scalar and an arctangent of a scalar are used, and amounts are
rounded to cents, so that the tables come out the same wherever they are made.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

MONTHS = 480
Array = npt.NDArray[np.float64]
Stream = dict[str, Array]  # item -> [month 0..480, path]; month 0 of a flow is not written


@dataclass(frozen=True)
class DeferredTerms:
    """One block of deferred annuities. Rates per year; every number invented."""

    account_value: float  # at the valuation date [currency]
    guarantee: float  # least credited rate
    margin: float  # kept from the block's slowly moving yield before crediting
    start_yield: float  # the block's yield at the valuation date
    charges: tuple[float, ...]  # surrender charge by years from the valuation date, then 0
    reserve_factor: float  # least share of the account value reserved
    contracts: float
    death: float  # first year; rises 6 % a year to 20 %


OLDER = DeferredTerms(440e6, 0.030, 0.0135, 0.0430, (0.02, 0.01), 0.98, 7_900.0, 0.019)
NEWER = DeferredTerms(376e6, 0.020, 0.0135, 0.0425, (0.06, 0.05, 0.04, 0.03, 0.02, 0.01), 0.98, 5_200.0, 0.011)

NEW_MONEY_MARGIN = 0.0125  # of the block's investments over the five-year Treasury yield
TURNOVER_MONTHS = 72.0  # in which the block's yield follows new money
COMPETITOR_MARGIN = -0.0025  # what others credit against the five-year Treasury yield
LAPSE_LEAST, LAPSE_MOST, LAPSE_CENTRE, LAPSE_STEEPNESS = 0.03, 0.27, 0.030, 110.0
CHARGE_YEARS = 3.0  # a surrender charge is weighed against this many years of better credit
WITHDRAWAL = 0.025
EXPENSE_PER_CONTRACT, INFLATION, COMMISSION = 95.0, 0.02, 0.0010

PAYOUT_RESERVE, PAYOUT_RATE, PAYOUT_DEATH, PAYOUT_AGEING = 400e6, 0.0385, 0.018, 0.0067
GUARANTEED_RATE, GUARANTEED_CONTRACTS = 0.0290, 28  # contracts mature at quarter ends over seven years


def lapse_rate(gap: float) -> float:
    """Yearly lapse rate when others credit `gap` more. [1/year]

    Arctangent between a least and a greatest rate, the usual shape for interest-sensitive lapses; numbers invented.
    Source: arctangent lapse formula as quoted in actuarial literature on deferred annuities (cited from memory).
    """
    share = 0.5 + math.atan(LAPSE_STEEPNESS * (gap - LAPSE_CENTRE)) / math.pi
    return LAPSE_LEAST + (LAPSE_MOST - LAPSE_LEAST) * share


def charge_at(terms: DeferredTerms, month: int) -> float:
    """Surrender charge in force at a month, a step a year. [-]"""
    year = month // 12
    return terms.charges[year] if year < len(terms.charges) else 0.0


def deferred_stream(terms: DeferredTerms, five_year: Array) -> Stream:
    """A block of deferred annuities on every path. five_year [month, path] is the path's five-year yield [1/year]."""
    paths = five_year.shape[1]
    names = (
        "surrender_benefit", "death_benefit", "withdrawal", "expense", "commission", "reserve_statutory",
        "account_value", "surrender_value",
    )  # fmt: skip
    out = {name: np.zeros((MONTHS + 1, paths)) for name in names}
    for p in range(paths):
        deferred_path(terms, five_year[:, p].tolist(), {name: array[:, p] for name, array in out.items()})
    return {name: np.round(array, 2) for name, array in out.items()}


def deferred_path(terms: DeferredTerms, five_year: list[float], out: Stream) -> None:
    """One path: credit, then deaths, withdrawals and surrenders on the credited account value."""
    value, contracts, pool = terms.account_value, terms.contracts, terms.start_yield
    balances(terms, 0, value, out)
    for m in range(1, MONTHS + 1):
        credited = max(terms.guarantee, pool - terms.margin)  # set on the yield of the month before
        charge = charge_at(terms, m - 1)
        gap = five_year[m] + COMPETITOR_MARGIN - credited - charge / CHARGE_YEARS
        lapse, death = lapse_rate(gap) / 12.0, min(0.20, terms.death * 1.06 ** ((m - 1) // 12)) / 12.0
        value *= 1.0 + credited / 12.0
        dying, drawn = value * death, value * WITHDRAWAL / 12.0
        leaving = (value - dying - drawn) * lapse
        value -= dying + drawn + leaving
        out["death_benefit"][m], out["withdrawal"][m] = dying, drawn
        out["surrender_benefit"][m] = leaving * (1.0 - charge)
        out["expense"][m] = contracts * EXPENSE_PER_CONTRACT / 12.0 * (1.0 + INFLATION) ** ((m - 1) // 12)
        out["commission"][m] = value * COMMISSION / 12.0
        contracts *= (1.0 - death) * (1.0 - lapse)
        pool += (five_year[m] + NEW_MONEY_MARGIN - pool) / TURNOVER_MONTHS
        balances(terms, m, value, out)


def balances(terms: DeferredTerms, m: int, value: float, out: Stream) -> None:
    """Account value, surrender value and reserve: the surrender value, or a share of the account value if more."""
    surrender = value * (1.0 - charge_at(terms, m))
    out["account_value"][m], out["surrender_value"][m] = value, surrender
    out["reserve_statutory"][m] = max(surrender, value * terms.reserve_factor)


def payout_stream() -> Stream:
    """Life annuities in payment: one stream for every path; reserve is the present value at the locked rate."""
    alive, payments = 1.0, [0.0]
    for m in range(1, MONTHS + 241):  # a tail beyond the horizon stays in the reserve
        alive *= 1.0 - min(1.0, PAYOUT_DEATH / 12.0 * (1.0 + PAYOUT_AGEING) ** m)
        payments.append(alive)
    discount = (1.0 + PAYOUT_RATE) ** (-1.0 / 12.0)
    reserve = [0.0] * len(payments)
    for m in range(len(payments) - 2, -1, -1):
        reserve[m] = (reserve[m + 1] + payments[m + 1]) * discount
    scale = PAYOUT_RESERVE / reserve[0]
    paid, held = (np.array([x[: MONTHS + 1]]).T * scale for x in (payments, reserve))
    expense = paid * 0.012
    return rounded({"annuity_payment": paid, "expense": expense, "reserve_statutory": held})


def guaranteed_stream() -> Stream:
    """Guaranteed interest contracts: account values that mature quarter by quarter, larger in the early years."""
    names = ("maturity_benefit", "expense", "reserve_statutory", "account_value")
    out = {name: np.zeros((MONTHS + 1, 1)) for name in names}
    grow = (1.0 + GUARANTEED_RATE) ** (1.0 / 12.0)
    for k in range(1, GUARANTEED_CONTRACTS + 1):
        account = 1e6 * (13.4 - 0.19 * k + (1.5 if k % 4 == 2 else 0.0))
        for m in range(3 * k + 1):
            out["reserve_statutory"][m, 0] += account if m < 3 * k else 0.0
            if m == 3 * k:
                out["maturity_benefit"][m, 0] += account
            account *= grow
    held = out["reserve_statutory"]
    out["account_value"] = held.copy()
    out["expense"][1:] = held[:-1] * 0.0010 / 12.0
    return rounded(out)


def rounded(stream: Stream) -> Stream:
    return {name: np.round(array, 2) for name, array in stream.items()}
