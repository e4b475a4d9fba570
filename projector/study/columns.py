"""The one list of the study's tables and columns: name, kind, unit, meaning, range or choices.

The checks, the headers of a new study, the Table Schema files and the input digest all read this list and keep
no second copy. Rates are decimals per year, prices per 100 of par, amounts in currency units, spreads in basis
points where the name ends in `_bp`, dates ISO 8601.

Typed frames: text, identifiers, choices -> strings; number -> float64 (empty = NaN); whole -> int64; flag -> bool;
date -> datetime64[s] (empty = NaT); and a column `row`, the line of the file, which no digest contains.
"""

from __future__ import annotations

from dataclasses import dataclass

from projector.study.daycounts import DAY_COUNTS

RATINGS = (
    *("AAA", "AA+", "AA", "AA-", "A+", "A", "A-", "BBB+", "BBB", "BBB-", "BB+", "BB", "BB-"),
    *("B+", "B", "B-", "CCC+", "CCC", "CCC-", "CC", "C", "D"),
)
CALL_STYLES = ("european", "bermudan", "american", "make_whole")
PUT_STYLES = CALL_STYLES[:3]
NOTICE_DAYS_AT_MOST = 90
FLOW_ITEMS = (
    *("premium", "death_benefit", "surrender_benefit", "withdrawal"),
    *("annuity_payment", "maturity_benefit", "expense", "commission"),
)
STATE_ITEMS = ("reserve_statutory", "account_value", "surrender_value")
CONTROL_ITEMS = ("lots_count", "par", "book_value", "reserve_statutory", "cash", "starting_assets")
COUPON_FREQUENCIES = (0, 1, 2, 4, 12)
ALL = "all"  # the scenario of an insensitive block, and the total over segments
YEARS_TO_MATURITY_AT_MOST = 100


@dataclass(frozen=True, kw_only=True)
class Column:
    """One column of a table and what may stand in it."""

    name: str
    kind: str  # "text", "identifier", "choice", "number", "whole", "date", "flag"
    unit: str
    meaning: str
    least: float | None = None
    most: float | None = None
    above_least: bool = False  # the value must be greater than `least`, not equal to it
    choices: tuple[str, ...] = ()
    filled: bool = True  # every row must have a value
    present: bool = True  # the column must be in the file; absent reads as empty in every row


@dataclass(frozen=True, kw_only=True)
class RefusedColumn:
    """A column that extracts carry and this version cannot honour: accepted only while it says nothing."""

    name: str
    code: str
    what: str  # with its verb: puts are, notice is
    harmless: tuple[str, ...] = ()  # beside empty, 0, none, no and false
    elsewhere: str = ""  # the optional table in which this version honours it


@dataclass(frozen=True, kw_only=True)
class Table:
    """One table of the study."""

    name: str
    meaning: str
    columns: tuple[Column, ...]
    key: tuple[str, ...]  # one row for each; also the canonical order
    refused: tuple[RefusedColumn, ...] = ()
    may_be_empty: bool = False
    duplicate_code: str = "E314"

    def column(self, name: str) -> Column:
        """The column of that name."""
        return next(column for column in self.columns if column.name == name)


def _choice(name: str, choices: tuple[str, ...], meaning: str) -> Column:
    return Column(name=name, kind="choice", unit="-", meaning=meaning, choices=choices)


def _number(
    name: str,
    unit: str,
    meaning: str,
    least: float,
    most: float,
    *,
    above_least: bool = False,
    filled: bool = True,
    present: bool = True,
) -> Column:
    return Column(
        name=name,
        kind="number",
        unit=unit,
        meaning=meaning,
        least=least,
        most=most,
        above_least=above_least,
        filled=filled,
        present=present,
    )


def _whole(name: str, unit: str, meaning: str, least: int, most: int) -> Column:
    return Column(name=name, kind="whole", unit=unit, meaning=meaning, least=least, most=most)


def _date(name: str, meaning: str, *, filled: bool = True) -> Column:
    return Column(name=name, kind="date", unit="date", meaning=meaning, filled=filled, present=filled)


def _text(name: str, meaning: str) -> Column:
    return Column(name=name, kind="text", unit="-", meaning=meaning)


def _identifier(name: str, meaning: str) -> Column:
    return Column(name=name, kind="identifier", unit="-", meaning=meaning)


_RATING = _choice("rating", RATINGS, "rating class")
_TENOR = _whole("tenor_months", "month", "tenor of the quoted yield", 1, 360)
_NOTICE = _whole("notice_days", "day", "days between notice and payment, 0 to 90", 0, NOTICE_DAYS_AT_MOST)
_SEGMENT = _identifier("segment", "segment named in study.toml")

