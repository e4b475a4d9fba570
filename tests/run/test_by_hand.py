"""One small study, calculated again by hand, month by month, and compared with what the program did.

Three bonds, one liability stream, two paths, 24 months from 31 December 2022 (`projection_studies.hand_study`).

    path 1     the Treasury curve is flat at 6 % and stays there
    path 2     it falls to a flat 3 % in month 1 and stays there
    B1         par 1,000,000, 8 % half-yearly to December 2032, callable at 100 on one day, 31 December 2023
    B2         par   400,000, 5 % half-yearly, March and September, matures on 30 September 2023
    B3         par   600,000, 6 % half-yearly to December 2027; 0.2 % of its par defaults every month, nothing recovered
    liability  premium 4,000 and annuities 12,000 every month; 300,000 surrendered in month 18
    purchases  half of positive cash buys five-year bullets at par; borrowing costs 0.60 % a year over the short rate

Everything is chosen so that a pencil can follow; the comments say which convention a line follows. Nothing of the
program is used below except its results.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import Any

import pytest
from projection_studies import (
    HAND_ANNUITY,
    HAND_B1_VALUE,
    HAND_B2_DIRTY,
    HAND_CASH,
    HAND_PREMIUM,
    HAND_SURRENDER,
    HAND_SURRENDER_MONTH,
    MONTHS,
    hand_reserve,
)

from projector.run.runner import collect

CURVE = {"S1": 0.06, "S2": 0.03}  # the flat curve of each path from month 1 on
CALLED = {"S1": False, "S2": True}  # whether B1 is called in month 12; worked out in the first test
PURCHASE_COUPON = {"S1": 0.07, "S2": 2.0 * (1.015 * 1.035 / 1.03 - 1.0)}  # worked out in the second test
TO_THE_PENNY = 1e-6


def discount(rate: float, months: int) -> float:
    """A Treasury promise of 1 on a flat bond-equivalent curve (C5): simple interest to 1 and 3 months, half-yearly
    compounding from 6 months on, and a straight line in the logarithm between these points.
    """
    points = {0: 1.0, 1: 1.0 / (1.0 + rate / 12.0), 3: 1.0 / (1.0 + rate / 4.0)}
    if months in points:
        return points[months]
    if months >= 6:
        return (1.0 + rate / 2.0) ** (-months / 6.0)
    low, high = (1, 3) if months < 3 else (3, 6)
    at_low, at_high = points[low], points.get(high, 1.0 / (1.0 + rate / 2.0))
    share = (months - low) / (high - low)
    return at_low ** (1.0 - share) * at_high**share


def value_of(flows: dict[int, float], rate: float, half_year_spread: float) -> float:
    """Payments by months ahead, on the curve and a continuously compounded spread, given as its half-year factor."""
    return math.fsum(a * discount(rate, t) * half_year_spread ** (-t / 6.0) for t, a in flows.items())


def test_known_the_issuer_calls_where_refunding_is_cheap() -> None:
    # In month 12, 9 years of 4 per half-year are left. There is no later right, so going on costs the plain present
    # value at the issuer's refunding yield; calling costs 100 and the issuer's 0.5 % of par. On 31 December the
    # coupon has just been paid (C2), so there is no accrued interest to pay.
    left = {6 * k: 4.0 for k in range(1, 18)} | {108: 104.0}
    going_on = {path: value_of(left, rate, 1.045 / 1.03) for path, rate in CURVE.items()}
    # path 1: 3 % Treasury x spread = 4.5 % a half-year: 4/0.045 x (1 - 1.045^-18) + 100 x 1.045^-18 = 93.9
    assert going_on["S1"] == pytest.approx(4 / 0.045 * (1 - 1.045**-18) + 100 * 1.045**-18, abs=1e-10)
    assert round(going_on["S1"], 1) == 93.9
    # path 2: 1.5 % Treasury x the same spread = 2.98 % a half-year: about 114
    assert 114.0 < going_on["S2"] < 114.2
    assert {path: cost >= 100.5 for path, cost in going_on.items()} == CALLED


def test_known_purchases_are_made_at_the_coupon_that_is_worth_par() -> None:
    for path, rate in CURVE.items():
        coupon = PURCHASE_COUPON[path]
        bullet = {6 * k: 50.0 * coupon for k in range(1, 10)} | {60: 100.0 + 50.0 * coupon}
        assert value_of(bullet, rate, 1.035 / 1.03) == pytest.approx(100.0, abs=1e-10)


def short_rate(path: str, month: int) -> float:
    """The one-month rate over month m, set at the month end before (C2): 6 %/12 at first, on both paths."""
    return (0.06 if month == 1 else CURVE[path]) / 12.0


def statement_per_100(month: int, path: str) -> dict[str, float]:
    """Clean statement value per 100 of par at a month end.

    It grows at the effective yield between coupons: dirty value x (1 + y/2)^(months/6), less accrued interest, which
    builds up evenly by months (C1).
    """
    part = month % 6
    if month < 12:
        # B1 stands at 101.9135, a premium: the lowest value is to the call of month 12, at 3 % a half-year
        after_coupons = HAND_B1_VALUE if month < 6 else HAND_B1_VALUE * 1.03 - 4.0
        b1 = after_coupons * 1.03 ** (part / 6) - 4.0 * part / 6
    else:
        # not called, it goes on from 100 to maturity at its coupon, 4 % a half-year
        b1 = 0.0 if CALLED[path] else 100.0 * 1.04 ** (part / 6) - 4.0 * part / 6
    # B2 pays in months 3 and 9; half of the coupon of month 3 was accrued at the start
    if month < 3:
        b2 = HAND_B2_DIRTY * 1.04 ** (month / 6) - 2.5 * (month + 3) / 6
    elif month < 9:
        b2 = (HAND_B2_DIRTY * 1.04**0.5 - 2.5) * 1.04 ** ((month - 3) / 6) - 2.5 * (month - 3) / 6
    else:
        b2 = 0.0
    b3 = 100.0 * 1.03 ** (part / 6) - 3.0 * part / 6  # at par on coupon dates, a little below between
    return {"B1": b1, "B2": b2, "B3": b3}


def accrued_per_100(month: int, path: str) -> dict[str, float]:
    """Accrued interest per 100 of par at a month end, coupons paid."""
    b1 = 0.0 if month >= 12 and CALLED[path] else 4.0 * (month % 6) / 6
    b2 = 2.5 * ((month + 3) % 6) / 6 if month < 9 else 0.0
    return {"B1": b1, "B2": b2, "B3": 3.0 * (month % 6) / 6}


def par_left(month: int, path: str) -> dict[str, float]:
    """Par at a month end."""
    b1 = 0.0 if month >= 12 and CALLED[path] else 1_000_000.0
    b2 = 400_000.0 if month < 9 else 0.0
    return {"B1": b1, "B2": b2, "B3": 600_000.0 * 0.998**month}


def held(month: int, path: str, per_100: dict[str, float]) -> float:
    """Par times a value per 100, all three bonds."""
    par = par_left(month, path)
    return math.fsum(par[b] / 100.0 * per_100[b] for b in par)


@dataclass
class Pencil:
    """One path on a sheet of paper: one row a month."""

    path: str
    cash: float = HAND_CASH
    borrowing: float = 0.0
    bought: dict[int, float] = field(default_factory=dict)  # month -> par bought
    rows: list[dict[str, float]] = field(default_factory=list)
    income: list[float] = field(default_factory=list)
    base: list[float] = field(default_factory=list)

    def __post_init__(self) -> None:
        self.close(0)

    @property
    def par_bought(self) -> float:
        return math.fsum(self.bought.values())  # nothing bought matures within 24 months, and class A has no default

    def statement(self, month: int) -> float:
        return held(month, self.path, statement_per_100(month, self.path))

    def accrued(self, month: int) -> float:
        half = PURCHASE_COUPON[self.path] / 2
        bought = math.fsum(par * half * ((month - q) % 6) / 6 for q, par in self.bought.items())
        return held(month, self.path, accrued_per_100(month, self.path)) + bought

    def close(self, month: int) -> None:
        """Writes the balances of a month end."""
        statement, accrued = self.statement(month), self.accrued(month)
        self.rows.append(
            {
                "cash": self.cash,
                "borrowing": self.borrowing,
                "par": math.fsum(par_left(month, self.path).values()) + self.par_bought,
                "statement_start": statement,
                "statement_bought": self.par_bought,  # bought and carried at par
                "accrued": accrued,
                "reserve": hand_reserve(month),
                "statement_surplus": statement + self.par_bought + accrued + self.cash - self.borrowing
                - hand_reserve(month),
            }
        )  # fmt: skip

    def month(self, m: int) -> None:
        """One month in the order of events of C2."""
        path, opening, rate = self.path, self.statement(m - 1) + self.par_bought, short_rate(self.path, m)
        before = par_left(m - 1, path)
        self.base.append(opening + self.cash)
        # 1. cash earns the short rate of the month before
        interest = self.cash * rate
        # 2. expected default on opening par: B3 loses 0.2 %
        b3 = before["B3"] * 0.998
        # 3. coupons on what is left, and redemptions
        coupons = 0.03 * b3 + 0.04 * before["B1"] if m % 6 == 0 else 0.0
        coupons += 0.025 * before["B2"] if m in (3, 9) else 0.0
        half = PURCHASE_COUPON[path] / 2
        coupons += math.fsum(par * half for q, par in self.bought.items() if m > q and (m - q) % 6 == 0)
        principal = before["B2"] if m == 9 else 0.0
        # 4. the call of month 12, at 100 and no accrued interest
        called = before["B1"] if m == 12 and CALLED[path] else 0.0
        # 5. liabilities, 6. investment expense of 0.12 % / 12 of opening statement value
        liability = HAND_PREMIUM - HAND_ANNUITY - (HAND_SURRENDER if m == HAND_SURRENDER_MONTH else 0.0)
        expense = opening * 0.0001
        # 7. interest on what was borrowed, at the short rate + 0.60 % / 12; then it is repaid as far as cash goes
        owed_interest = self.borrowing * (rate + 0.0005)
        cash = self.cash + interest + coupons + principal + called + liability - expense - owed_interest
        repaid = min(max(cash, 0.0), self.borrowing)
        cash, self.borrowing = cash - repaid, self.borrowing - repaid
        # 8. half of what is left is invested; or what is missing is borrowed
        bought = 0.5 * max(cash, 0.0)
        self.bought[m] = bought
        borrowed = max(-cash, 0.0)
        self.cash, self.borrowing = cash - bought + borrowed, self.borrowing + borrowed
        # statement income before realised gains (none here: B1 is called and B2 redeemed at their statement value):
        # everything that changed assets, less what only moved between them and what went to policyholders
        after = self.statement(m) + self.par_bought + self.accrued(m) + self.cash - self.borrowing
        earlier = opening + self.rows[-1]["accrued"] + self.rows[-1]["cash"] - self.rows[-1]["borrowing"]
        self.income.append(after - earlier - liability + owed_interest)
        self.close(m)
        self.rows[-1] |= {
            "coupon": coupons, "principal": principal, "call_par": called, "cash_interest": interest,
            "investment_expense": -expense, "borrowing_interest": -owed_interest, "repaid": -repaid,
            "borrowed": borrowed, "purchase": -bought,
        }  # fmt: skip

    def market_assets(self, month: int) -> float:
        """Bonds on the path's curve and their spreads, coupon of the month end just paid; B1's right is gone."""
        rate, par, half = CURVE[self.path], par_left(month, self.path), 100.0 * PURCHASE_COUPON[self.path] / 2
        b1 = dict.fromkeys(range(6, 120 - month, 6), 4.0) | {120 - month: 104.0}
        b3 = dict.fromkeys(range(6, 60 - month, 6), 3.0) | {60 - month: 103.0}
        total = par["B1"] / 100.0 * value_of(b1, rate, 1.045 / 1.03)
        total += par["B3"] / 100.0 * value_of(b3, rate, 1.045 / 1.03)
        for q, bought in self.bought.items():
            last = 60 - (month - q)
            flows = dict.fromkeys(range((last - 1) % 6 + 1, last, 6), half) | {last: 100.0 + half}
            total += bought / 100.0 * value_of(flows, rate, 1.035 / 1.03)
        return total


@pytest.fixture(scope="module")
def sheets() -> dict[str, Pencil]:
    """Both paths worked through."""
    out = {}
    for path in CURVE:
        sheet = Pencil(path)
        for m in range(1, MONTHS + 1):
            sheet.month(m)
        out[path] = sheet
    return out


@pytest.fixture(scope="module")
def results(hand: Any, hand_block: Any) -> Any:
    return collect(hand, [hand_block])


BALANCES = ("cash", "borrowing", "statement_start", "statement_bought", "accrued", "reserve", "statement_surplus")
FLOWS = ("coupon", "principal", "call_par", "cash_interest", "investment_expense", "borrowing_interest", "repaid",
         "borrowed", "purchase")  # fmt: skip


@pytest.mark.parametrize("path", list(CURVE))
@pytest.mark.parametrize("column", BALANCES)
def test_known_balances_of_every_month(sheets, results, path, column) -> None:
    table = results.balance
    found = table[(table["scenario"] == path) & (table["segment"] == "annuities")][column].to_numpy()
    by_hand = [row[column] for row in sheets[path].rows]
    assert found == pytest.approx(by_hand, abs=TO_THE_PENNY, rel=0)


@pytest.mark.parametrize("path", list(CURVE))
def test_known_par_of_every_month(sheets, hand_block, path) -> None:
    found = hand_block.par["close"][:, 0, list(CURVE).index(path)]
    assert found == pytest.approx([row["par"] for row in sheets[path].rows], abs=TO_THE_PENNY, rel=0)


@pytest.mark.parametrize("path", list(CURVE))
@pytest.mark.parametrize("category", FLOWS)
def test_known_flows_of_every_month(sheets, results, path, category) -> None:
    table = results.flows
    mine = table[(table["scenario"] == path) & (table["category"] == category)]
    found = mine.groupby("month")["amount"].sum().reindex(range(1, MONTHS + 1), fill_value=0.0).to_numpy()
    by_hand = [row[category] for row in sheets[path].rows[1:]]
    assert found == pytest.approx(by_hand, abs=TO_THE_PENNY, rel=0)


def test_known_liability_flows_have_the_sign_of_their_item(results) -> None:
    totals = results.flows.groupby(["scenario", "category"])["amount"].sum()
    for path in CURVE:
        assert totals[(path, "premium")] == 24 * 4_000.0
        assert totals[(path, "annuity_payment")] == -24 * 12_000.0
        assert totals[(path, "surrender_benefit")] == -300_000.0


@pytest.mark.parametrize("path", list(CURVE))
def test_known_market_values_at_the_year_ends(sheets, results, path) -> None:
    table = results.balance
    mine = table[(table["scenario"] == path) & (table["segment"] == "annuities")].set_index("month")["market_assets"]
    sheet = sheets[path]
    assert mine[24] == pytest.approx(sheet.market_assets(24), abs=1e-5, rel=0)
    at_12 = Pencil(path)
    for m in range(1, 13):
        at_12.month(m)
    assert mine[12] == pytest.approx(at_12.market_assets(12), abs=1e-5, rel=0)


@pytest.mark.parametrize("path", list(CURVE))
def test_known_earned_rate_over_the_last_twelve_months(sheets, results, path) -> None:
    # C11: net income of 12 months over their mean opening statement value and cash, from month 12 on
    table, sheet = results.balance, sheets[path]
    mine = table[(table["scenario"] == path) & (table["segment"] == "annuities")].set_index("month")["earned_rate"]
    for m in range(12, MONTHS + 1):
        by_hand = math.fsum(sheet.income[m - 12 : m]) / (math.fsum(sheet.base[m - 12 : m]) / 12.0)
        assert mine[m] == pytest.approx(by_hand, abs=1e-13)
    # at the start: a month at the effective book yields, less B3's default of 0.2 % and the expense, times twelve
    b1, b2, b3 = HAND_B1_VALUE * 10_000.0, HAND_B2_DIRTY * 4_000.0, 600_000.0
    book = b1 + b2 - 1.25 * 4_000.0 + b3
    earned = b1 * (1.03 ** (1 / 6) - 1) + b2 * (1.04 ** (1 / 6) - 1) + b3 * (1.03 ** (1 / 6) - 1)
    opening = earned - 0.002 * b3 - 0.0001 * book
    assert mine[0] == pytest.approx(12.0 * opening / (book + HAND_CASH), abs=1e-13)


def test_known_the_one_call_is_reported(results) -> None:
    assert len(results.calls) == 1
    call = results.calls.iloc[0]
    assert (call["scenario"], call["security_id"], call["month"]) == ("S2", "B1", 12)
    assert (call["par_called"], call["price"], call["premium"]) == (1_000_000.0, 100.0, 0.0)
    # given up: amortised to the very date of the call, so no years are lost; its yield was 3 % a half-year
    assert call["book_yield"] == pytest.approx(0.06, abs=1e-12)
    assert call["purchase_yield"] == pytest.approx(PURCHASE_COUPON["S2"], abs=1e-12)
    assert (call["years_to_worst"], call["yield_given_up"]) == (0.0, 0.0)


def test_known_lowest_surplus_years_below_and_the_criterion(sheets, results) -> None:
    table = results.measures.set_index(["scenario", "segment"])
    for path in CURVE:
        at_years = [sheets[path].rows[m]["statement_surplus"] for m in (12, 24)]
        row = table.loc[(path, "annuities")]
        assert row["lowest_statement_surplus"] == pytest.approx(min(at_years), abs=TO_THE_PENNY)
        assert row["years_negative"] == sum(s < 0.0 for s in at_years)
        assert row["criterion_met"] == (min(at_years) >= 0.0)
        assert row["peak_borrowing"] == pytest.approx(max(r["borrowing"] for r in sheets[path].rows), abs=1e-6)
        assert row["par_sold"] == 0.0
        discounted = at_years[-1]
        for m in range(1, MONTHS + 1):
            discounted /= 1.0 + short_rate(path, m)
        assert row["pv_ending_one_month_treasury"] == pytest.approx(discounted, abs=TO_THE_PENNY)


def test_known_npv_gap_at_one_month_rates(sheets, results) -> None:
    # run-off flows of the starting holdings and opening cash, less net outgo; what is left enters at its close-out
    # value: market value for assets, the reserve for the liability
    for path in CURVE:
        sheet, pv, factor = sheets[path], HAND_CASH, 1.0
        for m in range(1, MONTHS + 1):
            factor /= 1.0 + short_rate(path, m)
            before = par_left(m - 1, path)
            coupons = 0.03 * before["B3"] * 0.998 + 0.04 * before["B1"] if m % 6 == 0 else 0.0
            coupons += 0.025 * before["B2"] if m in (3, 9) else 0.0
            redeemed = sheet.rows[m]["principal"] + sheet.rows[m]["call_par"]
            outgo = HAND_ANNUITY - HAND_PREMIUM + (HAND_SURRENDER if m == HAND_SURRENDER_MONTH else 0.0)
            pv += factor * (coupons + redeemed - 0.0001 * sheet.statement(m - 1) - outgo)
        alone = Pencil(path)  # nothing bought: the starting holdings alone
        pv += factor * (alone.market_assets(24) - hand_reserve(24))
        row = results.measures.set_index(["scenario", "segment"]).loc[(path, "annuities")]
        assert row["npv_gap"] == pytest.approx(pv, abs=1e-5)
