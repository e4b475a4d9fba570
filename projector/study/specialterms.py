"""Terms beyond plain calls: puts, notice, sinking payments, coupon steps, announced calls; each in its own table."""

from __future__ import annotations

from collections.abc import Callable
from datetime import date
from functools import partial
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from projector.study.daycounts import months_before
from projector.study.errors import LocatedError
from projector.study.tablecheck import row_errors

DAYS_A_MONTH = 365.25 / 12.0
_TERMS = ["issue_date", "maturity_date", "coupon_frequency", "end_of_month"]
RowErrors = Callable[..., list[LocatedError]]
Mask = NDArray[np.bool_]


def notice_months(days: int) -> int:
    """Notice in whole months of the projection's clock: the nearest. [month]"""
    return int(days / DAYS_A_MONTH + 0.5)


def special_term_errors(frames: dict[str, pd.DataFrame], files: dict[str, str], valuation: date) -> list[LocatedError]:
    """Every fault of the optional tables, and of notice in the call rights."""
    terms = frames["securities"].set_index("security_id")[_TERMS]
    calls = frames["call_rights"]
    errors = _one_notice(calls, files["call_rights"])
    checks: dict[str, Callable[[pd.DataFrame, RowErrors], list[LocatedError]]] = {
        "put_rights": partial(_put_errors, calls=calls),
        "sinking_payments": partial(_sinking_errors, calls=calls, valuation=valuation),
        "coupon_steps": _step_errors,
        "announced_calls": partial(_announced_errors, valuation=valuation),
    }
    for name, check in checks.items():
        if name not in frames:
            continue
        joined = frames[name].join(terms, on="security_id")
        at = partial(row_errors, joined, file=files[name])
        errors += at(
            joined["maturity_date"].isna(),
            code="E401",
            column="security_id",
            problem="this security is not in the securities table",
            remedy="add it there, or remove the row",
        )
        errors += check(joined, at)
        if name == "put_rights":
            errors += _one_notice(frames[name], files[name])
    return errors


def _one_notice(rights: pd.DataFrame, file: str) -> list[LocatedError]:
    months = rights["notice_days"].map(notice_months)
    first = months.groupby(rights["security_id"]).transform("first")
    return row_errors(
        rights,
        months != first,
        file=file,
        code="E427",
        column="notice_days",
        problem="the rights of {security_id} have notice of different whole months",
        remedy="write the same notice in each of its rows: its decisions are projected on one set of months",
    )


