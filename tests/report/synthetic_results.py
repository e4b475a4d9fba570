"""An invented `RunResults`: made by arithmetic, not by the engine, so that the report can be tested alone.

Nothing here is a projection. The frames follow `COLUMNS`, the sums add, the sizes are those of a real run
(seven scenarios, three segments, 480 months, 60 securities); every option turns one thing a report must survive.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from datetime import date
from math import exp, pi, sin

import numpy as np
import pandas as pd

from projector.run.results import COLUMNS, RunResults
from projector.study.records import (
    Borrowing,
    CallModel,
    Criterion,
    Defaults,
    Discounting,
    FileDigest,
    Horizon,
    InvestmentExpense,
    Liabilities,
    Numerics,
    Origin,
    PathSource,
    PurchaseClass,
    Purchases,
    Rates,
    Segment,
    Spreads,
    Study,
    Tables,
    Texts,
)

HOSTILE = "<script>alert('x')</script> \"q\" & {{ 7*7 }} $a_b$ \u05d0\u05d1\u05d2 \u202edesrever\u202c " + "long" * 40
TITLES = ("Level", "Gradual up", "Up and down", "Pop up", "Gradual down", "Down and up", "Pop down")
CLASSES = ("corporate", "utility", "agency", "private", "municipal", "treasury")
RATINGS = ("AAA", "AA", "A", "A-", "BBB+", "BBB")
FORMS = ("bermudan", "american", "make_whole", "none", "european", "make_whole+american")
TENORS = (3, 6, 12, 24, 36, 60, 84, 120, 240, 360)
SPECS = (("deferred_annuities", "Deferred annuities", 1200e6), ("payout", "Payout annuities", 900e6),
         ("whole_life", "Whole life", 633.5e6))  # fmt: skip


@dataclass(frozen=True)
class Options:
    """What the invented run looks like."""

    scenarios: int = 7
    segments: int = 3
    months: int = 480
    securities: int = 60
    scale: float = 1.0  # of every amount; 0.01 gives a study small enough for $ thousand
    lift: float = 0.0  # added to every surplus, as a share of the opening reserve
    hostile: bool = False
    calls: bool = True
    callable: bool = True
    shortfall: bool = False
    criterion_measure: str = "statement_surplus"
    allowed_below: int = 0
    prior: str = "$6.2 million, held in cash"


def build(options: Options | None = None) -> RunResults:
    """All frames and the study, from the options alone."""
    opt = options or Options()
    study = _study(opt)
    names = [f"S{k + 1}" for k in range(opt.scenarios)]
    titles = [_text(opt, TITLES[k % 7] if k < 7 else f"{TITLES[k % 7]} {k // 7 + 1}") for k in range(opt.scenarios)]
    scenarios = pd.DataFrame({"scenario": names, "title": titles, "kind": "seven_deterministic"})
    securities = _securities(opt)
    calls, decisions = _calls(opt, securities, names)
    balance = _balance(opt, names)
    flows = _flows(opt, study, names, calls)
    frames = {
        "scenarios": scenarios,
        "rates": _rates(opt, names),
        "flows": flows,
        "balance": balance,
        "mix": _mix(opt, names, balance),
        "measures": _measures(opt, balance, calls, securities, names),
        "calls": calls,
        "puts": pd.DataFrame(columns=list(COLUMNS["puts"])),
        "decisions": decisions,
        "securities": securities,
        "control": _control(opt, study, securities, balance),
        "identities": _identities(opt),
        "choices": _choices(opt, study),
        "special_cases": _special(opt, securities),
    }
    frames = {name: frame[list(COLUMNS[name])].reset_index(drop=True) for name, frame in frames.items()}
    digests = {name: f"{k:02x}" * 32 for k, name in enumerate(frames, start=16)}
    warning = _text(opt, "call_rights.csv row 12: the price rises from one row to the next")
    return RunResults(study=study, set_digest="5e" * 32, warnings=(warning,), result_digests=digests, **frames)


def _text(opt: Options, plain: str) -> str:
    return f"{plain} {HOSTILE}" if opt.hostile else plain


def _segments(opt: Options) -> tuple[tuple[str, str, float], ...]:
    return tuple((name, title, reserve * opt.scale) for name, title, reserve in SPECS[: opt.segments])


def _origin(opt: Options, source: str) -> Origin:
    return Origin(
        source=_text(opt, source), as_of="2025-11-30", rationale=_text(opt, "Set by the investment department.")
    )


def _study(opt: Options) -> Study:
    def of(source: str) -> Origin:
        return _origin(opt, source)

    segments = tuple(
        Segment(name=name, title=_text(opt, title), cash=0.02 * reserve) for name, title, reserve in _segments(opt)
    )
    return Study(
        name=_text(opt, "Year-end test"),
        company=_text(opt, "Meridian Example Life"),
        business=_text(opt, "Annuities and whole life"),
        valuation_date=date(2025, 12, 31),
        information_date=date(2026, 2, 10),
        currency="USD",
        data_status="invented",
        responsible_actuary=_text(opt, "A. N. Actuary"),
        segments=segments,
        call_model=CallModel(
            rule="optimal_with_cost", mean_reversion=0.03, normal_volatility=0.0095, issuer_cost_share_of_par=0.005,
            origin=of("Swaption quotes")),
        spreads=Spreads(
            refunding="class_plus_concession", concession_bp=10.0, residual_fade_years=0.0,
            no_root_fallback="rating_spread", origin=of("Dealer survey")),
        defaults=Defaults(form="net_annual_cost", recovery_lag_months=0, origin=of("Own experience")),
        purchases=Purchases(
            share_of_cash_invested=1.0, origin=of("Investment policy"),
            classes=(
                PurchaseClass(name="A 5 years", rating="A", term_years=5, spread_bp=95.0, weight=0.4),
                PurchaseClass(name="BBB 10 years", rating="BBB", term_years=10, spread_bp=150.0, weight=0.6))),
        borrowing=Borrowing(spread_bp=50.0, limit_share_of_statement_assets=0.03, origin=of("Treasury line")),
        investment_expense=InvestmentExpense(annual_share_of_statement_value=0.0012, origin=of("Expense study")),
        criterion=Criterion(
            sentence=_text(opt, "Surplus is not below zero at any year end in any of the seven scenarios."),
            fixed_on=date(2026, 1, 20), measure=opt.criterion_measure, dates="every_year_end",
            scenarios_allowed_below=opt.allowed_below, limit=0.0),
        horizon=Horizon(
            months=opt.months, asset_close_out="market_value", liability_close_out="statutory_reserve",
            origin=of("Run-off study")),
        discounting=Discounting(npv_constant_bp=0.0, origin=of("House rule")),
        rates=Rates(
            rate_basis="par",
            paths=(PathSource(kind="seven_deterministic", floor="shift", within_year="linear", recovery="cut"),),
            origin=of("Treasury par yields, December 31, 2025")),
        liabilities=Liabilities(
            scenario_set_digest="5e" * 32, rate_insensitive_blocks=("payout",), origin=of("Valuation system extract")),
        numerics=Numerics(defaulted=("interpolation",)),
        texts=Texts(
            prior_additional_reserve=_text(opt, opt.prior) if opt.prior else "",
            reliances=(_text(opt, "B. Person, investment department, for asset data; checked against the ledger"),),
            notes=(_text(opt, "One block of structured settlements is tested outside this report."),),
            law_and_manual=_text(opt, "Valuation Manual, 2025 edition"), materiality=_text(opt, "$5 million")),
        tables=_tables(opt),
        input_digest="3f9a0c41d27e" + "b5" * 26,
        files=(FileDigest(name="study.toml", sha256="aa" * 32, bytes=4096),),
    )  # fmt: skip


def _tables(opt: Options) -> Tables:
    months = np.arange(opt.months + 1)
    rows: list[pd.DataFrame] = []
    for name, _, reserve in _segments(opt):
        scenarios = ["all"] if name == "payout" else [f"S{k + 1}" for k in range(opt.scenarios)]
        for k, scenario in enumerate(scenarios):
            run_off = reserve * np.exp(-months / (150.0 + 5 * k))
            items = {"reserve_statutory": run_off, "annuity_payment": run_off * 0.008, "expense": run_off * 0.0004}
            if name == "whole_life":
                items["premium"] = run_off * 0.002
            for item, amount in items.items():
                first = 0 if item == "reserve_statutory" else 1
                frame = pd.DataFrame({"month": months[first:], "amount": amount[first:]})
                rows.append(frame.assign(segment=name, block=_text(opt, name), scenario=scenario, item=item))
    streams = pd.concat(rows, ignore_index=True)[["segment", "block", "scenario", "month", "item", "amount"]]
    curve = pd.DataFrame({"tenor_months": TENORS, "rate": [0.036 + 0.00003 * t for t in TENORS]})
    spreads = pd.DataFrame(
        [(r, life, 40.0 + 22 * k + 2 * life) for k, r in enumerate(RATINGS) for life in (1, 5, 10, 20, 30)],
        columns=["rating", "life_years", "spread_bp"],
    )
    costs = pd.DataFrame({"rating": RATINGS, "annual_cost": [0.0001 * (k + 1) ** 2 for k in range(len(RATINGS))]})
    empty = pd.DataFrame()
    return Tables(
        securities=empty, lots=empty, call_rights=empty, yield_curve=curve, class_spreads=spreads,
        default_costs=costs, liability_streams=streams, control_totals=empty)  # fmt: skip


def _shift(k: int, years: float) -> float:
    """The seven paths in outline, in percentage points."""
    up = min(0.5 * years, 5.0)
    tent = max(0.0, min(years, 10.0 - years))
    pop = 0.0 if years == 0 else 1.0
    shift = (0.0, up, tent, 3.0 * pop, -up, -tent, -3.0 * pop)[k % 7]
    return max(shift, -1.9)


def _rates(opt: Options, names: list[str]) -> pd.DataFrame:
    rows = [
        (name, month, tenor, 0.036 + 0.00003 * tenor + _shift(k, month / 12) / 100)
        for k, name in enumerate(names)
        for month in [0, 1, *range(12, opt.months + 1, 12)]
        for tenor in TENORS
    ]
    return pd.DataFrame(rows, columns=list(COLUMNS["rates"]))


def _securities(opt: Options) -> pd.DataFrame:
    rng = np.random.default_rng(11)
    total = sum(reserve for *_, reserve in _segments(opt)) * 0.97
    weights = rng.uniform(0.4, 2.0, opt.securities)
    pars = np.round(total * weights / weights.sum(), -3 if opt.scale >= 0.1 else 0)
    rows = []
    for k, par in enumerate(pars):
        form = FORMS[k % 6] if opt.callable else "none"
        life = 3 + int(rng.integers(2, 28))
        first = date(2025 + min(1 + int(rng.integers(0, 12)), life - 1), 6, 30) if form != "none" else None
        coupon = round(0.03 + 0.0005 * int(rng.integers(0, 70)), 4)
        price = 100 + (coupon - 0.045) * 300
        worst = first if first is not None and price > 101 else date(2025 + life, 12, 31)
        rows.append((
            _text(opt, f"B-{k + 1:04d}"), _text(opt, f"Issuer {k + 1}"), CLASSES[k % 6], "industrial", RATINGS[k % 6],
            coupon, 2, date(2025 + life, 12, 31), form, first,
            102.0 if first else np.nan, par, par * (1 + 0.001 * (k % 9)),
            par * price / 100, par * coupon / 24,
            par * coupon / 23, 0.5 * (k % 3) - 0.4, price, price + 1e-7, 60.0 + 2 * k, 55.0 + 2 * k, 70.0 + 2 * k,
            "rating_spread" if k == 4 else ("given" if k % 10 == 9 else "price"), coupon - 0.0003 * (k % 5), worst,
            coupon - 0.001, 25.0 if "make_whole" in form else np.nan))  # fmt: skip
    return pd.DataFrame(rows, columns=list(COLUMNS["securities"]))


def _calls(opt: Options, securities: pd.DataFrame, names: list[str]) -> tuple[pd.DataFrame, pd.DataFrame]:
    calls, decisions = [], []
    segments = [name for name, *_ in _segments(opt)]
    for k, scenario in enumerate(names):
        for j, bond in enumerate(securities.itertuples()):
            if bond.first_call_date is None or not opt.calls:
                continue
            first = (bond.first_call_date.year - 2025) * 12 - 6
            last = (bond.maturity_date.year - 2025) * 12
            for month in range(max(first, 1), min(last, opt.months), 6):
                refunding = 0.045 + _shift(k, month / 12) / 100
                bar = 102.5
                keep = bar + (bond.coupon_rate - refunding - 0.002) * 400
                called = keep >= bar
                bound = not called and keep < bar - 3
                decisions.append((scenario, bond.security_id, month, keep + 0.2, np.nan if bound else keep, bar,
                                  "bound" if bound else "solve", called))  # fmt: skip
                if called:
                    par, years = bond.par * 0.98, max((last - month) / 12 - 1, 0.0)
                    calls.append((scenario, bond.security_id, segments[j % len(segments)], month, month, "stated price",
                                  par, 102.0, par * 0.02, bond.book_yield, refunding, years,
                                  par * (bond.book_yield - refunding) * years))  # fmt: skip
                    break
    return (
        pd.DataFrame(calls, columns=list(COLUMNS["calls"])),
        pd.DataFrame(decisions, columns=list(COLUMNS["decisions"])),
    )


def _surplus_share(k: int, years: float) -> float:
    """Surplus as a share of the opening reserve: a shape for each scenario."""
    grow = 0.03 * (1 - exp(-years / 12))
    dip = 0.014 * sin(pi * min(years / 8, 1.0))
    early = 0.002 * min(years, 1)
    shapes = (grow, grow * 0.9 - dip * 0.2, grow * 0.6 - dip, grow * 0.8 - 1.2 * dip, grow * 0.1, grow * 0.5 + early)
    return (*shapes, -0.4 * grow)[k % 7]


def _balance(opt: Options, names: list[str]) -> pd.DataFrame:
    months = np.arange(opt.months + 1)
    parts = []
    for k, scenario in enumerate(names):
        share = np.array([_surplus_share(k, m / 12) for m in months]) + opt.lift * np.minimum(months, 1)
        for s, (name, _, opening) in enumerate(_segments(opt)):
            reserve = opening * np.exp(-months / (150.0 + (0 if name == "payout" else 5 * k)))
            surplus = opening * share * (1.0 + 0.3 * (s - 1))
            borrowing = np.where((k == 3) & (months > 20) & (months < 40), opening * 0.004, 0.0)
            short = np.where((k == 6) & (months > 290) & opt.shortfall, opening * 0.01, 0.0)
            assets = reserve + surplus + borrowing + short
            cash = np.where(months == 0, 0.02 * opening, 0.001 * opening)
            accrued = 0.008 * assets
            start = np.maximum((assets - cash - accrued) * np.exp(-months / (90.0 - 5 * k)), 0.0)
            frame = pd.DataFrame({
                "scenario": scenario, "segment": name, "month": months, "cash": cash, "statement_start": start,
                "statement_bought": assets - cash - accrued - start, "accrued": accrued, "recoveries": 0.0,
                "borrowing": borrowing, "shortfall": short, "reserve": reserve, "statement_surplus": surplus,
                "market_assets": np.where(months % 12 == 0, (assets - cash) * (1 + 0.01 * (k - 3)), np.nan),
                "earned_rate": 0.048})  # fmt: skip
            frame["market_surplus"] = (
                frame["market_assets"] + cash - borrowing - short - reserve * (1 + 0.009 * (k - 3))
            )
            parts.append(frame)
    each = pd.concat(parts, ignore_index=True)
    sums = [c for c in COLUMNS["balance"] if c not in ("scenario", "segment", "month", "earned_rate")]
    total = each.groupby(["scenario", "month"], as_index=False)[sums].sum(min_count=1)
    total = total.assign(segment="all", earned_rate=0.048)
    return pd.concat([each, total], ignore_index=True)


def _flows(opt: Options, study: Study, names: list[str], calls: pd.DataFrame) -> pd.DataFrame:
    months = np.arange(1, opt.months + 1)
    parts = []
    for k, scenario in enumerate(names):
        for name, _, opening in _segments(opt):
            run_off = opening * np.exp(-months / (150.0 + 5 * k))
            held = opening * np.exp(-months / (90.0 - 5 * k))
            sized = {
                ("start", "coupon"): held * 0.004, ("start", "principal"): held * 0.009,
                ("bought", "coupon"): (opening - held) * 0.002, ("bought", "principal"): (opening - held) * 0.003,
                ("bought", "purchase"): -held * 0.006, ("segment", "annuity_payment"): -run_off * 0.008,
                ("segment", "expense"): -run_off * 0.0004, ("segment", "investment_expense"): -held * 0.0001,
                ("segment", "cash_interest"): held * 0.00001}  # fmt: skip
            if name == "whole_life":
                sized["segment", "premium"] = run_off * 0.002
            for (holding, category), amount in sized.items():
                parts.append(pd.DataFrame({"scenario": scenario, "segment": name, "month": months,
                                           "holding": holding, "category": category, "amount": amount}))  # fmt: skip
    if len(calls):
        called = calls.rename(columns={"par_called": "call_par", "premium": "call_premium"})
        for category in ("call_par", "call_premium"):
            part = called[["scenario", "segment", "month"]].assign(
                holding="start", category=category, amount=called[category]
            )
            parts.append(part.groupby(["scenario", "segment", "month", "holding", "category"], as_index=False).sum())
    return pd.concat(parts, ignore_index=True)


def _mix(opt: Options, names: list[str], balance: pd.DataFrame) -> pd.DataFrame:
    rows = []
    for b in balance[balance["month"].isin([y * 12 for y in (0, 5, 10, 20, 30, 40)])].itertuples():
        year = b.month // 12
        for j, asset_class in enumerate(CLASSES):
            for can, share in ((True, 0.45 * exp(-year / 6)), (False, 1 - 0.45 * exp(-year / 6))):
                rows.append((b.scenario, b.segment, year, asset_class, can, b.statement_start * share * (j + 1) / 21))
        rows.append((b.scenario, b.segment, year, "bought: A 5 years", False, b.statement_bought * 0.4))
        rows.append((b.scenario, b.segment, year, "bought: BBB 10 years", False, b.statement_bought * 0.6))
        rows.append((b.scenario, b.segment, year, "cash", False, b.cash))
    return pd.DataFrame(rows, columns=list(COLUMNS["mix"]))


def _measures(opt: Options, balance: pd.DataFrame, calls: pd.DataFrame, securities: pd.DataFrame, names: list[str]):
    callable_par = float(securities.loc[securities["first_call_date"].notna(), "par"].sum())
    rows = []
    column, parts = opt.criterion_measure, opt.segments
    for (scenario, segment), b in balance.groupby(["scenario", "segment"], sort=False):
        ends = b[(b["month"] % 12 == 0) & (b["month"] > 0)]  # month 0 is what the ledger says
        end = ends.iloc[-1]
        low_s, low_m = ends.loc[ends["statement_surplus"].idxmin()], ends.loc[ends["market_surplus"].idxmin()]
        own = calls[calls["scenario"] == scenario]
        own = own if segment == "all" else own[own["segment"] == segment]
        k = names.index(str(scenario))
        short = b[b["shortfall"] > 0]
        several = k == 2
        rows.append({
            "scenario": scenario, "segment": segment, "ending_statement_surplus": end["statement_surplus"],
            "ending_market_surplus": end["market_surplus"],
            "pv_ending_earned_rate": end["statement_surplus"] * exp(-0.047 * opt.months / 12),
            "pv_ending_one_month_treasury": end["statement_surplus"] * exp(-0.036 * opt.months / 12),
            "lowest_statement_surplus": low_s["statement_surplus"], "lowest_statement_year": low_s["month"] // 12,
            "lowest_market_surplus": low_m["market_surplus"], "lowest_market_year": low_m["month"] // 12,
            "years_negative": int((ends["statement_surplus"] < 0).sum()),
            "criterion_value": ends[column].min(), "criterion_met": bool(ends[column].min() >= 0),
            "npv_gap": 1e6 * (k - 3) * opt.scale, "npv_close_out_assets": 2e6 * opt.scale,
            "npv_close_out_liabilities": 1.5e6 * opt.scale, "irr_assets": np.nan if several else 0.051 - 0.001 * k,
            "irr_assets_status": "several" if several else "one", "irr_assets_on_statement_value": 0.0495,
            "cost_rate": 0.043, "cost_rate_status": "one", "irr_gap": np.nan if several else 0.008 - 0.001 * k,
            "horizon_return": 0.047 - 0.0007 * k, "callable_par": callable_par / (1 if segment == "all" else parts),
            "stated_callable_par": callable_par / (1 if segment == "all" else parts),
            "stated_par_called": float(own["par_called"].sum()),
            "par_called": float(own["par_called"].sum()), "call_premium": float(own["premium"].sum()),
            "yield_given_up": float(own["yield_given_up"].sum()), "peak_borrowing": b["borrowing"].max(),
            "months_with_borrowing": int((b["borrowing"] > 0).sum()),
            "par_sold": 12e6 * opt.scale if k == 3 else 0.0, "sale_gain": -0.4e6 * opt.scale if k == 3 else 0.0,
            "first_shortfall_month": int(short["month"].iloc[0]) if len(short) else -1,
            "largest_shortfall": b["shortfall"].max()})  # fmt: skip
    return pd.DataFrame(rows)


def _control(opt: Options, study: Study, securities: pd.DataFrame, balance: pd.DataFrame) -> pd.DataFrame:
    rows = [("lots_count", "all", float(len(securities)), float(len(securities)), 0.0)]
    for item, amount in (("par", securities["par"].sum()), ("book_value", securities["statement_value"].sum())):
        rows.append((item, "all", float(amount), float(amount) + 0.002, 0.002))
    for name, _, reserve in _segments(opt):
        rows.append(("reserve_statutory", name, reserve, reserve, 0.0))
    return pd.DataFrame(rows, columns=list(COLUMNS["control"]))


def _identities(opt: Options) -> pd.DataFrame:
    names = ("Cash in equals cash out", "Par opened, paid, called, sold and closed", "Book value rolls forward",
             "Surplus rolls forward", "Segments add to all")  # fmt: skip
    rows = [
        (
            f"I{k + 1}",
            name,
            10080 * (k + 1),
            "1e-9 x gross + 1e-6",
            3.1e-7 * k,
            f"S{k % 7 + 1}, payout, month {k}",
            True,
        )
        for k, name in enumerate(names)
    ]
    return pd.DataFrame(rows, columns=list(COLUMNS["identities"]))


def _choices(opt: Options, study: Study) -> pd.DataFrame:
    rows = []
    groups = {
        "call_model": {"rule": "optimal_with_cost", "mean_reversion": "0.03 a year", "normal_volatility": "0.0095",
                       "issuer_cost_share_of_par": "0.005 of par"},
        "spreads": {"refunding": "class_plus_concession", "concession": "10 bp", "residual_fade": "0 years (kept)"},
        "defaults": {"form": "net_annual_cost"}, "purchases": {"share_of_cash_invested": "1.0"},
        "borrowing": {"spread": "50 bp", "limit": "0.03 of statement assets"},
        "horizon": {"months": "480", "asset_close_out": "market_value"}, "rates": {"floor": "shift"},
        "numerics": {"interpolation": "monotone", "block_paths": "256"}}  # fmt: skip
    for group, values in groups.items():
        source = _text(opt, f"Source of {group}")
        for name, value in values.items():
            stated = "default" if group == "numerics" else "stated"
            rows.append((group, name, _text(opt, value), stated, source, "2025-11-30", _text(opt, "As last year.")))
    return pd.DataFrame(rows, columns=list(COLUMNS["choices"]))


def _special(opt: Options, securities: pd.DataFrame) -> pd.DataFrame:
    bond = securities.iloc[4]
    rows = [("no spread gives the price back", 1, bond["par"], bond["security_id"], "class spread for its rating used"),
            ("refunding spread below the make-whole spread", 0, 0.0, "", "none found")]  # fmt: skip
    return pd.DataFrame(rows, columns=list(COLUMNS["special_cases"]))


def without_rows(results: RunResults, *tables: str) -> RunResults:
    """The same results with some frames emptied."""
    return replace(results, **{name: getattr(results, name).iloc[0:0] for name in tables})
