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

from projector.bonds.schedule import DatedBond, dated_bond
from projector.study.clock import month_end, month_of
from projector.study.daycounts import months_before

Array = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

STEPS = (12, 6, 3, 1)


@dataclass(frozen=True)
class MappedBonds:
    """All securities in the order (grid step, maturity month, security id) (C3).

    coupon, accrued, clean_price  [security, month 0..last]; clean_price is inf where no right is live
    flow                          coupon plus redemption
    dirty_price                   clean price plus accrued
    """

    ids: tuple[str, ...]
    ratings: tuple[str, ...]
    maturity: IntArray  # [month]
    step: IntArray  # [month] grid step
    coupon_step: IntArray  # [month] step of payments alone
    coupon: Array
    accrued: Array
    clean_price: Array
    flow: Array
    dirty_price: Array

    @property
    def last_month(self) -> int:
        return self.coupon.shape[1] - 1

    @cached_property
    def right_ends(self) -> tuple[IntArray, IntArray]:
        """First and last month with a right, 0 and 0 where there is none. shape (security,) each"""
        live = np.isfinite(self.clean_price)
        has = live.any(axis=1)
        last = live.shape[1] - 1 - live[:, ::-1].argmax(axis=1)
        return np.where(has, live.argmax(axis=1), 0), np.where(has, last, 0)

    def rights_left(self, month: int) -> IntArray:
        """Months from the next right to the last, at least 0: the length of a solve. shape (security,)"""
        first, last = self.right_ends
        return np.maximum(last - np.maximum(first, month + 1), 0)

    def with_rights(self) -> npt.NDArray[np.bool_]:
        """Which securities have any right at a stated price after the valuation date."""
        return np.asarray(np.isfinite(self.clean_price).any(axis=1))


def dated(row: dict[str, Any]) -> DatedBond:
    """One row of the securities table, dated."""
    return dated_bond(
        coupon_rate=float(row["coupon_rate"]),
        frequency=int(row["coupon_frequency"]),
        day_count=row["day_count"],
        end_of_month=bool(row["end_of_month"]),
        issue=row["issue_date"],
        maturity=row["maturity_date"],
        first_coupon=row["first_coupon_date"],
    )


def plain_records(table: pd.DataFrame) -> list[dict[str, Any]]:
    """Rows as dictionaries with dates as `datetime.date`, None where empty."""
    out = table.copy()
    for name in table.columns:
        if pd.api.types.is_datetime64_any_dtype(table[name]):
            days = [None if pd.isna(d) else d.date() for d in table[name]]
            out[name] = pd.Series(days, index=out.index, dtype=object)
    return [{str(k): v for k, v in record.items()} for record in out.to_dict("records")]


def payments(row: dict[str, Any], valuation: date, coupon: Array, accrued: Array) -> int:
    """Fills one security's coupons and accrued interest by month; returns the step of its payments [month].

    Interest accrues evenly by mapped months between the month a period begins and the month it pays.
    """
    frequency, rate = int(row["coupon_frequency"]), float(row["coupon_rate"])
    maturity = month_of(row["maturity_date"], valuation)
    if frequency == 0:
        return 12
    period, amount = 12 // frequency, 100.0 * rate / frequency
    coupon[np.arange(maturity, 0, -period)] = amount
    months = np.arange(maturity)
    accrued[:maturity] = amount * ((months - maturity) % period) / period
    first = row["first_coupon_date"]
    if first is not None and month_of(first, valuation) > 0:
        first_payment(row, valuation, month_of(first, valuation), coupon, accrued)
    return period


def first_payment(row: dict[str, Any], valuation: date, pay: int, coupon: Array, accrued: Array) -> None:
    """Puts an odd first coupon still ahead in place of the regular ones up to its month."""
    amount, begins = dated(row).coupons[0].amount, month_of(row["issue_date"], valuation)
    coupon[:pay] = 0.0
    coupon[pay] = amount
    for m in range(max(begins, 0), pay):
        accrued[m] = amount * (m - begins) / (pay - begins)


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


def rights(row: dict[str, Any], schedule: list[dict[str, Any]], valuation: date, price: Array) -> None:
    """Fills one security's clean call prices by month; of two rows in a month the later start, then the lower price."""
    begun: dict[int, date] = {}
    for right in schedule:
        if right["style"] == "make_whole":
            continue  # never exercised before the par-call date (C6)
        for m in right_months(right, row, valuation):
            starts, k = right["first_date"], float(right["price"])
            if m not in begun or starts > begun[m] or (starts == begun[m] and k < price[m]):
                begun[m] = starts
                price[m] = k
    par_call = row["par_call_date"]
    if isinstance(par_call, date):
        for m in range(max(1, month_of(par_call, valuation)), month_of(row["maturity_date"], valuation)):
            price[m] = min(price[m], 100.0)


def grid_step(maturity: int, coupon: Array, price: Array) -> int:
    """Largest of 12, 6, 3, 1 months on which all payments and rights fall, counted back from maturity. [month]"""
    months = np.flatnonzero((coupon > 0.0) | np.isfinite(price))
    return next(s for s in STEPS if ((maturity - months) % s == 0).all())


def map_bonds(securities: pd.DataFrame, call_rights: pd.DataFrame, valuation: date) -> MappedBonds:
    """Every security on mapped months."""
    table = plain_records(securities)
    names = np.array([row["security_id"] for row in table], dtype=str)
    maturity = np.array([month_of(row["maturity_date"], valuation) for row in table], dtype=np.int64)
    last, count = int(maturity.max()), len(table)
    coupon, accrued = np.zeros((count, last + 1)), np.zeros((count, last + 1))
    price = np.full((count, last + 1), np.inf)
    step, coupon_step = np.empty(count, dtype=np.int64), np.empty(count, dtype=np.int64)
    schedules: dict[str, list[dict[str, Any]]] = {}
    for right in plain_records(call_rights):
        schedules.setdefault(right["security_id"], []).append(right)
    for i, row in enumerate(table):
        coupon_step[i] = payments(row, valuation, coupon[i], accrued[i])
        if row["security_id"] in schedules or isinstance(row["par_call_date"], date):
            rights(row, schedules.get(row["security_id"], []), valuation, price[i])
        step[i] = grid_step(int(maturity[i]), coupon[i], price[i])
    flow = coupon.copy()
    flow[np.arange(count), maturity] += 100.0
    order = np.lexsort((names, maturity, step))
    return MappedBonds(
        ids=tuple(str(names[i]) for i in order),
        ratings=tuple(str(table[i]["rating"]) for i in order),
        maturity=maturity[order],
        step=step[order],
        coupon_step=coupon_step[order],
        coupon=coupon[order],
        accrued=accrued[order],
        clean_price=price[order],
        flow=flow[order],
        dirty_price=(price + accrued)[order],
    )
