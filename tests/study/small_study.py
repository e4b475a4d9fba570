"""A small valid study to break: 3 securities, 4 lots, 1 segment, 24 months, seven deterministic paths.

The tables are lists of rows, so that a test changes one cell and writes the folder again. All amounts invented.
"""

from __future__ import annotations

import csv
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import pandas as pd

Row = dict[str, Any]

STUDY_TOML = """
# comments do not count
[study]
name = "Small study"
company = "Invented Life"
business = "Annuities"
valuation_date = 2022-12-31
information_date = 2023-02-10
currency = "USD"
data_status = "invented"
responsible_actuary = "A. Person"

[tables]
securities = "securities.csv"
lots = "lots.csv"
call_rights = "call_rights.csv"
yield_curve = "yield_curve.csv"
class_spreads = "class_spreads.csv"
default_costs = "default_costs.csv"
liability_streams = "liability_streams.csv"
control_totals = "control_totals.csv"

[[segments]]
name = "annuities"
title = "Annuities"
cash = 1_000.5

[call_model]
rule = "optimal_with_cost"
mean_reversion = 0.03
normal_volatility = 0.0095
issuer_cost_share_of_par = 0.005
source = "Memo"
as_of = 2022-12-30
rationale = "Invented"

[spreads]
refunding = "class_plus_concession"
concession_bp = 10
residual_fade_years = 0
no_root_fallback = "rating_spread"
source = "Memo"
as_of = 2022-12-30
rationale = "Invented"

[defaults]
form = "net_annual_cost"
recovery_lag_months = 0
source = "Memo"
as_of = 2022-12-30
rationale = "Invented"

[purchases]
share_of_cash_invested = 1.0
source = "Memo"
as_of = 2022-12-30
rationale = "Invented"
[[purchases.classes]]
name = "A 5 years"
rating = "A"
term_years = 5
spread_bp = 115
weight = 0.4
[[purchases.classes]]
name = "BBB 10 years"
rating = "BBB"
term_years = 10
spread_bp = 165
weight = 0.6

[borrowing]
spread_bp = 50
limit_share_of_statement_assets = 0.03
source = "Memo"
as_of = 2022-12-30
rationale = "Invented"

[investment_expense]
annual_share_of_statement_value = 0.0012
source = "Memo"
as_of = 2022-12-30
rationale = "Invented"

[maintenance_reserve]
interest_maintenance_reserve = 0
asset_valuation_reserve = 0

[tax]
rate = 0

[criterion]
sentence = "Statement surplus is not negative at any year end."
fixed_on = 2023-01-20
measure = "statement_surplus"
dates = "every_year_end"
scenarios_allowed_below = 0
limit = 0

[horizon]
months = 24
asset_close_out = "market_value"
liability_close_out = "statutory_reserve"
source = "Memo"
as_of = 2022-12-30
rationale = "Invented"

[discounting]
npv_constant_bp = 0
source = "Memo"
as_of = 2022-12-30
rationale = "Invented"

[rates]
rate_basis = "par"
source = "Memo"
as_of = 2022-12-30
rationale = "Invented"
[[rates.paths]]
kind = "seven_deterministic"
floor = "shift"
within_year = "linear"
recovery = "cut"

[liabilities]
rate_insensitive_blocks = ["payout"]
source = "Memo"
as_of = 2022-12-30
rationale = "Invented"

[texts]
notes = ["Invented data."]
"""

HORIZON = 24


def _security(name: str, **terms: Any) -> Row:
    """A 5 % half-yearly A bond of 2020 to 2030 unless the terms say otherwise."""
    usual: Row = {
        "security_id": name,
        "issuer": "Issuer, Inc.",
        "asset_class": "corporate",
        "sector": "industrial",
        "rating": "A",
        "clean_price": "101.25",
        "spread_bp": "",
        "coupon_rate": "0.05",
        "coupon_frequency": "2",
        "day_count": "30/360",
        "end_of_month": "false",
        "issue_date": "2020-06-15",
        "first_coupon_date": "",
        "maturity_date": "2030-06-15",
        "par_call_date": "",
    }
    return usual | terms


def _lot(name: str, security: str, par: str, book: str) -> Row:
    return {
        "lot_id": name,
        "security_id": security,
        "segment": "annuities",
        "par": par,
        "book_value": book,
        "tax_basis": book,
    }


def _right(first: str, last: str, price: str) -> Row:
    return {
        "security_id": "B1",
        "first_date": first,
        "last_date": last,
        "style": "american",
        "price": price,
        "make_whole_spread_bp": "",
        "notice_days": "0",
    }


