"""Studies that the tests of the projection share: one small enough for a pencil, one that does everything.

Both are built from the small valid study of `tests/study/small_study.py`; all amounts are invented.
"""

from __future__ import annotations

import math
from pathlib import Path
from typing import Any

from small_study import SmallStudy, _lot, _security

from projector.rates.paths import build_paths
from projector.study.reading import read_study

Row = dict[str, Any]

MONTHS = 24
SCENARIOS = tuple(f"S{i}" for i in range(1, 8))


def stream_rows(segment: str, block: str, scenario: str, item: str, amounts: dict[int, float]) -> list[Row]:
    """Rows of the liability table for one item."""
    return [
        {"segment": segment, "block": block, "scenario": scenario, "month": str(m), "item": item, "amount": repr(a)}
        for m, a in amounts.items()
    ]


def call_right(security: str, first: str, last: str, price: str, style: str) -> Row:
    """One row of the call schedule."""
    return {
        "security_id": security, "first_date": first, "last_date": last, "style": style, "price": price,
        "make_whole_spread_bp": "", "notice_days": "0",
    }  # fmt: skip


def totals(tables: dict[str, list[Row]], cash: dict[str, float]) -> list[Row]:
    """Control totals that tie to the tables."""
    lots = tables["lots"]
    opening = {
        (row["block"], row["scenario"]): float(row["amount"])
        for row in tables["liability_streams"]
        if row["item"] == "reserve_statutory" and row["month"] == "0" and row["scenario"] in ("all", "S1")
    }
    figures = {
        "lots_count": float(len(lots)),
        "par": math.fsum(float(lot["par"]) for lot in lots),
        "book_value": math.fsum(float(lot["book_value"]) for lot in lots),
        "reserve_statutory": math.fsum(opening.values()),
        "cash": math.fsum(cash.values()),
    }
    return [{"item": item, "segment": "all", "amount": f"{amount:.4f}"} for item, amount in figures.items()]


# The study for the pencil. Every choice below makes one number of the calculation round; see tests/run/test_by_hand.py.

HAND_B1_VALUE = 4.0 / 1.03 + 104.0 / 1.03**2  # 101.9135: two coupons and 100 at 3 % a half-year
HAND_B2_DIRTY = (2.5 + 102.5 / 1.04) / 1.04**0.5  # 99.0952: a coupon in 3 months, the last in 9, at 4 % a half-year
HAND_B2_VALUE = HAND_B2_DIRTY - 1.25  # less half a coupon accrued
HAND_SPREAD_BP = 2e4 * math.log(1.045 / 1.03)  # on a 6 % curve the issuer's and the holder's yield is 9 %
HAND_PURCHASE_BP = 2e4 * math.log(1.035 / 1.03)  # on a 6 % curve purchases yield 7 %
HAND_DEFAULT = 1.0 - 0.998**12  # 0.2 % of opening par every month
HAND_PAR = {"B1": 1_000_000.0, "B2": 400_000.0, "B3": 600_000.0}
HAND_PREMIUM, HAND_ANNUITY, HAND_SURRENDER, HAND_SURRENDER_MONTH = 4_000.0, 12_000.0, 300_000.0, 18
HAND_CASH = 50_000.0


def hand_reserve(month: int) -> float:
    """The statutory reserve as supplied. [currency]"""
    return 2_070_000.0 - 9_000.0 * month - (290_000.0 if month >= HAND_SURRENDER_MONTH else 0.0)


