"""Net present values and internal rates of return against published figures and against two libraries.

"published" = read in the documentation, a test or a public transcription; "recalled" = recalled from memory and
confirmed by computation; "own" = our figure by another route.
"""

from __future__ import annotations

import math
import random
from datetime import date

import numpy as np
import numpy_financial as npf
import pytest
import QuantLib as ql
from numpy.testing import assert_allclose
from scipy.optimize import brentq

from projector.measures.value import annual_effective, internal_rates, npv, npv_at_period_rates

# ---- present values -------------------------------------------------------------------------------------------------


def test_known_npv_with_the_first_flow_now():
    """numpy-financial documentation, npv; published."""
    assert npv([-40000, 5000, 8000, 12000, 30000], 0.08, first_time=0) == pytest.approx(3065.22267, abs=5e-6)


def test_known_npv_with_the_first_flow_at_the_end_of_the_period():
    """Microsoft Excel help, NPV; recalled."""
    assert npv([-10000, 3000, 4200, 6800], 0.10, first_time=1) == pytest.approx(1188.44, abs=0.0051)


def test_known_modified_return_from_two_present_values():
    """Microsoft Excel help, MIRR: finance rate 10 %, reinvestment rate 12 %; recalled."""
    flows = np.array([-120000.0, 39000, 30000, 21000, 37000, 46000])
    outlay = -npv(np.minimum(flows, 0), 0.10, first_time=0)
    return_ = npv(np.maximum(flows, 0), 0.12, first_time=0) * 1.12**5
    assert (return_ / outlay) ** (1 / 5) - 1 == pytest.approx(0.1261, abs=5.1e-5)


DAYS = [date(2008, 1, 1), date(2008, 3, 1), date(2008, 10, 30), date(2009, 2, 15), date(2009, 4, 1)]


def daily_flows() -> np.ndarray:
    flows = np.zeros((DAYS[-1] - DAYS[0]).days + 1)
    for day, flow in zip(DAYS, [-10000.0, 2750, 4250, 3250, 2750], strict=True):
        flows[(day - DAYS[0]).days] = flow
    return flows


def test_known_dated_npv_and_return_on_a_grid_of_days():
    """Microsoft Excel help, XNPV at 9 % and XIRR, actual/365; recalled (the spreadsheet stops at 1e-8)."""
    daily = 1.09 ** (1 / 365) - 1
    assert npv(daily_flows(), daily, first_time=0) == pytest.approx(2086.647602, abs=6e-7)
    found = internal_rates(daily_flows())
    assert found.status == "one"
    assert (1 + found.rate) ** 365 - 1 == pytest.approx(0.373362535, abs=6e-9)


def test_known_surplus_of_an_immunised_fund_is_positive_away_from_its_rate():
    """Redington, Review of the Principles of Life-Office Valuations (1952), theory; figures own."""
    flows = [0.0, 535.3691236823, -573.0, 0.0, 0.0, -701.0, 750.273222746]
    expected = [3.32164671, 0.76105253, 0.1822883, 0.0, 0.16758324, 0.64320467, 3.56159248]
    found = [npv(flows, rate, first_time=0) for rate in (0.03, 0.05, 0.06, 0.07, 0.08, 0.09, 0.12)]
    assert_allclose(found, expected, atol=2e-7)


def test_limit_present_value_of_many_paths_is_that_of_each():
    flows = np.random.default_rng(1).normal(size=(30, 5))
    assert_allclose(
        npv(flows, 0.01, first_time=1), [npv(flows[:, k], 0.01, first_time=1) for k in range(5)], rtol=1e-13
    )
    level = np.full((30, 1), 1 / 1.01)
    assert_allclose(npv_at_period_rates(flows, level), npv(flows, 0.01, first_time=1), rtol=1e-12)


def test_limit_present_value_at_period_rates_is_the_sum_of_products():
    rng = np.random.default_rng(2)
    flows, discounts = rng.normal(size=24), rng.uniform(0.98, 1.0, size=24)
    assert npv_at_period_rates(flows, discounts) == pytest.approx(math.fsum(flows * np.cumprod(discounts)), rel=1e-13)


def test_limit_rates_of_minus_100_percent_and_mismatched_lengths_are_refused():
    with pytest.raises(ValueError, match="is not above -100 %"):
        npv([1.0], -1.0, first_time=1)
    with pytest.raises(ValueError, match="lies in the past"):
        npv([1.0], 0.0, first_time=-1)
    with pytest.raises(ValueError, match="3 flows do not go with 2 discounts"):
        npv_at_period_rates([1.0] * 3, [1.0] * 2)
    with pytest.raises(ValueError, match="a month is not above -100 %"):
        annual_effective(-1.0)
    with pytest.raises(ValueError, match="finite"):
        internal_rates([1.0, math.nan])


