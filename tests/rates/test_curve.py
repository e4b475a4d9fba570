"""The Treasury curve: bootstrap against independent figures, quotes met again, and what lies beyond them (C5)."""

from __future__ import annotations

import math
from itertools import pairwise

import numpy as np
import pytest
from scipy.interpolate import PchipInterpolator

from projector.rates.curve import (
    NODE_MONTHS,
    CurveError,
    CurveReading,
    log_discount_nodes,
    monthly_discounts,
    par_yield,
)
from projector.rates.curve_kernels import half_year_yields, monotone_slopes

TENORS = (1, 2, 3, 4, 6, 12, 24, 36, 60, 84, 120, 240, 360)
# Daily Treasury Par Yield Curve Rates, US Department of the Treasury, in per cent (2023-12-29 cited from memory)
PAR_2022 = (4.12, 4.41, 4.42, 4.69, 4.76, 4.73, 4.41, 4.22, 3.99, 3.96, 3.88, 4.14, 3.97)
PAR_2023 = (5.60, 5.59, 5.40, 5.41, 5.26, 4.79, 4.23, 4.01, 3.84, 3.88, 3.88, 4.20, 4.03)
YEARS = (1, 2, 3, 5, 7, 10, 20, 30)
# zero yields from an independent half-year bootstrap with par yields linear in maturity, bond-equivalent, per cent
ZERO_2022 = (4.729645302897, 4.401818063079, 4.206259760568, 3.966736689704, 3.940240323421, 3.854029197378,
             4.205391154494, 3.9098510395)  # fmt: skip
ZERO_2023 = (4.784384868398, 4.214116530658, 3.990633043861, 3.81790453835, 3.868323648678, 3.871826483858,
             4.296015730291, 3.985985536469)  # fmt: skip


def curve(rates: tuple[float, ...], tenors: tuple[int, ...] = TENORS, *, par: bool = True, linear: bool = False):
    """P(tau) for 0..480 months of one curve. [-], shape (tau,)"""
    yields = np.array(rates, dtype=np.float64)[None, :, None]
    nodes = log_discount_nodes(yields, CurveReading(tenors, par, linear))
    return monthly_discounts(nodes[0], 480)[:, 0]


def percent(rates: tuple[float, ...]) -> tuple[float, ...]:
    return tuple(r / 100.0 for r in rates)


@pytest.mark.parametrize(
    ("quoted", "zeros", "at_10", "at_30"),
    [(PAR_2022, ZERO_2022, 0.6826748730746, 0.3129733056782), (PAR_2023, ZERO_2023, 0.6814839591774, 0.306041184829)],
    ids=["2022-12-30", "2023-12-29"],
)
def test_known_treasury_par_curve_gives_the_zero_yields_of_an_independent_bootstrap(
    quoted, zeros, at_10, at_30
) -> None:
    discount = curve(percent(quoted), linear=True)
    found = [200.0 * (discount[12 * y] ** (-0.5 / y) - 1.0) for y in YEARS]
    np.testing.assert_allclose(found, zeros, rtol=0, atol=6e-12 * 100)
    assert discount[120] == pytest.approx(at_10, abs=6e-13)
    assert discount[360] == pytest.approx(at_30, abs=6e-13)


@pytest.mark.parametrize("linear", [False, True], ids=["monotone", "linear"])
@pytest.mark.parametrize("quoted", [PAR_2022, PAR_2023, tuple(4.0 - p for p in PAR_2023)])
def test_limit_every_quoted_tenor_is_priced_again(quoted, linear) -> None:
    discount = curve(percent(quoted), linear=linear)
    for tenor, rate in zip(TENORS, percent(quoted)):
        if tenor >= 6:
            assert par_yield(discount[:, None], tenor)[0] == pytest.approx(rate, abs=1e-12)
    # a three-month and a one-month bill at their simple yields
    assert (1.0 / discount[3] - 1.0) * 4.0 == pytest.approx(quoted[2] / 100.0, abs=1e-12)
    assert (1.0 / discount[1] - 1.0) * 12.0 == pytest.approx(quoted[0] / 100.0, abs=1e-12)


