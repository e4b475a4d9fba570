"""Securities on the projection's clock: payments, accrued interest and rights by month, per 100 of par (C1).

A payment or right dated in (end of month m-1, end of month m] belongs to month m. Accrued interest counts mapped
months. Street figures on exact dates are elsewhere (`yields`, `worst`).
"""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date
from functools import cached_property
from typing import Any

import numpy as np
import numpy.typing as npt
import pandas as pd

from projector.bonds.exercise.path_kernels import UnitTables
from projector.bonds.exercise.settle_kernels import NEVER_PUT
from projector.bonds.schedule import DatedBond, dated_bond
from projector.study.clock import month_end, month_of
from projector.study.daycounts import months_before
from projector.study.records import Tables
from projector.study.specialterms import notice_months

Array = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

STEPS = (12, 6, 3, 1)


@dataclass(frozen=True)
class MappedBonds:
    """All securities in the order (grid step, maturity month, security id) (C3).

    Tables are [security, month 0..last]; coupon, accrued, principal and flow per 100 of the par outstanding at month 0.

    maturity      last payment: of the terms, or of a call already announced
    redemption    paid then for 100 of the par left: 100, or the announced price
    clean_price   of a call paid in a month, per 100 of the par left; inf where there is none
    put_price     the same of a put; -1e18 where there is none
    outstanding   share of the par of month 0 left after the month's scheduled payment
    principal     scheduled repayment of par, the last one included
    double_share  share of the par left that the issuer may retire at 100 beside a sinking payment
    call_lag      months from an issuer's decision to the payment, put_lag from the holder's
    """

    ids: tuple[str, ...]
    ratings: tuple[str, ...]
    maturity: IntArray  # [month]
    step: IntArray  # [month] grid step
    coupon_step: IntArray  # [month] step of payments alone
    coupon: Array
    accrued: Array
    clean_price: Array
    put_price: Array
    outstanding: Array
    principal: Array
    redemption: Array
    double_share: Array
    call_lag: IntArray
    put_lag: IntArray
    announced: npt.NDArray[np.bool_]  # called before month 0, paid at `maturity`

    @cached_property
    def flow(self) -> Array:
        """Promised payments: coupon and principal, the last at its price."""
        out = self.coupon + self.principal
        last = np.arange(self.maturity.size), self.maturity
        out[last] += self.principal[last] * (self.redemption / 100.0 - 1.0)
        return out

    @cached_property
    def dirty_price(self) -> Array:
        """Clean call price on the par left, plus accrued. [per 100 of the par of month 0]"""
        priced = np.isfinite(self.clean_price)
        return np.where(priced, np.where(priced, self.clean_price, 0.0) * self.outstanding + self.accrued, np.inf)

    @cached_property
    def dirty_put(self) -> Array:
        """The same for puts, -1e18 where there is none."""
        return np.where(self.put_price > NEVER_PUT, self.put_price * self.outstanding + self.accrued, NEVER_PUT)

    @cached_property
    def tables(self) -> UnitTables:
        """As the kernels take them."""
        return UnitTables(
            self.maturity, self.flow, self.dirty_price, self.dirty_put, self.outstanding, self.double_share
        )

    @cached_property
    def puttable(self) -> npt.NDArray[np.bool_]:
        """Which securities the holder may put. shape (security,)"""
        return np.asarray((self.put_price > NEVER_PUT).any(axis=1))

    @cached_property
    def may_double(self) -> npt.NDArray[np.bool_]:
        """Which securities have a sinking payment that may be doubled. shape (security,)"""
        return np.asarray((self.double_share > 0.0).any(axis=1))

    @cached_property
    def decisions(self) -> npt.NDArray[np.bool_]:
        """Whether anyone can decide anything in a month. [security, month]"""
        out = self.double_share > 0.0
        for live, lags in ((np.isfinite(self.clean_price), self.call_lag), (self.put_price > NEVER_PUT, self.put_lag)):
            for lag in sorted(set(lags.tolist())):
                rows = np.flatnonzero(lags == lag)
                out[rows, : out.shape[1] - lag] |= live[rows, lag:]
        out[:, 0] = False
        return out

    @property
    def last_month(self) -> int:
        return self.coupon.shape[1] - 1

    @cached_property
    def right_ends(self) -> tuple[IntArray, IntArray]:
        """First and last month in which a right can be decided, 0 and 0 where none is. shape (security,) each"""
        live = self.decisions
        has = live.any(axis=1)
        last = live.shape[1] - 1 - live[:, ::-1].argmax(axis=1)
        return np.where(has, live.argmax(axis=1), 0), np.where(has, last, 0)

    @property
    def last_decision(self) -> IntArray:
        """Last month in which a right can be decided, 0: none. shape (security,)"""
        return self.right_ends[1]

    def rights_left(self, month: int) -> IntArray:
        """Months from the next right to the last, at least 0: the length of a solve. shape (security,)"""
        first, last = self.right_ends
        return np.maximum(last - np.maximum(first, month + 1), 0)

    def with_rights(self) -> npt.NDArray[np.bool_]:
        """Which securities can leave by anyone's decision after the valuation date."""
        return np.asarray(self.right_ends[1] > 0)


