"""A synthetic study of any size for the benchmarks: invented securities, one liability stream, seven paths."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pandas as pd

CURVE = {1: 4.12, 3: 4.42, 6: 4.76, 12: 4.73, 24: 4.41, 36: 4.22, 60: 3.99, 84: 3.96, 120: 3.88, 240: 4.14, 360: 3.97}
ORIGIN = 'source = "invented"\nas_of = 2022-12-30\nrationale = "benchmark"\n'


def securities(count: int, callable_count: int, seed: int, monthly: float = 0.15) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Securities and call rights: of the callable ones a share `monthly`, the rest on coupon dates; of the others most
    have a make-whole right with a par-call date.
    """
    rng = np.random.default_rng(seed)
    rows, rights = [], []
    for i in range(count):
        name, years = f"B{i:06d}", int(rng.integers(2, 31))
        month = int(rng.integers(1, 13))
        maturity = pd.Timestamp(2022 + years, month, 15)
        callable_ = i < callable_count
        make_whole = not callable_ and rng.random() < 0.7 and years > 2
        coupon = round(float(rng.uniform(0.03, 0.065)), 5)
        rating = str(rng.choice(["AA", "A", "BBB"]))
        par_call = maturity - pd.DateOffset(months=3) if make_whole else pd.NaT
        rows.append((name, f"Issuer {i}", "agency" if callable_ else "corporate", f"sector {i % 10}", rating,
                     round(100.0 - float(rng.uniform(0, 6)), 3), np.nan, coupon, 2, "30/360", False,
                     maturity - pd.DateOffset(years=years + 2), pd.NaT, maturity, par_call))  # fmt: skip
        if make_whole:
            rights.append((name, maturity - pd.DateOffset(years=years + 1), par_call, "make_whole", np.nan, 20.0))
        if callable_ and years > 2:
            first = maturity - pd.DateOffset(years=int(rng.integers(1, years)))
            style = "american" if rng.random() < monthly else "bermudan"
            last = maturity - pd.DateOffset(days=1)
            premium = coupon * 50.0 if rng.random() < 0.5 else 0.0
            step = first + pd.DateOffset(years=1)
            if premium and step < last:
                rights.append((name, first, step - pd.DateOffset(days=1), style, 100.0 + premium, np.nan))
                rights.append((name, step, last, style, 100.0, np.nan))
            else:
                rights.append((name, first, last, style, 100.0, np.nan))
    columns = ["security_id", "issuer", "asset_class", "sector", "rating", "clean_price", "spread_bp", "coupon_rate",
               "coupon_frequency", "day_count", "end_of_month", "issue_date", "first_coupon_date", "maturity_date",
               "par_call_date"]  # fmt: skip
    frame = pd.DataFrame(rows, columns=columns)
    right_columns = ["security_id", "first_date", "last_date", "style", "price", "make_whole_spread_bp"]
    return frame, pd.DataFrame(rights, columns=right_columns).assign(notice_days=0)