def _stream(item: str, month: int, amount: str) -> Row:
    return {
        "segment": "annuities",
        "block": "payout",
        "scenario": "all",
        "month": str(month),
        "item": item,
        "amount": amount,
    }


def _tables() -> dict[str, list[Row]]:
    """The tables by name, all cells text, as in a CSV file."""
    return {
        "securities": [
            _security("B1"),
            _security("B2", rating="BBB", clean_price="", spread_bp="180", par_call_date="2029-12-15"),
            _security("B3", end_of_month="TRUE", maturity_date="2027-06-30", first_coupon_date="2021-12-31"),
        ],
        "lots": [
            _lot("L1", "B1", "1000000", "990000.25"),
            _lot("L2", "B1", "500000", "505000"),
            _lot("L3", "B2", "250000.5", "250000.5"),
            _lot("L4", "B3", "100000", "100000"),
        ],
        "call_rights": [
            _right("2025-06-15", "2026-06-15", "102.5"),
            _right("2026-06-15", "2030-05-31", "100"),
        ],
        "yield_curve": [
            {"tenor_months": "3", "rate": "0.0442"},
            {"tenor_months": "12", "rate": "0.0473"},
            {"tenor_months": "120", "rate": "0.0388"},
        ],
        "class_spreads": [
            {"rating": rating, "life_years": life, "spread_bp": spread}
            for rating, spread in (("A", "115"), ("BBB", "165"))
            for life in ("1", "10")
        ],
        "default_costs": [{"rating": "A", "annual_cost": "0.0005"}, {"rating": "BBB", "annual_cost": "0.002"}],
        "liability_streams": [
            *(_stream("annuity_payment", month, "70000.125") for month in range(1, HORIZON + 1)),
            *(_stream("reserve_statutory", month, str(1_850_000 - 60_000 * month)) for month in range(HORIZON + 1)),
        ],
        "control_totals": [
            {"item": item, "segment": "all", "amount": amount}
            for item, amount in (
                ("lots_count", "4"),
                ("par", "1850000.5"),
                ("book_value", "1845000.75"),
                ("reserve_statutory", "1850000"),
                ("cash", "1000.5"),
            )
        ],
    }


@dataclass
class SmallStudy:
    """A study folder before it is written: change text and cells, then `write`."""

    folder: Path
    toml: str = STUDY_TOML
    tables: dict[str, list[Row]] = field(default_factory=_tables)
    written_by_hand: set[str] = field(default_factory=set)  # tables that `write` leaves alone

    def cell(self, table: str, row: int, column: str, value: str) -> SmallStudy:
        """Sets one cell; `row` is the line of the file, the header is row 1."""
        self.tables[table][row - 2][column] = value
        return self

    def replace(self, old: str, new: str) -> SmallStudy:
        """Replaces a piece of study.toml, which must be there once."""
        assert self.toml.count(old) == 1, old
        self.toml = self.toml.replace(old, new)
        return self

    def write(self) -> Path:
        """Writes the folder with CSV tables."""
        self.folder.mkdir(parents=True, exist_ok=True)
        (self.folder / "study.toml").write_text(self.toml, encoding="utf-8")
        for name, rows in self.tables.items():
            if name not in self.written_by_hand:
                write_csv(self.folder / f"{name}.csv", rows)
        return self.folder

    def line(self, text: str) -> int:
        """The line of study.toml that starts with the text."""
        lines = self.toml.split("\n")
        return next(at for at, line in enumerate(lines, start=1) if line.startswith(text))


def write_csv(path: Path, rows: list[Row]) -> None:
    """Rows as CSV; the header is that of the first row."""
    with path.open("w", newline="", encoding="utf-8") as target:
        writer = csv.DictWriter(target, fieldnames=list(rows[0]))
        writer.writeheader()
        writer.writerows(rows)


NUMBERS = {
    *("clean_price", "spread_bp", "coupon_rate", "coupon_frequency", "par", "book_value", "tax_basis", "price"),
    *("make_whole_spread_bp", "notice_days", "tenor_months", "rate", "life_years", "annual_cost", "month", "amount"),
}


def typed_frame(rows: list[Row]) -> pd.DataFrame:
    """Rows as a database extract holds them: numbers, dates, flags, gaps."""
    frame = pd.DataFrame(rows)
    for name in frame.columns:
        if name in NUMBERS:
            frame[name] = pd.to_numeric(frame[name].replace("", None))
        elif name.endswith("_date"):
            frame[name] = pd.to_datetime(frame[name].replace("", None)).dt.date
        elif name == "end_of_month":
            frame[name] = frame[name].str.lower() == "true"
    return frame