SECURITIES = Table(
    name="securities",
    meaning="Terms and price of each security; one row each, whoever holds it.",
    key=("security_id",),
    columns=(
        _text("security_id", "unique name of the security"),
        _text("issuer", "who owes"),
        _identifier("asset_class", "such as agency, corporate, utility, private, high_yield, treasury, municipal"),
        _text("sector", "industry or kind of issuer"),
        _RATING,
        _number(
            "clean_price", "per 100 of par", "clean price at the valuation date", 20, 200, filled=False, present=False
        ),
        _number("spread_bp", "bp", "spread over Treasury instead of a price", -200, 2000, filled=False, present=False),
        _number("coupon_rate", "1/year", "annual coupon rate, 0.05 is 5 %", 0, 0.20),
        _whole("coupon_frequency", "1/year", "coupons a year: 0 (zero coupon), 1, 2, 4 or 12", 0, 12),
        _choice("day_count", DAY_COUNTS, "day count of the coupon"),
        Column(name="end_of_month", kind="flag", unit="-", meaning="coupons fall on month ends when maturity does"),
        _date("issue_date", "first day of interest"),
        _date("first_coupon_date", "only where the first coupon is odd; empty is regular", filled=False),
        _date("maturity_date", "last coupon and principal"),
        _date("par_call_date", "callable at 100 on any month end from here to maturity; empty is never", filled=False),
    ),
    refused=(
        RefusedColumn(name="put_date", code="E502", what="puts in this table are", elsewhere="put_rights"),
        RefusedColumn(
            name="sinking_fund", code="E503", what="sinking funds in this table are", elsewhere="sinking_payments"
        ),
        RefusedColumn(name="step_up", code="E504", what="step-up coupons in this table are", elsewhere="coupon_steps"),
        RefusedColumn(name="coupon_type", code="E505", what="coupons other than fixed are", harmless=("fixed",)),
        RefusedColumn(name="floating_index", code="E506", what="floating coupons are"),
        RefusedColumn(
            name="announced_call_date",
            code="E507",
            what="announced calls in this table are",
            elsewhere="announced_calls",
        ),
    ),
)

LOTS = Table(
    name="lots",
    meaning="What is held: one row for each holding of one security in one segment.",
    key=("lot_id",),
    columns=(
        _text("lot_id", "unique name of the lot"),
        _text("security_id", "security held"),
        _SEGMENT,
        _number("par", "currency", "par held", 0, 1e10, above_least=True),
        _number("book_value", "currency", "statement value", 0, 2e10, above_least=True),
        _number("tax_basis", "currency", "tax basis", 0, 2e10, above_least=True),
    ),
)

CALL_RIGHTS = Table(
    name="call_rights",
    meaning="The issuer's rights to call: one row is one price over first_date to last_date, both included.",
    key=("security_id", "first_date", "style", "last_date"),
    may_be_empty=True,
    columns=(
        _text("security_id", "security that may be called"),
        _date("first_date", "first day of the right"),
        _date("last_date", "last day of the right"),
        _choice("style", CALL_STYLES, "european: one day; bermudan: coupon dates; american: month ends; make_whole"),
        _number("price", "per 100 of par", "clean call price; empty for make_whole", 50, 150, filled=False),
        _number(
            "make_whole_spread_bp", "bp", "make-whole spread; only for make_whole", 0, 500, filled=False, present=False
        ),
        _NOTICE,
    ),
)

PUT_RIGHTS = Table(
    name="put_rights",
    meaning="The holder's rights to put: one row is one price over first_date to last_date, both included.",
    key=("security_id", "first_date", "style", "last_date"),
    may_be_empty=True,
    columns=(
        _text("security_id", "security that may be put"),
        _date("first_date", "first day of the right"),
        _date("last_date", "last day of the right"),
        _choice("style", PUT_STYLES, "european: one day; bermudan: coupon dates; american: month ends"),
        _number("price", "per 100 of par", "clean put price", 50, 150),
        _NOTICE,
    ),
)

SINKING_PAYMENTS = Table(
    name="sinking_payments",
    meaning="Scheduled repayments of par at 100, pro rata over all holders, on coupon dates before maturity.",
    key=("security_id", "payment_date"),
    may_be_empty=True,
    columns=(
        _text("security_id", "security repaid in parts"),
        _date("payment_date", "coupon date after the valuation date"),
        _number("share_of_par", "-", "share of the par held at the valuation date", 0, 1, above_least=True),
        Column(name="may_double", kind="flag", unit="-", meaning="the issuer may retire as much again at 100"),
    ),
)

COUPON_STEPS = Table(
    name="coupon_steps",
    meaning="Coupon rates that follow the one of the securities table, each from a coupon date on.",
    key=("security_id", "start_date"),
    may_be_empty=True,
    columns=(
        _text("security_id", "security whose coupon changes"),
        _date("start_date", "coupon date from which the new rate is earned"),
        _number("coupon_rate", "1/year", "annual coupon rate from then on", 0, 0.20),
    ),
)

ANNOUNCED_CALLS = Table(
    name="announced_calls",
    meaning="Calls of all par announced by the valuation date and not yet paid.",
    key=("security_id",),
    may_be_empty=True,
    columns=(
        _text("security_id", "security called"),
        _date("payment_date", "day on which it is repaid"),
        _number("price", "per 100 of par", "clean price paid", 50, 200),
    ),
)

