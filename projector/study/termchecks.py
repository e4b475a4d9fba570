"""Terms of securities and call rights: what one row, or the rows of one security, must satisfy together."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from datetime import date
from functools import partial
from typing import Any

import numpy as np
import pandas as pd

from projector.study.columns import COUPON_FREQUENCIES, YEARS_TO_MATURITY_AT_MOST
from projector.study.daycounts import months_before
from projector.study.errors import LocatedError
from projector.study.tablecheck import Checked, row_errors

_SCHEDULE = ["first_coupon_date", "maturity_date", "coupon_frequency", "end_of_month"]
_TERMS = ["issue_date", "maturity_date", "par_call_date", "coupon_frequency", "end_of_month"]
RowErrors = Callable[..., list[LocatedError]]


def price_and_coupon_errors(checked: Checked, file: str) -> list[LocatedError]:
    """One of price and spread, and a frequency that fits the coupon; only rows whose cells are sound are judged."""
    table, sound = checked.frame, checked.sound
    at = partial(row_errors, table, file=file)
    priced = sound["clean_price"] & sound["spread_bp"]
    both = (table["clean_price"].notna() & table["spread_bp"].notna()).to_numpy()
    neither = (table["clean_price"].isna() & table["spread_bp"].isna()).to_numpy()
    paid = sound["coupon_rate"] & sound["coupon_frequency"]
    rate, frequency = table["coupon_rate"].to_numpy(), table["coupon_frequency"].to_numpy()
    listed = np.isin(frequency, COUPON_FREQUENCIES)
    fill = "fill exactly one of clean_price and spread_bp"
    return [
        *at(both & priced, code="E316", column="spread_bp", problem="clean_price is filled as well", remedy=fill),
        *at(
            neither & priced, code="E316", column="clean_price", problem="there is no price and no spread", remedy=fill
        ),
        *at(
            ~listed & sound["coupon_frequency"],
            code="E312",
            column="coupon_frequency",
            problem="coupon_frequency is unknown",
            remedy="write 0 (zero coupon), 1, 2, 4 or 12",
        ),
        *at(
            (rate == 0) & (frequency != 0) & listed & paid,
            code="E317",
            column="coupon_frequency",
            problem="the coupon rate is 0 but coupons are paid",
            remedy="write 0 for a zero coupon bond, or correct coupon_rate",
        ),
        *at(
            (rate > 0) & (frequency == 0) & paid,
            code="E317",
            column="coupon_frequency",
            problem="the coupon rate is {coupon_rate} but no coupon is paid",
            remedy="write 1, 2, 4 or 12 coupons a year, or coupon_rate 0 for a zero coupon bond",
        ),
    ]


def security_date_errors(securities: pd.DataFrame, valuation: date, file: str) -> list[LocatedError]:
    """Dates of each security in order: issue, first coupon, par call, maturity; alive at the valuation date."""
    issue, maturity, par_call = (securities[name] for name in ("issue_date", "maturity_date", "par_call_date"))
    day = pd.Timestamp(valuation)
    last = pd.Timestamp(valuation.replace(year=valuation.year + YEARS_TO_MATURITY_AT_MOST, day=28))
    at = partial(row_errors, securities, file=file)
    return [
        *at(
            maturity <= day,
            code="E403",
            column="maturity_date",
            problem=f"security {{security_id}} matures on or before the valuation date {valuation}",
            remedy="remove it and its lots, or correct the date",
        ),
        *at(
            maturity > last,
            code="E404",
            column="maturity_date",
            problem=f"the maturity is more than {YEARS_TO_MATURITY_AT_MOST} years after the valuation date",
            remedy="correct the date; perpetual securities cannot be modelled",
        ),
        *at(
            issue > day,
            code="E407",
            column="issue_date",
            problem=f"security {{security_id}} is issued after the valuation date {valuation}",
            remedy="remove it and its lots, or correct the date",
        ),
        *at(
            (issue >= maturity) & (issue <= day),
            code="E407",
            column="issue_date",
            problem="the issue date is not before the maturity {maturity_date}",
            remedy="correct one of the dates",
        ),
        *at(
            par_call.notna() & ((par_call <= issue) | (par_call >= maturity)),
            code="E406",
            column="par_call_date",
            problem="the par call date is not after issue {issue_date} and before maturity {maturity_date}",
            remedy="correct it, or leave it empty when the security cannot be called at par",
        ),
        *_first_coupon_errors(securities, at),
    ]


def _first_coupon_errors(securities: pd.DataFrame, at: RowErrors) -> list[LocatedError]:
    first = securities["first_coupon_date"]
    given = first.notna()
    zero = given & (securities["coupon_frequency"] == 0)
    order = given & ~zero & ((first <= securities["issue_date"]) | (first > securities["maturity_date"]))
    judged = (given & ~zero & ~order).to_numpy()
    irregular = np.zeros(len(securities), dtype=bool)
    irregular[judged] = [not _is_regular(*terms) for terms in zip(*(securities[name][judged] for name in _SCHEDULE))]
    column: dict[str, Any] = {"code": "E405", "column": "first_coupon_date"}
    return [
        *at(zero, **column, problem="a zero coupon bond has no first coupon", remedy="leave the cell empty"),
        *at(
            order,
            **column,
            problem="the first coupon is not after issue {issue_date} and by maturity {maturity_date}",
            remedy="correct it, or leave it empty when the first coupon is regular",
        ),
        *at(
            irregular,
            **column,
            problem="the first coupon is not on the regular schedule counted back from maturity {maturity_date}",
            remedy="correct it, or leave it empty when the first coupon is regular",
        ),
    ]


def _is_regular(first: pd.Timestamp, maturity: pd.Timestamp, frequency: int, end_of_month: bool) -> bool:
    months = (maturity.year - first.year) * 12 + maturity.month - first.month
    if months % (12 // int(frequency)):
        return False
    return bool(first.date() == months_before(maturity.date(), months, month_end=bool(end_of_month)))


@dataclass(frozen=True)
class Rights:
    """Checks of call rights: what must be mended, and what should be looked at."""

    errors: list[LocatedError]
    warnings: tuple[str, ...]


def check_call_rights(rights: pd.DataFrame, securities: pd.DataFrame, valuation: date, file: str) -> Rights:
    """Dates, styles, prices and overlaps of the call rights, in the file's order.

    rights      checked table in the order of its file
    securities  checked table of securities
    """
    terms = securities.set_index("security_id")[_TERMS]
    joined = rights.join(terms, on="security_id")
    at = partial(row_errors, joined, file=file)
    errors = [
        *at(
            joined["maturity_date"].isna(),
            code="E401",
            column="security_id",
            problem="this security is not in the securities table",
            remedy="add it there, or remove the call right",
        ),
        *_right_date_errors(joined, at),
        *_right_price_errors(joined, at),
        *_sequence_errors(joined, at),
        *_unused_errors(joined, valuation, at),
    ]
    return Rights(errors, (*_price_warnings(joined, file), *_past_warnings(joined, valuation, file)))


def _right_date_errors(joined: pd.DataFrame, at: RowErrors) -> list[LocatedError]:
    first, last = joined["first_date"], joined["last_date"]
    european = joined["style"] == "european"
    stated = joined["style"] != "make_whole"
    remedy = "correct one of the dates"
    return [
        *at(last < first, code="E411", column="last_date", problem="the right ends before {first_date}", remedy=remedy),
        *at(
            last >= joined["maturity_date"],
            code="E412",
            column="last_date",
            problem="the right does not end before the maturity {maturity_date} of {security_id}",
            remedy="end it before maturity: at maturity the bond is repaid anyway",
        ),
        *at(
            first <= joined["issue_date"],
            code="E413",
            column="first_date",
            problem="the right starts on or before the issue date {issue_date} of {security_id}",
            remedy=remedy,
        ),
        *at(
            european & (first != last),
            code="E416",
            column="last_date",
            problem="a european right has one day but starts on {first_date}",
            remedy="write the same day twice, or another style",
        ),
        *at(
            stated & (last >= joined["par_call_date"]),
            code="E418",
            column="last_date",
            problem="the right overlaps the window of calls at 100 from {par_call_date} of {security_id}",
            remedy="end the right before par_call_date, or leave par_call_date empty",
        ),
    ]


def _unused_errors(joined: pd.DataFrame, valuation: date, at: RowErrors) -> list[LocatedError]:
    """Rights with no day on which they could be used; those wholly past have no effect and are left alone."""
    first, last, maturity = joined["first_date"], joined["last_date"], joined["maturity_date"]
    possible = (first <= last) & (last < maturity) & (last > pd.Timestamp(valuation))
    month_end = (last + pd.Timedelta(days=1)).to_numpy().astype("datetime64[M]").astype("datetime64[D]") - 1
    without_month_end = month_end < first.to_numpy().astype("datetime64[D]")
    bermudan = possible & (joined["style"] == "bermudan")
    zero = joined["coupon_frequency"] == 0
    paying = (bermudan & ~zero).to_numpy()
    without_coupon = np.zeros(len(joined), dtype=bool)
    names = ["first_date", "last_date", *_SCHEDULE[1:]]
    without_coupon[paying] = [not _has_coupon_date(*terms) for terms in zip(*(joined[name][paying] for name in names))]
    column: dict[str, Any] = {"code": "E419", "column": "last_date"}
    never = "this right can never be used: "
    widen = "widen the dates or make it european"
    return [
        *at(
            possible & (joined["style"] == "american") & without_month_end,
            **column,
            problem=never
            + "an american right is used at month ends, and none lies between {first_date} and {last_date}",
            remedy=widen,
        ),
        *at(
            bermudan & zero,
            **{**column, "column": "style"},
            problem=never + "a bermudan right is used on coupon dates, and {security_id} is a zero coupon bond",
            remedy="make it european or american",
        ),
        *at(
            without_coupon,
            **column,
            problem=never
            + "a bermudan right is used on coupon dates, and none lies between {first_date} and {last_date}",
            remedy=widen,
        ),
    ]


def _has_coupon_date(
    first: pd.Timestamp, last: pd.Timestamp, maturity: pd.Timestamp, frequency: float, end_of_month: bool
) -> bool:
    """Whether a date of the schedule counted back from maturity lies between the two days, both included."""
    step = 12 // int(frequency)
    months = (maturity.year - last.year) * 12 + maturity.month - last.month
    periods = months // step  # the date so many periods before maturity is in the month of `last` or later
    for back in (periods, periods + 1):
        day = months_before(maturity.date(), back * step, month_end=bool(end_of_month))
        if first.date() <= day <= last.date():
            return True
    return False


def _right_price_errors(joined: pd.DataFrame, at: RowErrors) -> list[LocatedError]:
    whole = joined["style"] == "make_whole"
    price, spread = joined["price"].notna(), joined["make_whole_spread_bp"].notna()
    return [
        *at(
            ~whole & ~price,
            code="E417",
            column="price",
            problem="a right of style {style} has no price",
            remedy="write the clean call price per 100 of par",
        ),
        *at(
            whole & price,
            code="E417",
            column="price",
            problem="a make_whole right has a stated price",
            remedy="leave price empty: it follows from the make-whole spread",
        ),
        *at(
            whole & ~spread,
            code="E417",
            column="make_whole_spread_bp",
            problem="a make_whole right has no spread",
            remedy="write the make-whole spread in basis points, 0 to 500",
        ),
        *at(
            ~whole & spread,
            code="E417",
            column="make_whole_spread_bp",
            problem="a right of style {style} has a make-whole spread",
            remedy="leave it empty, or write style make_whole",
        ),
    ]


def _sequence_errors(joined: pd.DataFrame, at: RowErrors) -> list[LocatedError]:
    """Rows of one security in date order, and rows of one security and style that do not overlap.

    A row may start on the day on which an earlier one ends: then the row that starts rules that day.
    """
    before = joined.groupby("security_id", sort=False)["first_date"].shift()
    unordered = before.notna() & (joined["first_date"] < before)
    ordered = joined.sort_values("first_date", kind="stable")
    groups = ordered.groupby(["security_id", "style"], sort=False)
    latest = ordered.assign(at=ordered["last_date"].astype("int64")).groupby(["security_id", "style"], sort=False)["at"]
    ended = latest.cummax().groupby([ordered["security_id"], ordered["style"]], sort=False).shift()
    same_start = ordered["first_date"] == groups["first_date"].shift()
    overlap = (ended.notna() & (ordered["first_date"].astype("int64") < ended.fillna(0))) | same_start
    return [
        *at(
            unordered,
            code="E415",
            column="first_date",
            problem="the rights of {security_id} are not in the order of their dates",
            remedy="sort its rows by first_date",
        ),
        *at(
            overlap.reindex(joined.index),
            code="E414",
            column="first_date",
            problem="this {style} right of {security_id} overlaps an earlier one",
            remedy="end the earlier right on or before the day this one starts",
        ),
    ]


def _price_warnings(joined: pd.DataFrame, file: str) -> list[str]:
    stated = joined[joined["price"].notna()]
    before = stated.groupby("security_id", sort=False)["price"].shift()
    rising = stated[before.notna() & (stated["price"] > before)]
    return [
        f"{file}, row {row}: the call price of {security} rises to {price:g}; call prices usually fall."
        for row, security, price in zip(rising["row"], rising["security_id"], rising["price"])
    ]


def _past_warnings(joined: pd.DataFrame, valuation: date, file: str) -> list[str]:
    past = int((joined["last_date"] <= pd.Timestamp(valuation)).sum())
    count = "1 call right ends" if past == 1 else f"{past} call rights end"
    effect = "has" if past == 1 else "have"
    return [f"{file}: {count} on or before the valuation date and {effect} no effect."] if past else []
