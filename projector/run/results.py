"""What a run leaves behind: long, tidy tables with a unit for every column.

The report, the workbook and the Parquet files read these records and nothing else. `COLUMNS` is the one list of
tables, columns, units and meanings; a test holds the frames to it.
"""

from __future__ import annotations

from dataclasses import dataclass

import pandas as pd

from projector.study.records import Study

ALL_SEGMENTS = "all"

# table -> column -> (unit, meaning). "currency" is the study's currency; "-" is a name, a count or a flag.
COLUMNS: dict[str, dict[str, tuple[str, str]]] = {
    "scenarios": {
        "scenario": ("-", "identifier, S1, S2, ... in the study's order"),
        "title": ("-", "name of the path"),
        "kind": ("-", "source of the path"),
    },
    "rates": {
        "scenario": ("-", "identifier"),
        "month": ("month", "months after the valuation date, year ends and month 1 only"),
        "tenor_months": ("month", "quoted tenor"),
        "rate": ("1/year", "Treasury yield on the study's rate basis"),
    },
    "flows": {
        "scenario": ("-", "identifier"),
        "segment": ("-", "segment"),
        "month": ("month", "1..horizon"),
        "holding": ("-", "start = holdings at the valuation date, bought = purchases, segment = neither"),
        "category": ("-", "flow category of convention C12"),
        "amount": ("currency", "positive into the company"),
    },
    "balance": {
        "scenario": ("-", "identifier"),
        "segment": ("-", "segment, or all"),
        "month": ("month", "0..horizon"),
        "cash": ("currency", "cash"),
        "statement_start": ("currency", "statement value of the starting holdings left"),
        "statement_bought": ("currency", "statement value of purchases"),
        "accrued": ("currency", "investment income due and accrued"),
        "recoveries": ("currency", "expected recoveries on defaulted par not yet received"),
        "borrowing": ("currency", "borrowing outstanding"),
        "shortfall": ("currency", "shortfall account outstanding"),
        "reserve": ("currency", "statutory reserve"),
        "statement_surplus": ("currency", "statement surplus"),
        "market_assets": ("currency", "market value of bonds incl. accrued; empty between year ends"),
        "market_surplus": ("currency", "market surplus; empty between year ends"),
        "earned_rate": ("1/year", "net earned rate of the last 12 months (C11)"),
    },
    "mix": {
        "scenario": ("-", "identifier"),
        "segment": ("-", "segment, or all"),
        "year": ("year", "0, 5, 10, 20, 30, 40"),
        "asset_class": ("-", "asset class of the holdings, bought: <class>, or cash"),
        "callable": ("-", "callable at stated prices, par calls of make-whole not counted"),
        "statement_value": ("currency", "statement value"),
    },
    "measures": {
        "scenario": ("-", "identifier"),
        "segment": ("-", "segment, or all"),
        "ending_statement_surplus": ("currency", "statement surplus at the horizon"),
        "ending_market_surplus": ("currency", "market surplus at the horizon"),
        "pv_ending_earned_rate": ("currency", "ending statement surplus discounted at the net earned rates"),
        "pv_ending_one_month_treasury": (
            "currency",
            "ending statement surplus discounted at one-month rates of the path",
        ),
        "lowest_statement_surplus": ("currency", "lowest statement surplus at a year end, year 1 and later"),
        "lowest_statement_year": ("year", "the year end of the lowest"),
        "lowest_market_surplus": ("currency", "lowest market surplus at a year end, year 1 and later"),
        "lowest_market_year": ("year", "the year end of the lowest"),
        "years_negative": ("count", "year ends with negative statement surplus"),
        "criterion_value": ("currency", "the criterion's measure at its worst date"),
        "criterion_met": ("-", "the criterion holds in this scenario"),
        "npv_gap": ("currency", "PV of asset run-off flows and cash less PV of net outgo, close-out values included"),
        "npv_close_out_assets": ("currency", "of which: PV of starting holdings left at the horizon"),
        "npv_close_out_liabilities": ("currency", "of which, deducted: PV of the liability left at the horizon"),
        "irr_assets": ("1/year", "IRR of run-off flows on market value, annual effective"),
        "irr_assets_status": ("-", "none, one or several"),
        "irr_assets_on_statement_value": ("1/year", "the same on statement value"),
        "cost_rate": ("1/year", "IRR of the liability stream on the statutory reserve"),
        "cost_rate_status": ("-", "none, one or several"),
        "irr_gap": ("1/year", "irr_assets less cost_rate; empty unless both have one root"),
        "horizon_return": ("1/year", "internal rate of the whole segment, on market value; empty unless there is one"),
        "callable_par": ("currency", "starting par callable at stated prices (make-whole with par call included)"),
        "par_called": ("currency", "par called"),
        "stated_callable_par": ("currency", "of callable_par: at stated prices, par calls of make-whole not counted"),
        "stated_par_called": ("currency", "of par_called: at stated prices, par calls of make-whole not counted"),
        "call_premium": ("currency", "paid above par by calling issuers"),
        "yield_given_up": (
            "currency",
            "called par x (net book yield - net purchase yield) x years to old worst date, by lot",
        ),
        "peak_borrowing": ("currency", "largest borrowing at a month end"),
        "months_with_borrowing": ("count", "month ends with borrowing outstanding"),
        "par_sold": ("currency", "par sold to meet outgo"),
        "sale_gain": ("currency", "gain on sales against statement value"),
        "first_shortfall_month": ("month", "first month with a shortfall, -1 = none"),
        "largest_shortfall": ("currency", "largest shortfall account at a month end"),
    },
    "calls": {
        "scenario": ("-", "identifier"),
        "security_id": ("-", "security"),
        "segment": ("-", "segment"),
        "month": ("month", "month of payment"),
        "decided": ("month", "month of the decision: before the payment where notice is due; 0 = before the valuation"),
        "right": (
            "-",
            "stated price, par call of a make-whole security, sinking payment doubled, or announced before",
        ),
        "par_called": ("currency", "par called, after defaults and sales"),
        "price": ("per 100", "clean call price"),
        "premium": ("currency", "paid above par"),
        "book_yield": ("1/year", "book yield given up less its default cost, bond-equivalent, lots by par"),
        "purchase_yield": ("1/year", "yield of the purchase mix less its default cost, bond-equivalent"),
        "years_to_worst": ("year", "from the call to the old worst date"),
        "yield_given_up": ("currency", "par x (book yield - purchase yield) x years, lot by lot, added up"),
    },
    "puts": {
        "scenario": ("-", "identifier"),
        "security_id": ("-", "security"),
        "segment": ("-", "segment"),
        "month": ("month", "month of payment"),
        "decided": ("month", "month of the holder's decision"),
        "par_put": ("currency", "par put, after defaults and sales"),
        "price": ("per 100", "clean put price"),
        "received": ("currency", "price received, without accrued interest"),
    },
    "decisions": {
        "scenario": ("-", "identifier"),
        "security_id": ("-", "security"),
        "month": ("month", "month of decision"),
        "upper_bound": ("per 100", "cost of the best policy fixed in advance, an upper bound of continuation"),
        "continuation": ("per 100", "issuer's cost of going on; empty where the bound settled it"),
        "bar": ("per 100", "clean call price + issuer's cost + accrued"),
        "decided_by": ("-", "bound, solve, second grid or third grid"),
        "called": ("-", "the issuer calls"),
    },
    "securities": {
        "security_id": ("-", "security"),
        "issuer": ("-", "issuer"),
        "asset_class": ("-", "asset class"),
        "sector": ("-", "sector"),
        "rating": ("-", "rating"),
        "coupon_rate": ("1/year", "coupon"),
        "coupon_frequency": ("1/year", "coupons a year, 0 = zero coupon"),
        "maturity_date": ("date", "maturity"),
        "call_form": (
            "-",
            "none, or joined by +: european, bermudan, american, make_whole (with par call), put, doubling, announced",
        ),
        "first_call_date": ("date", "first date of a right at a stated price, empty when none"),
        "next_call_price": ("per 100", "clean price of that right"),
        "par": ("currency", "par over all lots"),
        "statement_value": ("currency", "statement value over all lots"),
        "market_value": ("currency", "clean price x par"),
        "accrued": ("currency", "accrued interest on mapped months"),
        "accrued_dated": ("currency", "accrued interest on exact dates by the day count"),
        "mapping_bp": ("bp", "spread of promised payments on mapped months less that on exact dates, same price"),
        "clean_price": ("per 100", "price stated or, where a spread was stated, modelled"),
        "model_price": ("per 100", "clean price the calibrated spread gives back"),
        "valuation_spread_bp": ("bp", "continuously compounded spread over Treasury, calibrated"),
        "class_spread_bp": ("bp", "class spread for rating and life"),
        "refunding_spread_bp": ("bp", "the issuer's spread for new debt at the valuation date"),
        "spread_from": ("-", "price, given, or rating_spread (fallback)"),
        "book_yield": ("1/year", "effective yield from statement value to the worst date, bond-equivalent"),
        "worst_date": ("date", "date that gives the lowest statement value, mapped to month ends"),
        "yield_to_worst": ("1/year", "street yield to worst at the market price, bond-equivalent"),
        "make_whole_spread_bp": ("bp", "make-whole spread, empty when none"),
    },
    "control": {
        "item": ("-", "control item"),
        "segment": ("-", "segment, or all"),
        "ledger": ("currency", "control total of the study"),
        "read": ("currency", "sum read from the tables"),
        "difference": ("currency", "read less ledger"),
    },
    "identities": {
        "identity": ("-", "identity code"),
        "name": ("-", "what must be equal"),
        "checked": ("count", "number of sums compared"),
        "tolerance": ("-", "rule"),
        "worst_difference": ("currency", "largest absolute difference"),
        "where": ("-", "scenario, segment and month of the largest"),
        "holds": ("-", "all within tolerance"),
    },
    "choices": {
        "group": ("-", "part of the study"),
        "name": ("-", "choice"),
        "value": ("-", "as used, with its unit"),
        "stated": ("-", "stated in the study, or default"),
        "source": ("-", "source"),
        "as_of": ("-", "date of the source"),
        "rationale": ("-", "why"),
    },
    "special_cases": {
        "case": ("-", "special case"),
        "count": ("count", "securities"),
        "par": ("currency", "par"),
        "names": ("-", "the securities, at most 20"),
        "treatment": ("-", "what was done"),
    },
}


@dataclass(frozen=True, kw_only=True)
class RunResults:
    """Everything the report may print. Frames follow `COLUMNS`; figures are full values, not rounded."""

    study: Study
    set_digest: str  # of the rate paths
    scenarios: pd.DataFrame
    rates: pd.DataFrame
    flows: pd.DataFrame
    balance: pd.DataFrame
    mix: pd.DataFrame
    measures: pd.DataFrame
    calls: pd.DataFrame
    puts: pd.DataFrame
    decisions: pd.DataFrame
    securities: pd.DataFrame
    control: pd.DataFrame
    identities: pd.DataFrame
    choices: pd.DataFrame
    special_cases: pd.DataFrame
    warnings: tuple[str, ...]
    result_digests: dict[str, str]  # table -> SHA-256 of its canonical rounded content

    def tables(self) -> dict[str, pd.DataFrame]:
        """The frames by name, in the order of `COLUMNS`."""
        return {name: getattr(self, name) for name in COLUMNS}
