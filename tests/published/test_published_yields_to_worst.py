"""Yields to call and to worst, lowest prices over all redemption dates, and make-whole prices.

Rules are published; most printed vectors here are own figures, come by with another route than the code under test
(annuity formulas on whole half-years), and say so.
"""

from __future__ import annotations

import random
from datetime import date, timedelta

import pytest

from projector.bonds.schedule import DatedBond, dated_bond
from projector.bonds.worst import (
    lowest_price,
    make_whole_price,
    redemptions,
    yield_to_worst,
    yields_to_redemptions,
)
from projector.bonds.yields import CONVENTIONS, Redemption, clean_price
from projector.study.daycounts import months_before

START = date(2025, 3, 15)


def later(half_years: int) -> date:
    return months_before(START, -6 * half_years, month_end=False)


def bond(rate: float, half_years: int, **other) -> DatedBond:
    terms = {"frequency": 2, "day_count": "30/360", "end_of_month": False, **other}
    return dated_bond(coupon_rate=rate, issue=later(-4), maturity=later(half_years), **terms)


def calls(schedule: dict[int, float]) -> list[Redemption]:
    return [Redemption(later(half_year), price) for half_year, price in schedule.items()]


def flat(first: int, last: int, price: float = 100.0) -> dict[int, float]:
    return dict.fromkeys(range(first, last + 1), price)


# MSRB, Calculation of Price and Yield on Continuously Callable Securities (interpretive letter, 1989): with premiums
# that decline steeply an intermediate date may be the worst; the rule was read on the page, the figures are own.
STEEP = {**flat(10, 11, 106.0), **flat(12, 13, 103.0), **flat(14, 29)}


@pytest.mark.parametrize(
    ("rate", "price", "schedule", "half_years", "worst", "to_maturity", "worst_half_year"),
    [
        (0.04, 91.0, flat(10, 39), 40, 0.0469899719, 0.0469899719, 40),
        (0.05, 100.0, flat(4, 19), 20, 0.05, 0.05, 20),  # all equal: the latest is named
        (0.07, 108.0, STEEP, 30, 0.0560268988, 0.0617446061, 14),
    ],
)
def test_known_worst_dates_of_callable_bonds(rate, price, schedule, half_years, worst, to_maturity, worst_half_year):
    found = yield_to_worst(bond(rate, half_years), START, price, calls(schedule), "street")
    assert found.annual_yield == pytest.approx(worst, abs=1e-9)
    assert found.redemption.day == later(worst_half_year)
    each = yields_to_redemptions(bond(rate, half_years), START, price, calls(schedule), "street")
    assert each[-1].annual_yield == pytest.approx(to_maturity, abs=1e-9)


# Own figures, 6 % half-yearly with ten years left, callable at 103, 102, 101, 100 after 3, 4, 5, 6 years; yields in per
# cent. The rule: SSAP No. 26, amortisation to the call or maturity value that gives the lowest asset value (recalled).
DECLINING = {6: 103.0, 8: 102.0, 10: 101.0, 12: 100.0}


@pytest.mark.parametrize(
    ("price", "percents", "worst_half_year"),
    [
        (105.0, [5.1188, 5.0609, 5.0348, 5.0244, 5.3479], 12),
        (102.5, [6.0045, 5.7434, 5.5960, 5.5051, 5.6690], 12),
        (95.0, [8.8286, 7.9175, 7.3830, 7.0359, 6.6939], 20),
    ],
)
def test_known_yields_to_each_call_of_a_declining_schedule(price, percents, worst_half_year):
    each = yields_to_redemptions(bond(0.06, 20), START, price, calls(DECLINING), "street")
    assert [100 * found.annual_yield for found in each] == pytest.approx(percents, abs=5.1e-5)
    worst = yield_to_worst(bond(0.06, 20), START, price, calls(DECLINING), "street")
    assert worst.redemption.day == later(worst_half_year)
    assert worst.annual_yield == pytest.approx(min(percents) / 100, abs=5.1e-7)


def test_known_book_values_on_the_way_to_the_worst_date():
    """Own figures: bought at 105, amortised at the yield to the call after six years, at the ends of years 1 to 6."""
    ours = bond(0.06, 20)
    worst = yield_to_worst(ours, START, 105.0, calls(DECLINING), "street")
    path = [clean_price(ours, later(k), worst.annual_yield, "street", worst.redemption) for k in (2, 4, 6, 8, 10)]
    assert path == pytest.approx([104.2665, 103.4957, 102.6857, 101.8345, 100.9400], abs=5.1e-5)