def test_known_zero_yields_are_discounted_at_their_bond_equivalent_rate() -> None:
    discount = curve(percent(PAR_2022), par=False, linear=True)
    for tenor, rate in zip(TENORS, percent(PAR_2022)):
        if tenor >= 6:
            assert discount[tenor] == pytest.approx((1.0 + rate / 2.0) ** (-tenor / 6.0), rel=1e-13)


def test_limit_the_six_month_par_yield_is_a_zero_yield() -> None:
    for par in (True, False):
        assert curve(percent(PAR_2022), par=par)[6] == pytest.approx(1.0 / 1.0238, rel=1e-15)


def random_knots(seed: int) -> tuple[np.ndarray, np.ndarray]:
    """Maturities and yields of a random curve, some of its stretches flat, some yields negative."""
    rng = np.random.default_rng(seed)
    x = np.sort(rng.choice(np.arange(1, 61), size=int(rng.integers(3, 12)), replace=False)) / 2.0
    y = rng.uniform(-0.02, 0.10, x.size)
    if seed % 3 == 0:
        y[1] = y[0]
    return x, y


@pytest.mark.parametrize("seed", range(60))
def test_known_monotone_slopes_and_half_year_yields_agree_with_scipy(seed: int) -> None:
    x, y = random_knots(seed)
    slope, out = np.empty(x.size), np.empty(60)
    monotone_slopes(x, y, slope)
    half_year_yields(x, y, slope, False, out)
    theirs = PchipInterpolator(x, y)
    np.testing.assert_allclose(slope, theirs.derivative()(x), rtol=0, atol=1e-13)
    at = np.clip(0.5 * np.arange(1, 61), x[0], x[-1])
    np.testing.assert_allclose(out, theirs(at), rtol=0, atol=1e-13)


@pytest.mark.parametrize("seed", range(20))
def test_order_the_monotone_curve_never_leaves_its_neighbouring_quotes(seed: int) -> None:
    x, y = random_knots(seed)
    slope, out = np.empty(x.size), np.empty(60)
    monotone_slopes(x, y, slope)
    half_year_yields(x, y, slope, False, out)
    for t, value in zip(0.5 * np.arange(1, 61), out):
        right = int(np.clip(np.searchsorted(x, t), 1, x.size - 1))
        near = y[right - 1 : right + 1]
        assert near.min() - 1e-15 <= value <= near.max() + 1e-15


def test_limit_two_quotes_are_joined_by_a_line_either_way() -> None:
    one = curve((0.05, 0.02, 0.04), (3, 12, 120))
    other = curve((0.05, 0.02, 0.04), (3, 12, 120), linear=True)
    assert par_yield(one[:, None], 66)[0] != pytest.approx(par_yield(other[:, None], 66)[0], abs=1e-6)
    x, y, slope, out = np.array([1.0, 10.0]), np.array([0.02, 0.04]), np.empty(2), np.empty(60)
    monotone_slopes(x, y, slope)
    half_year_yields(x, y, slope, False, out)
    assert out[10] == pytest.approx(0.02 + 0.02 * 4.5 / 9.0, abs=1e-16)


def test_limit_a_flat_curve_stays_flat_and_the_short_end_is_simple() -> None:
    discount = curve((0.06, 0.06, 0.06), (3, 12, 120))
    assert discount[1] == pytest.approx(1.0 / 1.005, rel=1e-15)
    assert discount[3] == pytest.approx(1.0 / 1.015, rel=1e-15)
    for half_years in range(1, 81):
        assert discount[6 * half_years] == pytest.approx(1.03**-half_years, rel=1e-13)


def test_known_log_discounts_are_straight_between_nodes() -> None:
    log = np.log(curve(percent(PAR_2022)))
    nodes = [0, *NODE_MONTHS.tolist()]
    for left, right in pairwise(nodes):
        for tau in range(left + 1, right):
            share = (tau - left) / (right - left)
            assert log[tau] == pytest.approx((1.0 - share) * log[left] + share * log[right], abs=1e-14)