@dataclass(frozen=True)
class Terms:
    """Everything the tables say about one security beside its row, as plain records."""

    row: dict[str, Any]
    calls: tuple[dict[str, Any], ...] = ()
    puts: tuple[dict[str, Any], ...] = ()
    sinking: tuple[dict[str, Any], ...] = ()
    steps: tuple[dict[str, Any], ...] = ()
    announced: dict[str, Any] | None = None

    def dated(self) -> DatedBond:
        """On its exact dates, as if nothing had been announced."""
        row = self.row
        return dated_bond(
            coupon_rate=float(row["coupon_rate"]),
            frequency=int(row["coupon_frequency"]),
            day_count=row["day_count"],
            end_of_month=bool(row["end_of_month"]),
            issue=row["issue_date"],
            maturity=row["maturity_date"],
            first_coupon=row["first_coupon_date"],
            steps=tuple((r["start_date"], float(r["coupon_rate"])) for r in self.steps),
            sinking=tuple((r["payment_date"], float(r["share_of_par"])) for r in self.sinking),
        )


def security_terms(tables: Tables) -> dict[str, Terms]:
    """The terms of every security by identifier, in the order of the securities table."""
    parts: dict[str, dict[str, list[dict[str, Any]]]] = {}
    for name in ("call_rights", "put_rights", "sinking_payments", "coupon_steps", "announced_calls"):
        for record in plain_records(getattr(tables, name)):
            parts.setdefault(record["security_id"], {}).setdefault(name, []).append(record)
    out = {}
    for row in plain_records(tables.securities):
        own = parts.get(row["security_id"], {})
        announced = next(iter(own.get("announced_calls", [])), None)
        calls, puts, sinking, steps = (
            tuple(own.get(n, [])) for n in ("call_rights", "put_rights", "sinking_payments", "coupon_steps")
        )
        out[row["security_id"]] = Terms(row, calls, puts, sinking, steps, announced)
    return out


def plain_records(table: pd.DataFrame) -> list[dict[str, Any]]:
    """Rows as dictionaries with dates as `datetime.date`, None where empty."""
    out = table.copy()
    for name in table.columns:
        if pd.api.types.is_datetime64_any_dtype(table[name]):
            days = [None if pd.isna(d) else d.date() for d in table[name]]
            out[name] = pd.Series(days, index=out.index, dtype=object)
    return [{str(k): v for k, v in record.items()} for record in out.to_dict("records")]


@dataclass(frozen=True)
class Months:
    """Tables of one security, month 0..last; as in `MappedBonds`, filled in place."""

    coupon: Array
    accrued: Array
    call: Array
    put: Array
    outstanding: Array
    principal: Array
    double_share: Array