# ---- internal rates of return ---------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("flows", "rate", "within"),
    [
        ([-250000, 100000, 150000, 200000, 250000, 300000], 0.5672303344359, 1e-13),  # numpy-financial docs; published
        ([-100, 39, 59, 55, 20], 0.28095, 5e-6),  # the same
        ([-100, 0, 0, 74], -0.0955, 5e-5),  # the same
        ([-100, 100, 0, 7], 0.06206, 5e-6),  # the same
        ([-70000, 12000, 15000, 18000, 21000], -0.0212, 5.1e-5),  # Microsoft Excel help, IRR; recalled
        ([100, -39, -59, -55, -20], 0.2809484211, 6e-11),  # own: a loan has the rate of the deposit with other signs
    ],
)
def test_known_single_rates(flows, rate, within):
    found = internal_rates(flows)
    assert found.status == "one"
    assert found.rate == pytest.approx(rate, abs=within)


@pytest.mark.parametrize(
    ("flows", "rates", "within"),
    [
        # Lorie and Savage, Three Problems in Rationing Capital (1955), the pump; recalled
        ([-1600, 10000, -10000], [0.25, 4.0], 1e-9),
        # own: ten years of income and a deficit at the end
        ([-100, *[20] * 9, -60], [-0.1917248486, 0.069271585], 1e-9),
        # numpy-financial documentation, irr, prints the middle one, 0.0886; the other two own
        ([-5, 10.5, 1, -8, 1], [-0.87020125, 0.0886, 0.70955953], 5e-5),
    ],
)
def test_known_several_rates_are_all_listed_and_none_is_chosen(flows, rates, within):
    found = internal_rates(flows)
    assert found.status == "several"
    assert found.rate is None
    assert_allclose(found.rates, rates, atol=within)


def test_known_project_without_a_rate_is_worth_something_at_every_rate():
    """Brealey and Myers, Principles of Corporate Finance, pitfalls of the internal rate of return; recalled."""
    flows = [1000, -3000, 2500]
    assert internal_rates(flows).status == "none"
    assert npv(flows, 0.1, first_time=0) == pytest.approx(339, abs=0.5)


def test_limit_flows_of_one_sign_or_a_negative_discriminant_have_no_rate():
    for flows in ([100, -200, 150], [1, 2, 3], [-1, 0, -1], [0.0, 0.0], [], [5.0]):
        assert internal_rates(flows).status == "none", flows


@pytest.mark.parametrize("rate", [-0.9, -0.3, -1e-4, 0.0, 3e-7, 0.004, 0.05, 0.7, 9.0])
def test_limit_value_that_only_touches_zero_has_that_one_rate(rate):
    growth = 1 + rate
    found = internal_rates([1.0, -2 * growth, growth * growth])
    assert found.status == "one"
    assert found.rate == pytest.approx(rate, abs=3e-8 * growth)


def test_limit_two_rates_closer_than_the_grid_are_both_found():
    for low, high in [(0.04, 0.0401), (0.004, 0.00402), (-0.2, -0.1999), (-1e-5, 1e-5), (3.0, 3.01)]:
        one, other = 1 + low, 1 + high
        found = internal_rates([1.0, -(one + other), one * other])
        assert_allclose(found.rates, [low, high], atol=1e-8)


def test_limit_zeros_before_and_after_and_the_unit_of_money_do_not_matter():
    flows = [-5.0, 10.5, 1.0, -8.0, 1.0]
    plain = internal_rates(flows).rates
    assert_allclose(internal_rates([0.0, 0.0, *flows, 0.0]).rates, plain, rtol=1e-12)
    assert_allclose(internal_rates([flow * 1e11 for flow in flows]).rates, plain, rtol=1e-12)


def test_known_rates_are_the_positive_roots_of_a_polynomial_solver():
    rng = np.random.default_rng(7)
    for _ in range(400):
        flows = rng.normal(size=rng.integers(3, 12))
        roots = np.roots(flows)  # of sum(flows[k] x^(n - k)): x = 1 + rate
        expected = np.sort(roots.real[(np.abs(roots.imag) < 1e-9) & (roots.real > 0)] - 1)
        assert_allclose(internal_rates(flows).rates, expected, rtol=1e-7, atol=1e-9)


def test_known_rate_of_an_investment_agrees_with_two_libraries():
    rng = np.random.default_rng(8)
    for _ in range(50):
        flows = np.concatenate([[-100.0], rng.uniform(0, 12, size=rng.integers(10, 40))])
        rate = internal_rates(flows).rate
        assert rate == pytest.approx(npf.irr(flows), abs=1e-10)
        assert npv(flows, 0.03, first_time=0) == pytest.approx(npf.npv(0.03, flows), rel=1e-11)
        assert ql_value(flows, rate) == pytest.approx(0.0, abs=1e-9)