def test_known_make_whole_prices():
    """Own figures: 5 % half-yearly, eight years to the par call; Treasury 3.50 % and 5.00 %, 25 bp."""
    amounts, times = [2.5] * 15 + [102.5], list(range(1, 17))
    assert make_whole_price(amounts, times, 0.0350, 0.0025) == pytest.approx(108.5707, abs=5.1e-5)
    assert make_whole_price(amounts, times, 0.0500, 0.0025) == 100.0
    below = [amount * 2 for amount in amounts]  # the value itself, lifted over par by doubling every payment
    assert make_whole_price(below, times, 0.0500, 0.0025) / 2 == pytest.approx(98.3839, abs=5.1e-5)


def test_limit_make_whole_at_a_spread_that_gives_the_coupon_is_par_without_accrued():
    times = [0.5 + k for k in range(10)]
    amounts = [3.0] * 9 + [103.0]
    full = make_whole_price(amounts, times, 0.03, 0.0)
    assert make_whole_price(amounts, times, 0.03, 0.0, accrued=1.5) == pytest.approx(full - 1.5, abs=1e-12)
    assert make_whole_price(amounts, [t + 0.5 for t in times], 0.055, 0.005) == pytest.approx(100.0)


def test_limit_without_calls_the_worst_is_maturity():
    ours = bond(0.06, 20)
    found = yield_to_worst(ours, START, 104.0, [], "street")
    only = yields_to_redemptions(ours, START, 104.0, [], "street")
    assert [one.annual_yield for one in only] == pytest.approx([found.annual_yield], abs=1e-13)
    assert found.redemption == Redemption(later(20), 100.0)
    assert lowest_price(ours, START, found.annual_yield, [], "street").clean_price == pytest.approx(104.0, abs=1e-10)


def test_order_flat_call_price_makes_the_first_date_worst_above_it_and_maturity_below():
    """MSRB Rule G-15(a) practice: premium to the earliest, discount to the latest."""
    ours, schedule = bond(0.05, 30), calls(flat(6, 29))
    assert yield_to_worst(ours, START, 104.0, schedule, "street").redemption.day == later(6)
    assert yield_to_worst(ours, START, 97.0, schedule, "street").redemption.day == later(30)


@pytest.mark.parametrize("convention", CONVENTIONS)
def test_limit_one_root_gives_the_lowest_of_all_yields_on_any_day(convention):
    rng = random.Random(3)
    for _ in range(40):
        frequency = rng.choice([0, 1, 2, 4, 12])
        rate = rng.uniform(0.01, 0.1) if frequency else 0.0
        ours = bond(rate, 30, frequency=frequency, day_count=rng.choice(["30/360", "ACT/ACT.ICMA", "ACT/365.FIXED"]))
        settled = START + timedelta(days=rng.randint(0, 900))
        days = sorted(rng.sample(range(1, 4400), 25))
        schedule = [Redemption(START + timedelta(days=day), 100 + rng.uniform(-2, 6)) for day in days]
        price = rng.uniform(85, 103)
        each = yields_to_redemptions(ours, settled, price, schedule, convention)
        lowest = min(each, key=lambda found: found.annual_yield)
        worst = yield_to_worst(ours, settled, price, schedule, convention)
        assert worst.redemption == lowest.redemption
        assert worst.annual_yield == pytest.approx(lowest.annual_yield, abs=1e-11)
        value = lowest_price(ours, settled, 0.06, schedule, convention)
        prices = [clean_price(ours, settled, 0.06, convention, one.redemption) for one in each]
        assert value.clean_price == pytest.approx(min(prices), abs=1e-10)
        assert value.redemption == each[prices.index(min(prices))].redemption


def test_limit_call_tomorrow_at_a_loss_is_the_worst_even_below_minus_100_percent():
    found = yield_to_worst(bond(0.05, 20), START, 104.0, [Redemption(START + timedelta(days=1), 100.0)], "street")
    assert found.redemption.day == START + timedelta(days=1)
    assert found.annual_yield < -2.0


def test_limit_past_calls_are_left_out_and_impossible_ones_refused():
    ours = bond(0.05, 20)
    assert redemptions(ours, START, [Redemption(START, 102.0)]) == (Redemption(later(20), 100.0),)
    with pytest.raises(ValueError, match="is not before maturity"):
        redemptions(ours, START, calls({20: 100.0}))
    with pytest.raises(ValueError, match="two call prices stand on one date"):
        redemptions(ours, START, [*calls({4: 100.0}), *calls({4: 101.0})])
