"""Statement value of a lot: effective yield to the date that gives the lowest value, on a grid of coupon dates."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from scipy.optimize import brentq

from projector.balance.statement_kernels import growth_to, statement_path, value_to, worst_date

TEN_YEARS = 120
# a 6 % half-yearly bond of ten years, callable at these clean prices on one day each
CALLS = {36: 103.0, 48: 102.0, 60: 101.0, 72: 100.0}


class Path:
    """What one lot does, per 100 of par, month 0 on a coupon date."""

    def __init__(
        self, value: float, calls: dict[int, float], maturity: int = TEN_YEARS, rate: float = 0.06, months: int = 0
    ) -> None:
        last = months or maturity
        size = max(last, maturity) + 1
        self.price, self.accrued, self.coupon = np.full(size, np.inf), np.zeros(size), np.zeros(size)
        for m, price in calls.items():
            self.price[m] = price
        for m in range(maturity):
            self.accrued[m] = 50.0 * rate * (m % 6) / 6
        self.coupon[6 : maturity + 1 : 6] = 50.0 * rate
        self.book, self.accretion, self.growth = np.zeros(last + 1), np.zeros(last + 1), np.ones(last + 1)
        self.worst = np.zeros(last + 1, dtype=np.int64)
        statement_path(
            maturity, last, 100.0, self.price, self.accrued, self.coupon, self.coupon, value, self.book, self.accretion,
            self.growth, self.worst,
        )  # fmt: skip

    def yields(self) -> np.ndarray:
        """Bond-equivalent, in per cent, in force over each month."""
        return 200.0 * (self.growth**6 - 1.0)


@pytest.mark.parametrize(
    ("price", "worst", "at"), [(105.0, 5.0244, 72), (102.5, 5.5051, 72), (95.0, 6.6939, TEN_YEARS)]
)
def test_known_yield_to_worst_of_a_six_per_cent_bond(price: float, worst: float, at: int) -> None:
    """Worked by hand: yields to each call and to maturity, the lowest taken."""
    path = Path(price, CALLS)
    assert path.worst[0] == at
    assert round(float(path.yields()[0]), 4) == worst


@pytest.mark.parametrize(
    ("price", "month", "redemption", "expected"),
    [
        (105.0, 36, 103.0, 5.1188), (105.0, 48, 102.0, 5.0609), (105.0, 60, 101.0, 5.0348), (105.0, 72, 100.0, 5.0244),
        (105.0, 120, 100.0, 5.3479), (102.5, 36, 103.0, 6.0045), (102.5, 48, 102.0, 5.7434), (102.5, 60, 101.0, 5.5960),
        (102.5, 72, 100.0, 5.5051), (102.5, 120, 100.0, 5.6690), (95.0, 36, 103.0, 8.8286), (95.0, 48, 102.0, 7.9175),
        (95.0, 60, 101.0, 7.3830), (95.0, 72, 100.0, 7.0359), (95.0, 120, 100.0, 6.6939),
    ],
)  # fmt: skip
def test_known_yield_to_each_redemption(price: float, month: int, redemption: float, expected: float) -> None:
    path = Path(price, CALLS)
    growth = growth_to(0, month, redemption, path.coupon, price)
    assert round(200.0 * (growth**6 - 1.0), 4) == expected
    assert value_to(0, month, redemption, path.coupon, growth) == pytest.approx(price, abs=1e-10)


def test_known_book_path_of_a_premium_bond_to_its_worst_date() -> None:
    """From 105 at 5.0244 % to the call of year 6 at 100, by years; worked by hand."""
    path = Path(105.0, CALLS)
    assert [round(float(b), 4) for b in path.book[12:73:12]] == [104.2665, 103.4957, 102.6857, 101.8345, 100.94, 100.0]


def test_limit_month_0_is_the_ledger() -> None:
    for value in (105.0, 95.0, 100.0, 63.21):
        path = Path(value, CALLS)
        assert path.book[0] == value
        assert path.accretion[0] == 0.0


def test_known_a_discount_bond_accrues_to_maturity_and_not_to_a_call() -> None:
    path = Path(95.0, CALLS)
    assert (path.worst == TEN_YEARS).all()
    half = brentq(lambda i: 3.0 * (1.0 - (1.0 + i) ** -20) / i + 100.0 * (1.0 + i) ** -20 - 95.0, 0.01, 0.1, xtol=1e-15)
    assert round(200.0 * half, 4) == 6.6939
    left = [3.0 * (1.0 - (1.0 + half) ** -k) / half + 100.0 * (1.0 + half) ** -k for k in range(20, 0, -1)]
    assert path.book[0:115:6] == pytest.approx(left, abs=1e-9)
    assert (np.diff(path.book[0:115:6]) > 0.0).all()
    assert path.book[TEN_YEARS] == 0.0


def test_known_a_lot_that_is_not_called_goes_on_from_its_value_at_the_worst_date() -> None:
    path = Path(105.0, CALLS)
    assert path.book[72] == 100.0
    assert path.worst[71] == 72
    assert path.worst[72] == TEN_YEARS
    np.testing.assert_allclose(path.yields()[73:], 6.0, atol=1e-9)  # from 100, at its coupon
    np.testing.assert_allclose(path.book[72:TEN_YEARS:6], 100.0, atol=1e-9)


def test_known_with_later_calls_the_next_worst_date_follows() -> None:
    # at 103 in year 2, at 101 in year 3: amortised to one right after another while none is used, then to maturity
    calls = dict.fromkeys(range(12, 24), 103.0) | dict.fromkeys(range(24, 36), 101.0)
    path = Path(104.5, calls, maturity=60)
    first = int(path.worst[0])
    assert path.price[first] < np.inf
    at = first
    while at < 36:
        assert path.book[at] == pytest.approx(path.price[at], abs=1e-9)
        later = int(path.worst[at])
        assert later > at
        at = later
    assert at == 60


@pytest.mark.parametrize("value", [105.0, 101.3, 100.0, 97.0, 80.0])
def test_order_the_worst_date_has_the_lowest_yield_of_all(value: float) -> None:
    path = Path(value, CALLS)
    month, growth = worst_date(0, TEN_YEARS, 100.0, path.price, path.accrued, path.coupon, value)
    each = {m: growth_to(0, m, k, path.coupon, value) for m, k in (CALLS | {TEN_YEARS: 100.0}).items()}
    lowest = min(each.values())
    assert growth == pytest.approx(lowest, abs=1e-12)
    assert month == max(m for m, g in each.items() if g <= lowest + 1e-10)  # of equals the latest


def test_limit_at_par_the_latest_of_equal_dates_is_taken() -> None:
    path = Path(100.0, dict.fromkeys(range(6, 120, 6), 100.0))
    assert path.worst[0] == TEN_YEARS
    np.testing.assert_allclose(path.yields(), 6.0, atol=1e-9)


@pytest.mark.parametrize("value", [105.0, 100.0, 95.0])
def test_limit_interest_is_coupons_and_the_change_of_value(value: float) -> None:
    """Over the whole life accretion adds up to 100 less the opening value, whatever the dates on the way."""
    path = Path(value, CALLS)
    assert path.accretion.sum() == pytest.approx(100.0 - value, abs=1e-8)
    for m in range(1, TEN_YEARS):
        assert path.book[m] - path.book[m - 1] == pytest.approx(path.accretion[m], abs=1e-9)


@pytest.mark.parametrize("value", [105.0, 95.0])
def test_limit_accretion_is_effective_interest_less_the_coupon_earned(value: float) -> None:
    path = Path(value, CALLS)
    for m in (1, 5, 6, 7, 30, 72, 73, 119):
        dirty = path.book[m - 1] + path.accrued[m - 1]
        earned = path.coupon[m] + path.accrued[m] - path.accrued[m - 1]
        assert path.accretion[m] == pytest.approx(dirty * (path.growth[m] - 1.0) - earned, abs=1e-9)


def test_limit_a_shorter_projection_has_the_same_months() -> None:
    whole, part = Path(105.0, CALLS), Path(105.0, CALLS, months=80)
    np.testing.assert_array_equal(part.book, whole.book[:81])
    np.testing.assert_array_equal(part.accretion, whole.accretion[:81])


def test_limit_a_zero_coupon_bond_grows_at_one_rate() -> None:
    path = Path(70.0, {}, maturity=60, rate=0.0)
    np.testing.assert_allclose(path.book[:60], 70.0 * (100.0 / 70.0) ** (np.arange(60) / 60.0), rtol=1e-12)


def test_limit_holdings_start_at_the_ledger_in_every_segment(busy: Any) -> None:
    prepared = busy.prepared
    h, lots = prepared.holdings, prepared.study.tables.lots
    for segment, name in enumerate(prepared.segment_names):
        mine = h.segment == segment
        assert (h.par[mine] / 100.0 * h.book[mine, 0]).sum() == pytest.approx(
            lots.loc[lots["segment"] == name, "book_value"].sum(), abs=1e-8
        )
