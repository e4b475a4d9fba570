"""Statement value of a lot through time by effective yield to the date that gives the lowest value."""

from __future__ import annotations

import numpy as np

from projector.arithmetic.kernels import Floats, Integers, kernel

TIE = 1e-10  # yields closer than this, per month, count as equal: the later date is taken
LEAST_GROWTH = 1e-9


@kernel
def value_to(start: int, end: int, redemption: float, flow: Floats, growth: float) -> float:
    """Value at `start` of the coupons in (start, end] and `redemption` at `end`, at a monthly growth factor."""
    v = 1.0 / growth
    factor = 1.0
    total = 0.0
    for t in range(start + 1, end + 1):
        factor = factor * v
        total += flow[t] * factor
    return total + redemption * factor


@kernel
def growth_to(start: int, end: int, redemption: float, flow: Floats, value: float) -> float:
    """Monthly growth factor at which the payments up to `end` are worth `value` at `start` (bisection, then secant).

    Value falls as growth rises, from infinity at 0 to nothing; the bracket is widened until it holds the root.
    """
    low, high = 0.5, 1.5
    while value_to(start, end, redemption, flow, low) < value and low > LEAST_GROWTH:
        low = 0.5 * low
    while value_to(start, end, redemption, flow, high) > value and high < 1e6:
        high = 2.0 * high
    guess = 0.5 * (low + high)
    for _ in range(200):
        miss = value_to(start, end, redemption, flow, guess) - value
        if miss > 0.0:
            low = guess
        else:
            high = guess
        step = 1e-7 * guess
        slope = (value_to(start, end, redemption, flow, guess + step) - value - miss) / step
        better = guess - miss / slope if slope < 0.0 else 0.5 * (low + high)
        if not (low < better < high):
            better = 0.5 * (low + high)
        if abs(better - guess) <= 1e-15 * guess:
            return better
        guess = better
    return guess


@kernel
def worst_date(
    start: int, maturity: int, last: float, price: Floats, accrued: Floats, flow: Floats, value: float
) -> tuple[int, float]:
    """Month with the lowest yield among rights after `start` and maturity, and its monthly growth factor.

    flow   coupons and scheduled repayments before maturity; last  repaid at maturity
    price  clean call prices on the par left (inf = no right); value  dirty value at `start` [per 100]
    Starts at maturity; one pass over all rights at the yield found so far shows which of them yields less.
    """
    month = maturity
    growth = growth_to(start, maturity, last, flow, value)
    for _ in range(100):
        v = 1.0 / growth
        factor = 1.0
        paid = 0.0
        deepest = 0.0
        candidate = -1
        for t in range(start + 1, maturity):
            factor = factor * v
            paid += flow[t] * factor
            if price[t] < np.inf:
                # at the growth found so far this redemption is worth less than the value paid: it yields less
                gap = paid + (price[t] + accrued[t]) * factor - value
                if gap < deepest:
                    deepest = gap
                    candidate = t
        if candidate < 0:
            return month, growth
        lower = growth_to(start, candidate, price[candidate] + accrued[candidate], flow, value)
        if lower > growth - TIE:
            return month, growth
        month, growth = candidate, lower
    return month, growth


@kernel
def statement_path(
    maturity: int, last_month: int, last: float, price: Floats, accrued: Floats, coupon: Floats, flow: Floats,
    value: float, book: Floats, accretion: Floats, growth_at: Floats, worst: Integers,
) -> None:  # fmt: skip
    """Clean statement value of one lot, per 100 of par, at months 0..last_month, as long as it is not called.

    value      clean statement value at month 0
    flow       coupons and scheduled repayments before maturity; last  repaid at maturity
    accretion  income from discount or premium in each month: effective interest less coupon earned
    growth_at  monthly growth factor in force over the month that ends there (index 0: in force at the start)
    worst      month to which the lot is amortised, seen from each month end

    When the month it was amortised to passes without a call, it goes on from the value then and is re-solved.
    """
    month, growth = worst_date(0, maturity, last, price, accrued, flow, value + accrued[0])
    book[0] = value
    growth_at[0] = growth
    worst[0] = month
    accretion[0] = 0.0
    dirty = value + accrued[0]
    for m in range(1, last_month + 1):
        if m > maturity:
            book[m] = 0.0
            accretion[m] = 0.0
            growth_at[m] = growth
            worst[m] = maturity
            continue
        interest = dirty * (growth - 1.0)
        earned = coupon[m] + accrued[m] - accrued[m - 1]
        accretion[m] = interest - earned
        growth_at[m] = growth
        dirty = dirty + interest - flow[m]
        book[m] = dirty - accrued[m]
        if m == maturity:
            book[m] = 0.0
        elif m == month:
            book[m] = price[m]  # amortised to it exactly; sheds the rounding of the roll
            dirty = price[m] + accrued[m]
            month, growth = worst_date(m, maturity, last, price, accrued, flow, dirty)
        worst[m] = month


@kernel
def statement_paths(
    security: Integers, value: Floats, maturity: Integers, last_month: int, last: Floats, price: Floats,
    accrued: Floats, coupon: Floats, flow: Floats, book: Floats, accretion: Floats, growth_at: Floats, worst: Integers,
) -> None:  # fmt: skip
    """`statement_path` for every lot; tables of terms are [security, month], results [lot, month]."""
    for n in range(security.shape[0]):
        s = security[n]
        statement_path(
            maturity[s], last_month, last[s], price[s], accrued[s], coupon[s], flow[s], value[n], book[n],
            accretion[n], growth_at[n], worst[n],
        )  # fmt: skip
