"""Shifts of the starting curve: what is written out reads back the same, and twelve keys make one parallel shift."""

from __future__ import annotations

import numpy as np
import pytest
from valuation_bonds import HUMPED, TENORS, reading

from projector.rates.curve import CurveReading, log_discount_nodes, monthly_discounts
from projector.rates.key_rates import (
    KEY_MONTHS,
    KEY_NAMES,
    key_rate_shifts,
    par_yield_at,
    shifted_discounts,
    triangular_shares,
    written_out,
)

LAST = 480
READINGS = [(par, linear) for par in (True, False) for linear in (True, False)]


def quoted(yields: np.ndarray, how: CurveReading) -> np.ndarray:
    return monthly_discounts(log_discount_nodes(yields[None, :, None], how)[0], LAST)[:, 0]


@pytest.mark.parametrize(("par", "linear"), READINGS)
def test_limit_a_curve_written_out_discounts_as_the_quoted_one(par: bool, linear: bool) -> None:
    how = reading(par, linear)
    out = shifted_discounts(*written_out(HUMPED, how), np.zeros((1, 1)), LAST)[:, 0]
    np.testing.assert_allclose(out, quoted(HUMPED, how), rtol=1e-14)


@pytest.mark.parametrize(("par", "linear"), READINGS)
def test_limit_a_parallel_shift_of_the_written_out_curve_is_one_of_the_quoted_yields(par: bool, linear: bool) -> None:
    how = reading(par, linear)
    out = shifted_discounts(*written_out(HUMPED, how), np.full((1, 1), 0.0025), LAST)[:, 0]
    np.testing.assert_allclose(out, quoted(HUMPED + 0.0025, how), rtol=1e-13)


def test_limit_a_curve_quoted_to_ten_years_or_without_six_months_reads_back_too() -> None:
    for tenors in ((3, 12, 120), (1, 2, 60), (12, 24, 30)):
        how, yields = CurveReading(tenors, True, False), np.array([0.04, 0.05, 0.045])
        out = shifted_discounts(*written_out(yields, how), np.zeros((1, 1)), LAST)[:, 0]
        np.testing.assert_allclose(out, quoted(yields, how), rtol=1e-14)


def test_limit_the_twelve_keys_add_to_the_parallel_shift_at_every_tenor() -> None:
    for tenors in (KEY_MONTHS, TENORS, (1, 3, *range(6, 366, 6)), (2, 9, 480)):
        shares = triangular_shares(tenors)
        assert (shares >= 0.0).all()
        np.testing.assert_allclose(shares.sum(axis=0), 1.0, rtol=0.0, atol=1e-15)
    assert (triangular_shares(KEY_MONTHS) == np.eye(12)).all()
    assert len(KEY_NAMES) == 12
    shifts = key_rate_shifts((1, 3, *range(6, 366, 6)), 0.0025, 0.0005)
    np.testing.assert_allclose(shifts[:, 3:15].sum(axis=1), 0.0005, rtol=1e-14)
    assert (shifts[:, 0] == 0.0).all()
    assert (shifts[:, 1] == -shifts[:, 2]).all()
    assert (shifts[:, 15:] == -shifts[:, 3:15]).all()


def test_known_ninety_months_share_between_seven_and_ten_years() -> None:
    """Ho 1992: linear between neighbouring keys. 90 months lie 6 of 36 months beyond seven years."""
    shares = triangular_shares((90,))[:, 0]
    assert shares[KEY_MONTHS.index(84)] == pytest.approx(30 / 36, rel=1e-15)
    assert shares[KEY_MONTHS.index(120)] == pytest.approx(6 / 36, rel=1e-15)


def test_limit_the_par_yield_at_quoted_lives_is_the_quoted_yield() -> None:
    discount = quoted(HUMPED, reading())
    np.testing.assert_allclose(par_yield_at(discount, np.array(TENORS) / 12.0), HUMPED, rtol=0.0, atol=1e-12)
    assert par_yield_at(discount, np.array([0.0]))[0] == pytest.approx(HUMPED[0], abs=1e-12)
    between = par_yield_at(discount, np.array([5.25]))[0]
    assert between == pytest.approx(par_yield_at(discount, np.array([5.0, 5.5])).mean(), abs=1e-15)