def write_study(
    folder: Path, count: int, callable_count: int, paths: int = 7, seed: int = 1, monthly: float = 0.15
) -> Path:
    """Writes the study; more than seven paths repeat the seven as shift tables would, by further presets."""
    folder.mkdir(parents=True, exist_ok=True)
    bonds, rights = securities(count, callable_count, seed, monthly)
    lots = pd.DataFrame({"lot_id": [f"L{i:06d}" for i in range(count)], "security_id": bonds["security_id"]})
    lots = lots.assign(segment="general", par=1e6, book_value=985_000.0, tax_basis=985_000.0)
    reserve = 1.03e6 * count
    months = np.arange(481)
    left = reserve * (1.0 - months / 480.0)
    stream = pd.concat(
        [
            pd.DataFrame({"month": months, "item": "reserve_statutory", "amount": left}),
            pd.DataFrame({"month": months[1:], "item": "annuity_payment", "amount": reserve / 480.0 * 1.6}),
        ]
    ).assign(segment="general", block="payout", scenario="all")
    control = pd.DataFrame(
        {
            "item": ["par", "book_value", "reserve_statutory"],
            "segment": "all",
            "amount": [1e6 * count, 985_000.0 * count, reserve],
        }
    )
    ratings = ["AA", "A", "BBB"]
    tables = {
        "securities": bonds,
        "lots": lots,
        "call_rights": rights,
        "yield_curve": pd.DataFrame({"tenor_months": list(CURVE), "rate": [y / 100.0 for y in CURVE.values()]}),
        "class_spreads": pd.DataFrame({"rating": ratings, "life_years": 10.0, "spread_bp": [80.0, 115.0, 165.0]}),
        "default_costs": pd.DataFrame({"rating": ratings, "annual_cost": [0.0003, 0.0006, 0.0018]}),
        "liability_streams": stream[["segment", "block", "scenario", "month", "item", "amount"]],
        "control_totals": control,
    }
    for name, table in tables.items():
        dates = {c: table[c].dt.date for c in table.columns if str(table[c].dtype).startswith("datetime")}
        table.assign(**dates).to_parquet(folder / f"{name}.parquet", index=False)
    (folder / "study.toml").write_text(study_text(paths), encoding="utf-8")
    return folder


def study_text(paths: int) -> str:
    """study.toml of the benchmark."""
    preset = '[[rates.paths]]\nkind = "seven_deterministic"\nfloor = "shift"\nwithin_year = "{}"\nrecovery = "cut"\n'
    sources = "".join(preset.format("linear" if i % 2 == 0 else "year_end_steps") for i in range(max(1, paths // 7)))
    names = ("securities", "lots", "call_rights", "yield_curve", "class_spreads", "default_costs",
             "liability_streams", "control_totals")  # fmt: skip
    tables = "".join(f"{n} = {json.dumps(n + '.parquet')}\n" for n in names)
    classes = "".join(
        f'[[purchases.classes]]\nname = "{r} {t} years"\nrating = "{r}"\nterm_years = {t}\n'
        f"spread_bp = {s}\nweight = 0.2\n"
        for r, t, s in (("AA", 10, 80), ("A", 5, 115), ("A", 10, 115), ("BBB", 10, 165), ("A", 20, 130))
    )
    return f"""[study]
name = "Benchmark"
company = "Invented"
business = "Benchmark"
valuation_date = 2022-12-31
information_date = 2023-01-31
currency = "USD"
data_status = "invented"
responsible_actuary = "none"
[tables]
{tables}
[[segments]]
name = "general"
title = "General"
cash = 1000.0
[call_model]
rule = "optimal_with_cost"
mean_reversion = 0.03
normal_volatility = 0.01
issuer_cost_share_of_par = 0.005
{ORIGIN}
[spreads]
refunding = "class_plus_concession"
concession_bp = 10
residual_fade_years = 0
no_root_fallback = "rating_spread"
{ORIGIN}
[defaults]
form = "net_annual_cost"
recovery_lag_months = 0
{ORIGIN}
[purchases]
share_of_cash_invested = 1.0
{ORIGIN}
{classes}
[borrowing]
spread_bp = 50
limit_share_of_statement_assets = 0.03
{ORIGIN}
[investment_expense]
annual_share_of_statement_value = 0.001
{ORIGIN}
[maintenance_reserve]
interest_maintenance_reserve = 0
asset_valuation_reserve = 0
[tax]
rate = 0
[criterion]
sentence = "Statement surplus is not negative at any year end."
fixed_on = 2023-01-15
measure = "statement_surplus"
dates = "every_year_end"
scenarios_allowed_below = 0
limit = 0
[horizon]
months = 480
asset_close_out = "market_value"
liability_close_out = "statutory_reserve"
{ORIGIN}
[discounting]
npv_constant_bp = 0
{ORIGIN}
[rates]
rate_basis = "par"
{ORIGIN}
{sources}
[liabilities]
rate_insensitive_blocks = ["payout"]
{ORIGIN}
"""