OPTIONAL_TABLES = {table.name: table for table in (PUT_RIGHTS, SINKING_PAYMENTS, COUPON_STEPS, ANNOUNCED_CALLS)}

YIELD_CURVE = Table(
    name="yield_curve",
    meaning="Treasury yields at the valuation date, on the basis rates.rate_basis states.",
    key=("tenor_months",),
    columns=(_TENOR, _number("rate", "1/year", "yield, 0.04 is 4 %", -0.05, 0.30)),
)

CLASS_SPREADS = Table(
    name="class_spreads",
    meaning="Spread over Treasury by rating and remaining life, continuously compounded.",
    key=("rating", "life_years"),
    columns=(
        _RATING,
        _number("life_years", "year", "remaining life", 0, 60),
        _number("spread_bp", "bp", "spread over Treasury", -200, 3000),
    ),
)

_COST = _number("annual_cost", "1/year", "net annual cost of default, 0.002 is 0.2 % of par a year", 0, 0.5)
_RATE = _number("annual_rate", "1/year", "annual rate of default", 0, 1)
_RECOVERY = _number("recovery", "-", "share of par recovered", 0, 1)
DEFAULT_COSTS_NET = Table(
    name="default_costs",
    meaning='Default cost by rating, for defaults.form = "net_annual_cost".',
    key=("rating",),
    columns=(_RATING, _COST),
)
DEFAULT_COSTS_RECOVERY = Table(
    name="default_costs",
    meaning='Default rate and recovery by rating, for defaults.form = "rate_recovery_lag".',
    key=("rating",),
    columns=(_RATING, _RATE, _RECOVERY),
)

LIABILITY_STREAMS = Table(
    name="liability_streams",
    meaning="Liability flows and states by block, scenario and month; never negative, the item has the sign.",
    key=("segment", "block", "scenario", "item", "month"),
    duplicate_code="E441",
    columns=(
        _SEGMENT,
        _text("block", "block of policies; belongs to one segment"),
        _text("scenario", "scenario of the run such as S1, or all for a block declared insensitive"),
        _whole("month", "month", "months after the valuation date; flows 1 to horizon, states 0 to horizon", 0, 600),
        _choice("item", FLOW_ITEMS + STATE_ITEMS, "flow of the month, or state at its end"),
        _number("amount", "currency", "amount", 0, 1e13),
    ),
)

CONTROL_TOTALS = Table(
    name="control_totals",
    meaning="Totals from the ledger, which the other tables must meet.",
    key=("item", "segment"),
    columns=(
        _choice("item", CONTROL_ITEMS, "what is totalled"),
        _identifier("segment", "segment, or all"),
        _number("amount", "currency", "the ledger's total; a count for lots_count", -1e13, 1e13),
    ),
)

SHIFT_TABLE = Table(
    name="shift_table",
    meaning="Shifts of the starting yields by year; after the last year the shift stays as it is.",
    key=("title", "year", "tenor_months"),
    columns=(
        _text("title", "name of the path"),
        _whole("year", "year", "years after the valuation date; year 0 is the jump from month 1", 0, 60),
        _TENOR,
        _number("shift", "1/year", "added to the yield, 0.01 is 100 bp", -0.10, 0.10),
    ),
)

HISTORY = Table(
    name="history",
    meaning="Yields of a past period by month, replayed as levels or as changes; after the last month constant.",
    key=("title", "month", "tenor_months"),
    columns=(
        _text("title", "name of the path"),
        _whole("month", "month", "months from the start of the period", 0, 1200),
        _TENOR,
        _number("rate", "1/year", "yield, 0.04 is 4 %", -0.05, 0.30),
    ),
)

IMPORTED = Table(
    name="imported",
    meaning="Yields of finished paths by month; month 0 is the starting curve.",
    key=("scenario", "month", "tenor_months"),
    columns=(
        _text("scenario", "name of the path"),
        _whole("month", "month", "months after the valuation date", 0, 600),
        _TENOR,
        _number("rate", "1/year", "yield, 0.04 is 4 %", -0.10, 0.50),
    ),
)

DEFAULT_COSTS = {"net_annual_cost": DEFAULT_COSTS_NET, "rate_recovery_lag": DEFAULT_COSTS_RECOVERY}
RATE_TABLES = {"shift_table": SHIFT_TABLE, "history": HISTORY, "imported": IMPORTED}


def study_tables(default_form: str) -> dict[str, Table]:
    """The tables named in [tables], in the order in which they are read.

    default_form  "net_annual_cost" or "rate_recovery_lag": decides the columns of default_costs
    """
    listed = (
        *(SECURITIES, LOTS, CALL_RIGHTS, YIELD_CURVE, CLASS_SPREADS, DEFAULT_COSTS[default_form]),
        *(LIABILITY_STREAMS, CONTROL_TOTALS),
    )
    return {table.name: table for table in listed}
