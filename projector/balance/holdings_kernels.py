"""From securities and call events to the flows and balances of every sale group, at a held share of one."""

from __future__ import annotations

from projector.arithmetic.kernels import Floats, Integers, kernel

# rows of the table of items; all in currency, before any sale
COUPON = 0  # coupons, and accrued interest paid at a call
PRINCIPAL = 1  # redemption at maturity
CALL_PAR = 2  # par paid at a call
CALL_PREMIUM = 3  # paid above par at a call
CALLED_BOOK = 4  # statement value of what was called
DEFAULT_PAR = 5  # par that left by default at the opening of the month
DEFAULT_BOOK = 6  # its statement value
RECOVERABLE = 7  # expected recovery on it, paid after the lag
ACCRETION = 8  # statement income beyond the coupon earned
PAR = 9  # par outstanding at the month end
BOOK = 10  # statement value at the month end
ACCRUED = 11  # accrued interest at the month end
PRINCIPAL_BOOK = 12  # statement value of what was redeemed at maturity
DEFAULT_ACCRUED = 13  # accrued interest lost with defaulted par
ITEMS = 14


@kernel
def add_holding(
    last_month: int, path: int, group: int, par: float, maturity: int, survival: Floats, recovery: float,
    coupon: Floats, accrued: Floats, price: Floats, book: Floats, accretion: Floats, event_month: Integers,
    event_share: Floats, first_event: int, stop_event: int, out: Floats,
) -> None:  # fmt: skip
    """Adds one holding (a security's par in one segment) on one path to its group; out [item, month, group, path].

    Events first_event..stop_event-1 are this holding's calls on this path in order of month; each takes a share of
    the par then outstanding. Order inside a month: default on opening par, payments on what survived, then calls (C2).
    """
    unit = par / 100.0
    alive = 1.0
    e = first_event
    out[PAR, 0, group, path] += par
    out[BOOK, 0, group, path] += unit * book[0]
    out[ACCRUED, 0, group, path] += unit * accrued[0]
    stop = last_month if last_month < maturity else maturity
    for m in range(1, stop + 1):
        now = unit * alive * survival[m]
        lost = unit * alive * (survival[m - 1] - survival[m])
        out[DEFAULT_PAR, m, group, path] += 100.0 * lost
        out[DEFAULT_BOOK, m, group, path] += lost * book[m - 1]
        out[DEFAULT_ACCRUED, m, group, path] += lost * accrued[m - 1]
        out[RECOVERABLE, m, group, path] += 100.0 * lost * recovery
        out[COUPON, m, group, path] += now * coupon[m]
        out[ACCRETION, m, group, path] += now * accretion[m]
        if m == maturity:
            out[PRINCIPAL, m, group, path] += 100.0 * now
            out[PRINCIPAL_BOOK, m, group, path] += 100.0 * now
            return
        while e < stop_event and event_month[e] == m:
            called = now * event_share[e]
            out[CALL_PAR, m, group, path] += 100.0 * called
            out[CALL_PREMIUM, m, group, path] += called * (price[m] - 100.0)
            out[COUPON, m, group, path] += called * accrued[m]
            out[CALLED_BOOK, m, group, path] += called * book[m]
            alive = alive * (1.0 - event_share[e])
            now = unit * alive * survival[m]
            e += 1
        out[PAR, m, group, path] += 100.0 * now
        out[BOOK, m, group, path] += now * book[m]
        out[ACCRUED, m, group, path] += now * accrued[m]
        if alive == 0.0:
            return


@kernel
def add_holdings(
    last_month: int, security: Integers, group: Integers, par: Floats, maturity: Integers, survival: Floats,
    recovery: Floats, coupon: Floats, accrued: Floats, price: Floats, book: Floats, accretion: Floats,
    event_month: Integers, event_share: Floats, event_start: Integers, out: Floats,
) -> None:  # fmt: skip
    """Adds every holding on every path of `out`. event_start [security, path + 1] indexes the events of a security.

    survival, coupon, accrued, price are [security, month]; book, accretion [holding, month].
    """
    paths = out.shape[3]
    for n in range(security.shape[0]):
        s = security[n]
        for p in range(paths):
            add_holding(
                last_month, p, group[n], par[n], maturity[s], survival[s], recovery[s], coupon[s], accrued[s], price[s],
                book[n], accretion[n], event_month, event_share, event_start[s, p], event_start[s, p + 1], out,
            )  # fmt: skip


@kernel
def group_sums(item: Floats, held: Floats, segment: Integers, out: Floats) -> None:
    """Sum over the groups of each segment of item x held share, in group order; [group, path] -> [segment, path]."""
    for s in range(out.shape[0]):
        for p in range(out.shape[1]):
            out[s, p] = 0.0
    for g in range(item.shape[0]):
        for p in range(item.shape[1]):
            out[segment[g], p] += item[g, p] * held[g, p]


@kernel
def group_values(
    unit: Integers, group: Integers, scale: Floats, value: Floats, left: Floats, out: Floats
) -> None:  # fmt: skip
    """Adds holdings to their groups: scale x value of the security x share not called; out [group, path]."""
    for n in range(unit.shape[0]):
        for p in range(out.shape[1]):
            out[group[n], p] += scale[n] * value[unit[n], p] * left[unit[n], p]