@pytest.mark.parametrize(("tenors", "last"), [(TENORS, 360), (TENORS[:-2], 120)], ids=["quoted to 30", "quoted to 10"])
def test_limit_forwards_are_flat_beyond_the_last_quote(tenors, last) -> None:
    discount = curve(percent(PAR_2022)[: len(tenors)], tenors)
    ratio = discount[last + 1 :] / discount[last:-1]
    np.testing.assert_allclose(ratio, discount[last] / discount[last - 1], rtol=1e-12)


def test_limit_negative_rates_give_discounts_above_one() -> None:
    discount = curve((-0.01, -0.012, -0.008, -0.005), (3, 12, 60, 120))
    assert (discount[1:121] > 1.0).all()
    assert par_yield(discount[:, None], 12)[0] == pytest.approx(-0.012, abs=1e-12)
    assert discount[3] == pytest.approx(1.0 / (1.0 - 0.01 / 4.0), rel=1e-15)


def test_limit_a_curve_that_leaves_no_positive_discount_names_its_month_and_path() -> None:
    yields = np.full((4, 3, 5), 0.05)
    yields[2, :, 3] = (0.01, 0.01, 0.30)  # thirty years at 30 % after one year at 1 %
    with pytest.raises(CurveError, match="month 2, path number 4, leave no positive discount"):
        log_discount_nodes(yields, CurveReading((3, 12, 360), True, True))


@pytest.mark.parametrize(
    ("tenors", "short", "unused"),
    [
        (TENORS, (1, 3), (2, 4)),
        ((3, 12, 120), (3, 3), ()),
        ((6, 12, 120), (6, 6), ()),
        ((2, 4, 6, 12), (2, 2), (4,)),  # of two equally near the shorter
        ((2, 4, 12), (2, 2), ()),  # the four-month carries the interpolation below a year
    ],
)
def test_known_which_tenors_serve_the_short_nodes_and_which_are_not_used(tenors, short, unused) -> None:
    reading = CurveReading(tenors, True, False)
    assert tuple(tenors[reading.short_tenor(node)] for node in (1, 3)) == short
    assert reading.unused_tenors() == unused


def test_order_one_path_alone_has_the_bits_it_has_among_others() -> None:
    rng = np.random.default_rng(5)
    yields = 0.04 + rng.uniform(-0.005, 0.005, (3, len(TENORS), 11))
    reading = CurveReading(TENORS, True, False)
    together = log_discount_nodes(yields, reading)
    for p in (0, 4, 10):
        alone = log_discount_nodes(np.ascontiguousarray(yields[:, :, p : p + 1]), reading)
        np.testing.assert_array_equal(alone[:, :, 0], together[:, :, p])
        for m in range(3):
            months = monthly_discounts(np.ascontiguousarray(alone[m]), 400)
            np.testing.assert_array_equal(months[:, 0], monthly_discounts(together[m], 400)[:, p])


def test_order_a_shorter_asking_gives_the_same_discounts() -> None:
    nodes = log_discount_nodes(np.array(percent(PAR_2022))[None, :, None], CurveReading(TENORS, True, False))[0]
    whole = monthly_discounts(nodes, 480)
    for last in (1, 2, 3, 5, 6, 7, 100, 359, 360, 361):
        np.testing.assert_array_equal(monthly_discounts(nodes, last), whole[: last + 1])


def test_known_hull_bond_price_from_zero_rates() -> None:
    """Hull, Options, Futures, and Other Derivatives, zero rates and bond price (cited from memory): 98.39, 6.87 %."""
    zeros = ((6, 0.050), (12, 0.058), (18, 0.064), (24, 0.068))  # continuously compounded
    equivalent = tuple(2.0 * (math.exp(z / 2.0) - 1.0) for _, z in zeros)
    discount = curve(equivalent, (6, 12, 18, 24), par=False, linear=True)
    price = sum(3.0 * discount[tau] for tau, _ in zeros) + 100.0 * discount[24]
    assert price == pytest.approx(98.39, abs=0.0051)
    assert 100.0 * par_yield(discount[:, None], 24)[0] == pytest.approx(6.87, abs=0.0051)