def payments(terms: Terms, valuation: date, maturity: int, out: Months) -> int:
    """Fills one security's coupons and accrued interest by month, on all its par; returns their step [month].

    Interest accrues evenly by mapped months between the month a period begins and the month it pays.
    """
    row = terms.row
    frequency, rate = int(row["coupon_frequency"]), float(row["coupon_rate"])
    if frequency == 0:
        return 12
    period, amount = 12 // frequency, 100.0 * rate / frequency
    out.coupon[np.arange(maturity, 0, -period)] = amount
    months = np.arange(maturity)
    out.accrued[:maturity] = amount * ((months - maturity) % period) / period
    for step in terms.steps:  # in order of their dates: a later one overwrites
        start, stepped = month_of(step["start_date"], valuation), 100.0 * float(step["coupon_rate"]) / frequency
        paid = np.arange(maturity, max(start, 0), -period)
        out.coupon[paid] = stepped
        due = months[max(start, 0) :]
        out.accrued[due] = stepped * ((due - maturity) % period) / period
    first = row["first_coupon_date"]
    if first is not None and month_of(first, valuation) > 0:
        first_payment(terms, valuation, month_of(first, valuation), out)
    return period


def first_payment(terms: Terms, valuation: date, pay: int, out: Months) -> None:
    """Puts an odd first coupon still ahead in place of the regular ones up to its month."""
    amount, begins = terms.dated().coupons[0].amount, month_of(terms.row["issue_date"], valuation)
    out.coupon[:pay] = 0.0
    out.coupon[pay] = amount
    for m in range(max(begins, 0), pay):
        out.accrued[m] = amount * (m - begins) / (pay - begins)


def repayments(terms: Terms, valuation: date, maturity: int, out: Months) -> None:
    """Fills principal and what it leaves, and scales coupons and accrued interest to the par left."""
    for payment in terms.sinking:
        month, share = month_of(payment["payment_date"], valuation), float(payment["share_of_par"])
        out.principal[month] += 100.0 * share
        left = 1.0 - float(out.principal[: month + 1].sum()) / 100.0
        out.double_share[month] = min(share / left, 1.0) if payment["may_double"] else 0.0
    if terms.sinking:
        out.outstanding[:] = 1.0 - np.cumsum(out.principal) / 100.0
        out.coupon[1:] *= out.outstanding[:-1]
        out.accrued[:] *= out.outstanding
    out.principal[maturity] = 100.0 * out.outstanding[maturity]
    out.outstanding[maturity:] = 0.0


def right_months(right: dict[str, Any], row: dict[str, Any], valuation: date) -> list[int]:
    """Months after the valuation date on which one row of the call schedule can be used."""
    first, last = right["first_date"], right["last_date"]
    maturity = month_of(row["maturity_date"], valuation)
    start, stop = max(1, month_of(first, valuation)), min(maturity - 1, month_of(last, valuation))
    if right["style"] == "american":
        return [m for m in range(start, stop + 1) if first <= month_end(m, valuation) <= last]
    if right["style"] == "bermudan":
        frequency = int(row["coupon_frequency"])
        if frequency == 0:
            return []
        period = 12 // frequency
        months = range(maturity % period or period, stop + 1, period)
        eom, end = bool(row["end_of_month"]), row["maturity_date"]
        dates = {m: months_before(end, maturity - m, month_end=eom) for m in months if m >= start}
        return [m for m, day in dates.items() if first <= day <= last]
    return [start] if start <= stop and month_of(first, valuation) >= 1 else []


def rights(terms: Terms, schedule: tuple[dict[str, Any], ...], valuation: date, price: Array, lag: int) -> None:
    """Fills clean prices by month; of two rows in a month the later start, then the lower price.

    lag  months of notice: what would have to be announced by the valuation date, and was not, cannot be used
    """
    begun: dict[int, date] = {}
    for right in schedule:
        if right["style"] == "make_whole":
            continue  # never exercised before the par-call date (C6)
        for m in right_months(right, terms.row, valuation):
            starts, k = right["first_date"], float(right["price"])
            if m <= lag:
                continue
            if m not in begun or starts > begun[m] or (starts == begun[m] and k < price[m]):
                begun[m] = starts
                price[m] = k


def par_call(terms: Terms, valuation: date, price: Array, lag: int) -> None:
    """Fills in the window of calls at 100."""
    start = terms.row["par_call_date"]
    if isinstance(start, date):
        for m in range(max(1 + lag, month_of(start, valuation)), month_of(terms.row["maturity_date"], valuation)):
            price[m] = min(price[m], 100.0)


def lag_of(schedule: tuple[dict[str, Any], ...]) -> int:
    """Months from decision to payment: the notice of a security's rights, one for all of them."""
    return notice_months(int(schedule[0]["notice_days"])) if schedule else 0


