"""Surplus through time and what it is worth today: pure functions of balances (definitions: DEVELOPERS.md, Money).

Arrays are [month 0..M, .., path] or [year end, .., path]; the year ends are month 0 and months 12, 24, ...
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]


def statement_surplus(balances: Mapping[str, Array]) -> Array:
    """Statement assets + cash + accrued + recoveries due - statutory reserve - borrowing - shortfall. [currency]

    Interest maintenance reserve, asset valuation reserve and tax payable are zero in this version.
    Source: annual statement balance sheet; VM-30 on negative interim surplus (both cited from memory).
    """
    return (
        balances["statement_start"] + balances["statement_bought"] + balances["accrued"] + balances["recoveries"]
        + balances["cash"] - balances["borrowing"] - balances["shortfall"] - balances["reserve"]
    )  # fmt: skip


def market_surplus(market_assets: Array, balances: Mapping[str, Array], liability: Array, month: int) -> Array:
    """Market assets (incl. accrued) + recoveries due + cash - borrowing - shortfall - liability at its closing-out
    value. [currency], shape (segment, path)
    """
    return (
        market_assets + balances["recoveries"][month] + balances["cash"][month] - balances["borrowing"][month]
        - balances["shortfall"][month] - liability
    )  # fmt: skip


def lowest(at_year_ends: Array) -> tuple[Array, IntArray]:
    """Lowest value over the first axis and where it stands, the first of equals."""
    at = np.argmin(at_year_ends, axis=0)
    return np.min(at_year_ends, axis=0), at.astype(np.int64)


def years_negative(at_year_ends: Array) -> IntArray:
    """Number of year ends below zero."""
    return (at_year_ends < 0.0).sum(axis=0)


def earned_rate_discount(earned_at_year_ends: Array) -> Array:
    """Product of 1 / (1 + e_t) over the years. [-], shape of one year end

    earned_at_year_ends  net earned rates of years 1..T [1/year], each above -1
    Source: American Academy of Actuaries, Asset Adequacy Analysis practice note, on discounting ending surplus (cited
    from memory).
    """
    out = np.ones(earned_at_year_ends.shape[1:])
    for e in earned_at_year_ends:
        out = out / (1.0 + e)
    return out


def one_month_discount(short_rate: Array, constant: float) -> Array:
    """Discounts to every month at the path's one-month rates plus a constant. [-], shape (month 0..M, path)

    short_rate  over month m [1/month], row 0 unused; constant [1/year], simple within the month
    """
    out = np.ones(short_rate.shape)
    for m in range(1, short_rate.shape[0]):
        out[m] = out[m - 1] / (1.0 + short_rate[m] + constant / 12.0)
    return out


def present_value(flows: Array, discount: Array) -> Array:
    """Sum over months of flow x discount, in month order. shape of one month; discount [month, path]"""
    total = np.zeros(flows.shape[1:])
    for m in range(flows.shape[0]):
        total = total + flows[m] * discount[m]
    return total