def hand_study(folder: Path) -> SmallStudy:
    """Three bonds, one stream, two paths, 24 months; not yet written."""
    s = SmallStudy(folder)
    s.replace("cash = 1_000.5", f"cash = {HAND_CASH!r}")
    s.replace("concession_bp = 10", "concession_bp = 0")
    s.replace("share_of_cash_invested = 1.0", "share_of_cash_invested = 0.5")
    start = s.toml.index("[[purchases.classes]]")
    s.toml = (
        s.toml[:start]
        + '[[purchases.classes]]\nname = "A 5 years"\nrating = "A"\nterm_years = 5\n'
        + f"spread_bp = {HAND_PURCHASE_BP!r}\nweight = 1.0\n\n"
        + s.toml[s.toml.index("[borrowing]") :]
    )
    s.replace("spread_bp = 50\n", "spread_bp = 60\n")
    s.replace("limit_share_of_statement_assets = 0.03", "limit_share_of_statement_assets = 0.5")
    s.replace('kind = "seven_deterministic"\nfloor = "shift"\nwithin_year = "linear"\nrecovery = "cut"',
              'kind = "shift_table"\nfile = "shifts.csv"\nwithin_year = "year_end_steps"')  # fmt: skip
    usual = {"clean_price": "", "spread_bp": repr(HAND_SPREAD_BP), "end_of_month": "true", "issue_date": "2020-12-31"}
    s.tables["securities"] = [
        _security("B1", coupon_rate="0.08", maturity_date="2032-12-31", **usual),
        _security("B2", coupon_rate="0.05", maturity_date="2023-09-30", **usual),
        _security("B3", coupon_rate="0.06", maturity_date="2027-12-31", rating="BBB", **usual),
    ]
    value = {"B1": HAND_B1_VALUE, "B2": HAND_B2_VALUE, "B3": 100.0}
    s.tables["lots"] = [_lot(f"L{b}", b, repr(p), repr(p / 100.0 * value[b])) for b, p in HAND_PAR.items()]
    s.tables["call_rights"] = [call_right("B1", "2023-12-31", "2023-12-31", "100", "european")]
    s.tables["yield_curve"] = [{"tenor_months": t, "rate": "0.06"} for t in ("3", "12", "120")]
    s.tables["class_spreads"] = [
        {"rating": rating, "life_years": "5", "spread_bp": repr(HAND_SPREAD_BP)} for rating in ("A", "BBB")
    ]
    s.tables["default_costs"] = [
        {"rating": "A", "annual_cost": "0"},
        {"rating": "BBB", "annual_cost": repr(HAND_DEFAULT)},
    ]
    s.tables["shifts"] = [
        {"title": title, "year": "0", "tenor_months": "12", "shift": shift}
        for title, shift in (("1 level", "0"), ("2 lower", "-0.03"))
    ]
    months = range(1, MONTHS + 1)
    rows = stream_rows("annuities", "payout", "all", "premium", dict.fromkeys(months, HAND_PREMIUM))
    rows += stream_rows("annuities", "payout", "all", "annuity_payment", dict.fromkeys(months, HAND_ANNUITY))
    surrender = {m: HAND_SURRENDER if m == HAND_SURRENDER_MONTH else 0.0 for m in months}
    rows += stream_rows("annuities", "payout", "all", "surrender_benefit", surrender)
    reserve = {m: hand_reserve(m) for m in range(MONTHS + 1)}
    rows += stream_rows("annuities", "payout", "all", "reserve_statutory", reserve)
    s.tables["liability_streams"] = rows
    s.tables["control_totals"] = totals(s.tables, {"annuities": HAND_CASH})
    return s


BUSY_SEGMENTS = {"annuities": 60_000.0, "life": 25_000.0}


def busy_study(folder: Path) -> SmallStudy:
    """Two segments, six securities, calls, sales, borrowing, defaults with recovery: seven paths, 24 months.

    One block is rate-sensitive; the digest of its set is worked out from the study itself.
    """
    s = SmallStudy(folder)
    s.replace("cash = 1_000.5\n", 'cash = 60000.0\n[[segments]]\nname = "life"\ntitle = "Life"\ncash = 25000.0\n')
    s.replace(
        'form = "net_annual_cost"\nrecovery_lag_months = 0', 'form = "rate_recovery_lag"\nrecovery_lag_months = 5'
    )
    s.tables["default_costs"] = [
        {"rating": "A", "annual_rate": "0.004", "recovery": "0.45"},
        {"rating": "BBB", "annual_rate": "0.012", "recovery": "0.3"},
    ]
    s.tables["securities"] = [
        _security("B1"),
        _security("B2", rating="BBB", clean_price="", spread_bp="180", par_call_date="2029-12-15"),
        _security("B3", end_of_month="TRUE", maturity_date="2027-06-30", first_coupon_date="2021-12-31"),
        _security("B4", rating="BBB", asset_class="utility", clean_price="103", coupon_rate="0.065",
                  coupon_frequency="4", maturity_date="2032-03-15"),
        _security("B5", coupon_rate="0", coupon_frequency="0", clean_price="93", maturity_date="2024-05-20"),
        _security("B6", coupon_rate="0.045", clean_price="99.5", maturity_date="2023-11-15", issue_date="2018-11-15"),
    ]  # fmt: skip
    s.tables["lots"] = [
        _lot("L1", "B1", "1000000", "990000.25"),
        _lot("L2", "B1", "500000", "505000"),
        _lot("L3", "B2", "250000.5", "250000.5"),
        _lot("L4", "B3", "100000", "100000"),
        _lot("L5", "B4", "300000", "309000"),
        _lot("L6", "B5", "200000", "186000"),
        _lot("L7", "B1", "400000", "408000") | {"segment": "life"},
        _lot("L8", "B4", "150000", "148000") | {"segment": "life"},
        _lot("L9", "B6", "120000", "119000") | {"segment": "life"},
    ]
    s.tables["call_rights"] = [
        call_right("B1", "2023-03-15", "2024-06-14", "100.5", "american"),
        call_right("B1", "2024-06-15", "2030-05-31", "100", "american"),
        call_right("B4", "2023-06-15", "2024-06-14", "102", "bermudan"),
        call_right("B4", "2024-06-15", "2031-12-15", "100", "bermudan"),
    ]
    months, shapes = range(1, MONTHS + 1), range(MONTHS + 1)
    rows = stream_rows("annuities", "payout", "all", "annuity_payment", dict.fromkeys(months, 90_000.125))
    rows += stream_rows(
        "annuities", "payout", "all", "reserve_statutory", {m: 2_450_000.0 - 75_000.0 * m for m in shapes}
    )
    for i, scenario in enumerate(SCENARIOS):
        rows += stream_rows("life", "term", scenario, "premium", dict.fromkeys(months, 9_000.0 + 100.0 * i))
        rows += stream_rows(
            "life", "term", scenario, "death_benefit", {m: 24_000.0 + 350.0 * i + 55.5 * m for m in months}
        )
        rows += stream_rows(
            "life", "term", scenario, "reserve_statutory", {m: 710_000.0 - (9_000.0 + 90 * i) * m for m in shapes}
        )
    s.tables["liability_streams"] = rows
    s.tables["control_totals"] = totals(s.tables, BUSY_SEGMENTS)
    s.replace(
        'rate_insensitive_blocks = ["payout"]',
        f'scenario_set_digest = "{"0" * 64}"\nrate_insensitive_blocks = ["payout"]',
    )
    digest = build_paths(read_study(s.write())[0]).digest()
    return s.replace("0" * 64, digest)


