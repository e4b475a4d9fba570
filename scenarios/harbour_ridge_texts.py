"""The text of study.toml for the Harbour Ridge demo."""

from __future__ import annotations

SEGMENTS = {
    "deferred_annuities": "Deferred annuities",
    "payout": "Annuities in payment",
    "guaranteed_interest": "Guaranteed interest contracts",
}

HEAD = """# Demo study. Insurer, people, holdings and business are invented; only the starting curve is published.
# Written by scenarios/make_harbour_ridge_2022.py: change the script, not this file.

[study]
name = "Harbour Ridge year-end 2022"
company = "Harbour Ridge Mutual Annuity Society (invented)"
business = "Deferred annuities, annuities in payment and guaranteed interest contracts"
valuation_date = 2022-12-31
information_date = 2023-02-10
currency = "USD"
data_status = "invented"
responsible_actuary = "Philippa Nettlewick (invented)"

[tables]
securities = "securities.csv"
lots = "lots.csv"
call_rights = "call_rights.csv"
yield_curve = "yield_curve.csv"
class_spreads = "class_spreads.csv"
default_costs = "default_costs.csv"
liability_streams = "liability_streams.parquet"
control_totals = "control_totals.csv"
put_rights = "put_rights.csv"
sinking_payments = "sinking_payments.csv"
coupon_steps = "coupon_steps.csv"
announced_calls = "announced_calls.csv"
"""

MODEL = """
[call_model]
rule = "optimal_with_cost"
mean_reversion = 0.03
normal_volatility = 0.0100
issuer_cost_share_of_par = 0.005
source = "Invented for the demo; \
the volatility is of the order of normal swaption volatilities at the end of 2022 (from memory)"
as_of = 2022-12-30
rationale = "One volatility for every issuer; the cost stands for fees and the effort of a refunding"

[spreads]
refunding = "class_plus_concession"
concession_bp = 10
residual_fade_years = 0
no_root_fallback = "rating_spread"
source = "Invented for the demo; \
class_spreads.csv is of the order of United States corporate spreads at the end of 2022 (from memory)"
as_of = 2022-12-30
rationale = "An issuer refunds at what its class pays, plus a new-issue concession"

[defaults]
form = "net_annual_cost"
recovery_lag_months = 0
source = "Invented for the demo, default_costs.csv"
as_of = 2022-12-31
rationale = "Net of recoveries, by rating, with a margin over long-run averages"

[purchases]
share_of_cash_invested = 1.0
source = "Investment policy of the invented insurer"
as_of = 2022-12-31
rationale = "Bullets that the policy allows, at the class spreads of the valuation date; nothing callable is bought"
[[purchases.classes]]
name = "A 5 years"
rating = "A"
term_years = 5
spread_bp = 95
weight = 0.30
[[purchases.classes]]
name = "BBB 7 years"
rating = "BBB"
term_years = 7
spread_bp = 168
weight = 0.20
[[purchases.classes]]
name = "A 10 years"
rating = "A"
term_years = 10
spread_bp = 115
weight = 0.20
[[purchases.classes]]
name = "BBB 10 years"
rating = "BBB"
term_years = 10
spread_bp = 182
weight = 0.15
[[purchases.classes]]
name = "AA 20 years"
rating = "AA"
term_years = 20
spread_bp = 92
weight = 0.15

[borrowing]
spread_bp = 60
limit_share_of_statement_assets = 0.03
source = "Credit line of the invented insurer"
as_of = 2022-12-31
rationale = "Bridges a month; beyond the limit assets are sold"

[investment_expense]
annual_share_of_statement_value = 0.0010
source = "Invented for the demo"
as_of = 2022-12-31
rationale = "Cost of managing investment-grade bonds in-house"

[maintenance_reserve]
interest_maintenance_reserve = 0
asset_valuation_reserve = 0

[tax]
rate = 0

[criterion]
sentence = "Statement surplus, all segments together, \
is not negative at any year end of the forty years in any of the seven scenarios."
fixed_on = 2023-01-20
measure = "statement_surplus"
dates = "every_year_end"
scenarios_allowed_below = 0
limit = 0

[horizon]
months = 480
asset_close_out = "market_value"
liability_close_out = "statutory_reserve"
source = "Choice of the invented actuary"
as_of = 2022-12-31
rationale = "After forty years one to three per cent of today's reserves is left, by scenario"

[discounting]
npv_constant_bp = 0
source = "Choice of the invented actuary"
as_of = 2022-12-31
rationale = "Gaps are read at the path's own one-month rates"

[rates]
rate_basis = "par"
source = "United States Department of the Treasury, Daily Treasury Par Yield Curve Rates, 2022-12-30; \
the seven deterministic paths of the asset adequacy regulations"
as_of = 2022-12-30
rationale = "Last business day before the valuation date"
[[rates.paths]]
kind = "seven_deterministic"
floor = "shift"
within_year = "linear"
recovery = "cut"

[liabilities]
scenario_set_digest = "{digest}"
rate_insensitive_blocks = ["payout_annuities", "guaranteed_contracts"]
source = "Roll-forward in scenarios/harbour_ridge_liabilities.py, invented for the demo"
as_of = 2022-12-31
rationale = "Deferred annuities were run on each path; the other two blocks pay what was promised whatever rates do"

[texts]
prior_additional_reserve = "None: this is the first year of the invented insurer's test."
reliances = [
    "Holdings, statement values and accrued interest: Osbert Quayle (invented), investment accounting.",
    "Policy data and liability streams: Tamsin Orrery (invented), valuation systems.",
]
notes = [
    "The insurer, its people, its holdings and its liabilities are invented; \
figures must not be used for any other purpose.",
    "The Treasury levels from which coupons were built are approximate year averages from memory.",
]
law_and_manual = "11 NYCRR 95 and section 30 of the Valuation Manual (VM-30), as far as a demo needs them."
materiality = "One million dollars, a little under 0.1 % of reserves (invented)."
"""

WITHOUT_DIGEST = 'scenario_set_digest = "{digest}"\n'


def study_text(cash: dict[str, float], digest: str) -> str:
    """study.toml; without a digest as long as no stream depends on paths."""
    segments = "".join(
        f'\n[[segments]]\nname = "{name}"\ntitle = "{title}"\ncash = {cash[name]:.2f}\n'
        for name, title in SEGMENTS.items()
    )
    model = MODEL.replace("{digest}", digest) if digest else MODEL.replace(WITHOUT_DIGEST, "")
    return HEAD + segments + model