def ql_value(flows: np.ndarray, rate: float) -> float:
    start = ql.Date(1, 1, 2030)
    leg = [ql.SimpleCashFlow(float(flow), start + ql.Period(k, ql.Years)) for k, flow in enumerate(flows)]
    count = ql.Thirty360(ql.Thirty360.BondBasis)
    return ql.CashFlows.npv(leg, ql.InterestRate(rate, count, ql.Compounded, ql.Annual), True, start, start)


def test_limit_forty_years_of_months_are_solved_to_the_last_digits():
    for monthly in (-0.003, 0.0, 0.0041, 0.02):
        level = [1.0] * 480
        flows = [-npv(level, monthly, first_time=1), *level]
        assert internal_rates(flows).rate == pytest.approx(monthly, abs=1e-14)
    two = np.convolve([1.0, -1.0041], [1.0, -1.0141])  # rates 0.41 % and 1.41 % a month
    flows = np.convolve(two, [1.0] * 470)
    assert_allclose(internal_rates(flows).rates, [0.0041, 0.0141], atol=1e-11)


def test_known_annual_effective_rates():
    """Own: twelve months by the power of 12. Regulation DD, 12 CFR 1030, Appendix A, prints the yields below."""
    rng = random.Random(1)
    for rate in [rng.uniform(-0.02, 0.03) for _ in range(20)]:
        assert annual_effective(rate) == pytest.approx((1 + rate) ** 12 - 1, abs=1e-14)


@pytest.mark.parametrize(("interest", "days", "percent"), [(61.68, 365, 6.17), (5.25, 30, 6.58)])
def test_known_annual_percentage_yields(interest, days, percent):
    """Regulation DD, 12 CFR 1030, Appendix A, sections I and II: on 1,000; published, read in a transcription."""
    daily = internal_rates([-1000.0, *[0.0] * (days - 1), 1000.0 + interest]).rate
    assert 100 * ((1 + daily) ** 365 - 1) == pytest.approx(percent, abs=0.005)


# Regulation Z, 12 CFR 1026, Appendix J (2024), section (c): payment k of a series is discounted over t + k - 1 whole
# periods, and simply over a fraction of one; published, read in a public transcription. Each series: amount, number,
# whole periods to the first, fraction.
APPENDIX_J = [
    ("(c)(1)(i)", 5000, 12, [(230, 24, 1, 0)], 9.69),
    ("(c)(1)(ii)", 6000, 12, [(200, 36, 1, 19 / 30)], 11.82),
    ("(c)(1)(iii)", 5000, 24, [(219.17, 24, 0, 6 / 15)], 10.34),
    ("(c)(1)(iv)", 10000, 4, [(385, 40, 1, 39 / 90)], 8.97),
    ("(c)(1)(v)", 500, 52, [(17.6, 30, 4, 4 / 7)], 14.96),
    ("(c)(3)(ii)", 200, 26, [(9.5, 19, 0, 8 / 14), (30, 1, 19, 8 / 14)], 12.22),
    ("(c)(4)(ii)", 8000, 6, [(449.36, 1, 0, 52 / 60), (465, 18, 1, 52 / 60), (200, 1, 19, 52 / 60)], 7.30),
    ("(c)(5)(ii)", 1000, 2, [(1044, 1, 1, 0)], 8.80),
    ("(c)(5)(iii)", 1000, 1, [(1135.19, 1, 1, 6 / 12)], 8.76),
    (
        "(c)(6)(ii)",
        7350,
        12,
        [(1000, 3, 6, 12 / 30), (2000, 1, 12, 12 / 30), (750, 3, 18, 12 / 30), (1000, 1, 22, 29 / 30)],
        10.22,
    ),
]


@pytest.mark.parametrize(("section", "advance", "periods", "series", "percent"), APPENDIX_J)
def test_known_annual_percentage_rates(section, advance, periods, series, percent):
    def surplus(rate: float) -> float:
        paid = [npv([amount] * n, rate, first_time=t) / (1 + part * rate) for amount, n, t, part in series]
        return math.fsum(paid) - advance

    assert 100 * periods * brentq(surplus, 1e-6, 0.5, xtol=1e-14) == pytest.approx(percent, abs=0.005), section


def test_known_annual_percentage_rate_of_level_payments_is_their_internal_rate():
    """Regulation Z, Appendix J, (c)(1)(i); published, read in a transcription."""
    assert 1200 * internal_rates([-5000.0, *[230.0] * 24]).rate == pytest.approx(9.69, abs=0.005)
