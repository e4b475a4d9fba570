"""From securities and call events to the flows and balances of every sale group, at a held share of one."""

from __future__ import annotations

from typing import NamedTuple

from projector.arithmetic.kernels import Flags, Floats, Integers, kernel

PUT = 1  # of the kinds of events, which `decisions` names

# rows of the table of items; all in currency, before any sale
COUPON = 0  # coupons, and accrued interest paid at a call
PRINCIPAL = 1  # scheduled repayments and redemption at maturity
CALL_PAR = 2  # par paid at a call or a doubled sinking payment
CALL_PREMIUM = 3  # paid above par at a call
CALLED_BOOK = 4  # statement value of what was called
DEFAULT_PAR = 5  # par that left by default at the opening of the month
DEFAULT_BOOK = 6  # its statement value
RECOVERABLE = 7  # expected recovery on it, paid after the lag
ACCRETION = 8  # statement income beyond the coupon earned
PAR = 9  # par outstanding at the month end
BOOK = 10  # statement value at the month end
ACCRUED = 11  # accrued interest at the month end
PRINCIPAL_BOOK = 12  # statement value of what was repaid on schedule
DEFAULT_ACCRUED = 13  # accrued interest lost with defaulted par
PUT_CASH = 14  # paid for par that was put
PUT_PAR = 15  # that par
PUT_BOOK = 16  # its statement value
ITEMS = 17


class HeldTerms(NamedTuple):
    """Securities as holdings need them: [security, month], per 100 of the par of month 0, or [security].

    redemption  paid at `maturity` for 100 of the par left; announced: as a call
    """

    maturity: Integers
    survival: Floats
    recovery: Floats
    coupon: Floats
    accrued: Floats
    principal: Floats
    outstanding: Floats
    redemption: Floats
    announced: Flags


class Left(NamedTuple):
    """Par that leaves by decisions, as `decisions.CallEvents` has it."""

    month: Integers
    part: Floats
    kind: Integers
    price: Floats
    start: Integers


@kernel
def add_holding(
    last_month: int, path: int, group: int, par: float, s: int, terms: HeldTerms, book: Floats, accretion: Floats,
    left: Left, first_event: int, stop_event: int, out: Floats,
) -> None:  # fmt: skip
    """Adds one holding (a security's par in one segment) on one path to its group; out [item, month, group, path].

    Events first_event..stop_event-1 are this holding's on this path in order of payment; each takes a part of the par
    of month 0. Order inside a month: default on opening par, payments on what survived, then calls and puts (C2).
    """
    unit = par / 100.0
    alive = 1.0
    e = first_event
    survival, coupon, accrued = terms.survival[s], terms.coupon[s], terms.accrued[s]
    principal, outstanding, recovery = terms.principal[s], terms.outstanding[s], terms.recovery[s]
    maturity = terms.maturity[s]
    out[PAR, 0, group, path] += par
    out[BOOK, 0, group, path] += unit * book[0]
    out[ACCRUED, 0, group, path] += unit * accrued[0]
    stop = last_month if last_month < maturity else maturity
    for m in range(1, stop + 1):
        now = unit * alive * survival[m]
        lost = unit * alive * (survival[m - 1] - survival[m])
        out[DEFAULT_PAR, m, group, path] += 100.0 * lost * outstanding[m - 1]
        out[DEFAULT_BOOK, m, group, path] += lost * book[m - 1]
        out[DEFAULT_ACCRUED, m, group, path] += lost * accrued[m - 1]
        out[RECOVERABLE, m, group, path] += 100.0 * lost * outstanding[m - 1] * recovery
        out[COUPON, m, group, path] += now * coupon[m]
        out[ACCRETION, m, group, path] += now * accretion[m]
        if m == maturity and terms.announced[s]:
            price = terms.redemption[s]
            out[CALL_PAR, m, group, path] += now * principal[m]
            out[CALL_PREMIUM, m, group, path] += now * principal[m] / 100.0 * (price - 100.0)
            out[CALLED_BOOK, m, group, path] += now * principal[m] / 100.0 * price
            return
        out[PRINCIPAL, m, group, path] += now * principal[m]
        out[PRINCIPAL_BOOK, m, group, path] += now * principal[m]
        if m == maturity:
            return
        while e < stop_event and left.month[e] == m:
            gone = unit * survival[m] * left.part[e]
            par_gone = 100.0 * gone * outstanding[m]
            out[COUPON, m, group, path] += gone * accrued[m]
            if left.kind[e] == PUT:
                out[PUT_CASH, m, group, path] += par_gone / 100.0 * left.price[e]
                out[PUT_PAR, m, group, path] += par_gone
                out[PUT_BOOK, m, group, path] += gone * book[m]
            else:
                out[CALL_PAR, m, group, path] += par_gone
                out[CALL_PREMIUM, m, group, path] += gone * outstanding[m] * (left.price[e] - 100.0)
                out[CALLED_BOOK, m, group, path] += gone * book[m]
            alive = alive - left.part[e]
            now = unit * alive * survival[m]
            e += 1
        out[PAR, m, group, path] += 100.0 * now * outstanding[m]
        out[BOOK, m, group, path] += now * book[m]
        out[ACCRUED, m, group, path] += now * accrued[m]
        if alive == 0.0:
            return


@kernel
def add_holdings(
    last_month: int, security: Integers, group: Integers, par: Floats, terms: HeldTerms, book: Floats,
    accretion: Floats, left: Left, out: Floats,
) -> None:  # fmt: skip
    """Adds every holding on every path of `out`. left.start [security, path + 1] indexes the events of a security.

    book, accretion  [holding, month]
    """
    paths = out.shape[3]
    for n in range(security.shape[0]):
        s = security[n]
        for p in range(paths):
            add_holding(
                last_month, p, group[n], par[n], s, terms, book[n], accretion[n], left, left.start[s, p],
                left.start[s, p + 1], out,
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
    unit: Integers, group: Integers, scale: Floats, value: Floats, out: Floats
) -> None:  # fmt: skip
    """Adds holdings to their groups: scale x value of the security; out [group, path]."""
    for n in range(unit.shape[0]):
        for p in range(out.shape[1]):
            out[group[n], p] += scale[n] * value[unit[n], p]