def special_study(folder: Path) -> SmallStudy:
    """Every term beyond a plain call, one security each: notice, puts, sinking funds, coupon steps, announced calls.

    One segment, seven paths, 24 months.
    """
    s = SmallStudy(folder)
    s.replace("cash = 1_000.5", "cash = 50000.0")
    usual = {"clean_price": "", "spread_bp": "120", "maturity_date": "2030-06-30", "end_of_month": "true"}
    usual |= {"issue_date": "2020-06-30"}
    s.tables["securities"] = [
        _security("NB", **usual | {"coupon_rate": "0.06"}),
        _security("NA", **usual | {"coupon_rate": "0.065"}),
        _security("PU", **usual | {"coupon_rate": "0.03", "rating": "BBB"}),
        _security("CP", **usual | {"coupon_rate": "0.05"}),
        _security("CN", **usual | {"coupon_rate": "0.055"}),
        _security("SD", **usual | {"coupon_rate": "0.06"}),
        _security("SC", **usual | {"coupon_rate": "0.0575"}),
        _security("ST", **usual | {"coupon_rate": "0.04"}),
        _security("AN", **usual | {"coupon_rate": "0.07"}),
        _security("AM", **usual | {"coupon_rate": "0.07"}),
    ]
    s.tables["lots"] = [
        _lot(f"L{r['security_id']}", r["security_id"], "400000", "398000") for r in s.tables["securities"]
    ]

    def call(name: str, first: str, last: str, price: str, style: str, notice: int) -> Row:
        return call_right(name, first, last, price, style) | {"notice_days": str(notice)}

    s.tables["call_rights"] = [
        call("NB", "2023-06-30", "2029-12-31", "100", "bermudan", 30),
        call("NA", "2023-01-31", "2030-05-31", "100.5", "american", 60),
        call("CP", "2023-12-31", "2029-12-31", "101", "bermudan", 0),
        call("CN", "2023-12-31", "2029-12-31", "101", "bermudan", 30),
        call("SC", "2023-03-31", "2030-05-31", "101", "american", 5),
        call("ST", "2023-06-30", "2029-12-31", "100", "bermudan", 15),
    ]
    put = {"style": "bermudan", "notice_days": "0"}
    s.tables["put_rights"] = [
        {"security_id": "PU", "first_date": "2023-06-30", "last_date": "2025-12-31", "price": "98"} | put,
        {"security_id": "CP", "first_date": "2024-06-30", "last_date": "2024-06-30", "price": "99"} | put
        | {"style": "european"},
        {"security_id": "CN", "first_date": "2024-06-30", "last_date": "2026-06-30", "price": "99"} | put
        | {"notice_days": "60"},
    ]  # fmt: skip
    s.tables["sinking_payments"] = [
        {"security_id": name, "payment_date": f"{year}-06-30", "share_of_par": "0.1", "may_double": double}
        for name, double in (("SD", "true"), ("SC", "false"))
        for year in range(2023, 2030)
    ]
    s.tables["coupon_steps"] = [
        {"security_id": "ST", "start_date": "2023-12-31", "coupon_rate": "0.055"},
        {"security_id": "ST", "start_date": "2025-12-31", "coupon_rate": "0.065"},
    ]
    s.tables["announced_calls"] = [
        {"security_id": "AN", "payment_date": "2023-05-15", "price": "101.5"},
        {"security_id": "AM", "payment_date": "2023-06-30", "price": "100"},
    ]
    names = ("put_rights", "sinking_payments", "coupon_steps", "announced_calls")
    s.replace('control_totals = "control_totals.csv"',
              "\n".join(f'{n} = "{n}.csv"' for n in ("control_totals", *names)))  # fmt: skip
    months = range(1, MONTHS + 1)
    rows = stream_rows("annuities", "payout", "all", "annuity_payment", dict.fromkeys(months, 60_000.0))
    reserve = {m: 4_075_000.0 - 50_000.0 * m for m in range(MONTHS + 1)}
    s.tables["liability_streams"] = rows + stream_rows("annuities", "payout", "all", "reserve_statutory", reserve)
    s.tables["control_totals"] = totals(s.tables, {"annuities": 50_000.0})
    return s