def grid_step(maturity: int, months: Months, call_lag: int, put_lag: int) -> int:
    """Largest of 12, 6, 3, 1 months on which all payments and rights fall, counted back from maturity. [month]

    Calls and puts of different notice must still be decided on the same months.
    """
    dates = np.flatnonzero(
        (months.coupon > 0.0) | (months.principal > 0.0) | np.isfinite(months.call) | (months.put > NEVER_PUT)
    )
    return next(s for s in STEPS if ((maturity - dates) % s == 0).all() and (call_lag - put_lag) % s == 0)


def cut_at_announcement(terms: Terms, valuation: date, out: Months) -> tuple[int, float]:
    """A call announced is a payment like any other: month and price of the last one; no right is left.

    Interest up to it is paid with it.
    """
    assert terms.announced is not None
    month = month_of(terms.announced["payment_date"], valuation)
    out.coupon[month] += out.accrued[month]
    for table, empty in ((out.coupon, 0.0), (out.principal, 0.0), (out.double_share, 0.0)):
        table[month + 1 :] = empty
    out.principal[month] += 100.0 * out.outstanding[month]
    out.outstanding[month:] = 0.0
    out.accrued[month:] = 0.0
    out.call[:], out.put[:], out.double_share[:] = np.inf, NEVER_PUT, 0.0
    return month, float(terms.announced["price"])


def map_bonds(terms: dict[str, Terms], valuation: date) -> MappedBonds:
    """Every security on mapped months."""
    every = list(terms.values())
    names = np.array(list(terms), dtype=str)
    maturity = np.array([month_of(t.row["maturity_date"], valuation) for t in every], dtype=np.int64)
    last, count = int(maturity.max()), len(every)
    zeros = [np.zeros((count, last + 1)) for _ in range(4)]
    coupon, accrued, principal, double_share = zeros
    call, put = np.full((count, last + 1), np.inf), np.full((count, last + 1), NEVER_PUT)
    outstanding, redemption = np.ones((count, last + 1)), np.full(count, 100.0)
    step, coupon_step, call_lag, put_lag = (np.zeros(count, dtype=np.int64) for _ in range(4))
    for i, t in enumerate(every):
        out = Months(*(x[i] for x in (coupon, accrued, call, put, outstanding, principal, double_share)))
        life = int(maturity[i])
        coupon_step[i] = payments(t, valuation, life, out)
        repayments(t, valuation, life, out)
        call_lag[i], put_lag[i] = lag_of(t.calls), lag_of(t.puts)
        rights(t, t.calls, valuation, out.call, int(call_lag[i]))
        par_call(t, valuation, out.call, int(call_lag[i]))
        if t.puts:
            prices = np.full(last + 1, np.inf)
            rights(t, t.puts, valuation, prices, int(put_lag[i]))
            put[i] = np.where(np.isfinite(prices), prices, NEVER_PUT)
        if not np.isfinite(out.call).any():
            call_lag[i] = put_lag[i]
        elif not t.puts:
            put_lag[i] = call_lag[i]
        if t.announced is not None:
            maturity[i], redemption[i] = cut_at_announcement(t, valuation, out)
            call_lag[i] = put_lag[i] = 0
            if ((maturity[i] - np.flatnonzero(out.coupon)) % coupon_step[i]).any():  # repaid between two coupons
                coupon_step[i] = 1
        step[i] = grid_step(int(maturity[i]), out, int(call_lag[i]), int(put_lag[i]))
    order = np.lexsort((names, maturity, step))
    return MappedBonds(
        ids=tuple(str(names[i]) for i in order),
        ratings=tuple(str(every[i].row["rating"]) for i in order),
        maturity=maturity[order],
        step=step[order],
        coupon_step=coupon_step[order],
        coupon=coupon[order],
        accrued=accrued[order],
        clean_price=call[order],
        put_price=put[order],
        outstanding=outstanding[order],
        principal=principal[order],
        redemption=redemption[order],
        double_share=double_share[order],
        call_lag=call_lag[order],
        put_lag=put_lag[order],
        announced=np.array([t.announced is not None for t in every], dtype=np.bool_)[order],
    )