def _on_schedule(joined: pd.DataFrame, column: str) -> Mask:
    """Whether a date stands on the schedule of coupons counted back from maturity. shape (row,)"""
    out = np.ones(len(joined), dtype=bool)
    known = joined["maturity_date"].notna().to_numpy() & (joined["coupon_frequency"] > 0).to_numpy()
    for at in np.flatnonzero(known):
        row: Any = joined.iloc[at]
        day, maturity = row[column].date(), row["maturity_date"].date()
        months = (maturity.year - day.year) * 12 + maturity.month - day.month
        regular = months_before(maturity, months, month_end=bool(row["end_of_month"]))
        out[at] = months % (12 // int(row["coupon_frequency"])) == 0 and regular == day
    return out


def _put_errors(joined: pd.DataFrame, at: RowErrors, calls: pd.DataFrame) -> list[LocatedError]:
    first, last = joined["first_date"], joined["last_date"]
    column: dict[str, Any] = {"code": "E422", "column": "last_date"}
    european = joined["style"] == "european"
    priced = calls[calls["style"] != "make_whole"]
    above = np.zeros(len(joined), dtype=bool)
    for n, row in enumerate(joined.itertuples()):
        mine = priced[priced["security_id"] == row.security_id]
        meets = (mine["first_date"] <= row.last_date) & (mine["last_date"] >= row.first_date)
        above[n] = bool((mine.loc[meets, "price"] < row.price).any())
    return [
        *at(last < first, **column, problem="the right ends before {first_date}", remedy="correct one of the dates"),
        *at(
            last >= joined["maturity_date"],
            **column,
            problem="the right does not end before the maturity {maturity_date} of {security_id}",
            remedy="end it before maturity: at maturity the bond is repaid anyway",
        ),
        *at(
            european & (first != last),
            **column,
            problem="a european right has one day but starts on {first_date}",
            remedy="write the same day twice, or another style",
        ),
        *at(
            (joined["style"] == "bermudan") & (joined["coupon_frequency"] == 0),
            code="E422",
            column="style",
            problem="a bermudan right is used on coupon dates, and {security_id} is a zero coupon bond",
            remedy="make it european or american",
        ),
        *at(
            above,
            code="E423",
            column="price",
            problem="the put price of {security_id} is above a call price of the same days",
            remedy="correct one of the two: the issuer would call for less than the holder may ask",
        ),
    ]


def _sinking_errors(joined: pd.DataFrame, at: RowErrors, calls: pd.DataFrame, valuation: date) -> list[LocatedError]:
    day = joined["payment_date"]
    column: dict[str, Any] = {"code": "E424", "column": "payment_date"}
    total = joined.groupby("security_id")["share_of_par"].transform("sum")
    used = calls[calls["style"] != "make_whole"]  # a make-whole right is never exercised before the par-call date
    notice = used.assign(months=used["notice_days"].map(notice_months)).groupby("security_id")["months"].max()
    slow = joined["security_id"].map(notice).fillna(0) > 0
    return [
        *at(
            day <= pd.Timestamp(valuation),
            **column,
            problem=f"the payment is not after the valuation date {valuation}",
            remedy="leave out what has been paid: shares are of the par held now",
        ),
        *at(
            day >= joined["maturity_date"],
            **column,
            problem="the payment is not before the maturity {maturity_date} of {security_id}",
            remedy="leave the last payment out: what is left is repaid at maturity",
        ),
        *at(
            (joined["coupon_frequency"] == 0) | ~_on_schedule(joined, "payment_date"),
            **column,
            problem="the payment of {security_id} is not on a coupon date counted back from {maturity_date}",
            remedy="write the coupon date on which it is paid",
        ),
        *at(
            total >= 1.0,
            code="E424",
            column="share_of_par",
            problem="the shares of {security_id} leave nothing for maturity",
            remedy="write shares of the par held now that sum to less than 1",
        ),
        *at(
            joined["may_double"] & slow,
            code="E501",
            column="may_double",
            problem="{security_id} may double a payment and has calls with notice of a month or more",
            remedy="this version models one or the other: leave out the one of less weight and say so in the texts",
        ),
    ]


def _step_errors(joined: pd.DataFrame, at: RowErrors) -> list[LocatedError]:
    day = joined["start_date"]
    column: dict[str, Any] = {"code": "E425", "column": "start_date"}
    return [
        *at(
            (day <= joined["issue_date"]) | (day >= joined["maturity_date"]),
            **column,
            problem="the step is not after issue {issue_date} and before maturity {maturity_date}",
            remedy="correct the date; the first rate stands in the securities table",
        ),
        *at(
            (joined["coupon_frequency"] == 0) | ~_on_schedule(joined, "start_date"),
            **column,
            problem="the step of {security_id} is not on a coupon date counted back from {maturity_date}",
            remedy="write the coupon date from which the new rate is earned",
        ),
    ]


def _announced_errors(joined: pd.DataFrame, at: RowErrors, valuation: date) -> list[LocatedError]:
    day = joined["payment_date"]
    return at(
        (day <= pd.Timestamp(valuation)) | (day >= joined["maturity_date"]),
        code="E426",
        column="payment_date",
        problem=f"the payment is not after the valuation date {valuation} and before maturity {{maturity_date}}",
        remedy="correct the date, or leave the row out when it has been paid",
    )
