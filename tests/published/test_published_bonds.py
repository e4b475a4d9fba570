"""Day counts, accrued interest, prices and yields against published figures, and against two libraries.

Each case names its source and how the figure was come by: "published" = the figure was read in a public copy or in a
test file or documentation that quotes the publication; "recalled" = recalled from memory and confirmed by computation;
"own" = the rule is published, the figure is ours by another route.
"""

from __future__ import annotations

import itertools
import random
from dataclasses import replace
from datetime import date, timedelta

import pytest
import QuantLib as ql
from numpy.testing import assert_allclose

from projector.bonds import yields
from projector.bonds.schedule import DatedBond, coupons_between, dated_bond, periods_left
from projector.bonds.yields import Redemption, accrued_interest, clean_price, dirty_price, remaining_payments
from projector.measures.value import npv
from projector.study import daycounts
from projector.study.daycounts import DAY_COUNTS, ISO_20022, year_fraction

D = date.fromisoformat


def bond(rate: float, issue: str, maturity: str, **other) -> DatedBond:
    terms = {"frequency": 2, "day_count": "ACT/ACT.ICMA", "end_of_month": False, **other}
    return dated_bond(coupon_rate=rate, issue=D(issue), maturity=D(maturity), **terms)


# ---- day counts -------------------------------------------------------------------------------------------------

# ISDA, EMU and Market Conventions: Recent Developments (1998), worked examples of Actual/Actual; published, read in the
# tests of an open-source pricing library that cite the memo. In the second long-first-coupon period the figure is the
# one that follows from the definition; the memo is said to print another.
ACTUAL_ACTUAL = [  # start, end, regular period, coupons a year, ISDA, ICMA
    ("2003-11-01", "2004-05-01", ("2003-11-01", "2004-05-01"), 2, 0.497724380567, 0.5),
    ("1999-02-01", "1999-07-01", ("1998-07-01", "1999-07-01"), 1, 0.410958904110, 0.410958904110),
    ("2003-07-15", "2004-01-15", ("2003-07-15", "2004-01-15"), 2, 0.504004790778, 0.5),
    ("1999-07-30", "2000-01-30", ("1999-07-30", "2000-01-30"), 2, 0.503892506924, 0.5),
    ("2000-01-30", "2000-06-30", ("2000-01-30", "2000-07-30"), 2, 0.415300546448, 0.417582417582),
]


@pytest.mark.parametrize(("start", "end", "period", "frequency", "isda", "icma"), ACTUAL_ACTUAL)
def test_known_actual_actual_fractions_of_the_isda_memo(start, end, period, frequency, isda, icma):
    regular = (D(period[0]), D(period[1]))
    assert year_fraction("ACT/ACT.ISDA", D(start), D(end)) == pytest.approx(isda, abs=2e-11)
    found = year_fraction("ACT/ACT.ICMA", D(start), D(end), period=regular, frequency=frequency)
    assert found == pytest.approx(icma, abs=2e-11)


# ISDA, 30/360 day count conventions (2008), worksheet for the 2006 Definitions 4.16(g) and (h); published, read in the
# tests of an open-source pricing library.
EUROBOND = """
2006-02-28 2006-08-31 182; 2006-08-31 2007-02-28 178; 2007-02-28 2007-08-31 182; 2007-08-31 2008-02-29 179;
2008-02-29 2008-08-31 181; 2008-08-31 2009-02-28 178; 2006-01-31 2006-02-28 28; 2006-02-28 2006-03-03 5;
2006-02-14 2006-02-28 14; 2006-09-30 2006-10-31 30; 2006-10-31 2006-11-28 28; 2007-08-31 2008-02-28 178;
2008-02-28 2008-08-28 180; 2008-02-28 2008-08-31 182; 2007-02-26 2008-02-28 362; 2007-02-26 2008-02-29 363;
2008-02-29 2009-02-28 359; 2008-02-28 2008-03-30 32; 2008-02-28 2008-03-31 32"""
EUROBOND_ISDA = """
2006-01-31 2006-02-28 30; 2006-02-28 2006-03-03 3; 2006-02-14 2006-02-28 16; 2006-09-30 2006-10-31 30;
2006-10-31 2006-11-28 28; 2007-08-31 2008-02-28 178; 2008-02-28 2008-08-31 182; 2007-02-28 2008-02-28 358;
2007-02-28 2008-02-29 359; 2008-02-29 2009-02-28 360; 2008-02-29 2008-03-31 30"""


def rows(sheet: str) -> list[tuple[date, date, int]]:
    cells = [line.split() for line in sheet.split(";")]
    return [(D(start), D(end), int(days)) for start, end, days in cells]


def test_known_eurobond_days_of_the_isda_worksheet():
    for start, end, days in rows(EUROBOND):
        assert daycounts.thirty_e_360_days(start, end) == days, (start, end)


def test_known_eurobond_isda_days_of_the_isda_worksheet_with_termination_on_29_february_2008():
    for start, end, days in rows(EUROBOND_ISDA):
        assert daycounts.thirty_e_360_isda_days(start, end, D("2008-02-29")) == days, (start, end)


def ql_date(day: date) -> ql.Date:
    return ql.Date(day.day, day.month, day.year)


def random_day(rng: random.Random, low: int = 1902, high: int = 2190) -> date:
    return date(low, 1, 1) + timedelta(days=rng.randrange((high - low) * 365))


@pytest.mark.parametrize(
    ("name", "other"),
    [
        ("30/360", ql.Thirty360(ql.Thirty360.BondBasis)),
        ("30E/360", ql.Thirty360(ql.Thirty360.EurobondBasis)),
        ("30E/360.ISDA", ql.Thirty360(ql.Thirty360.ISDA)),
        ("ACT/ACT.ISDA", ql.ActualActual(ql.ActualActual.ISDA)),
        ("ACT/365.FIXED", ql.Actual365Fixed()),
        ("ACT/360", ql.Actual360()),
    ],
)
def test_known_fractions_agree_with_a_pricing_library_on_random_dates(name, other):
    rng = random.Random(11)
    ends = [date(2024, 2, 29), date(2023, 2, 28), date(2024, 1, 31), date(2023, 8, 31), date(2024, 12, 30)]
    pairs = [(random_day(rng), random_day(rng)) for _ in range(400)] + list(itertools.product(ends, ends))
    for start, end in ((min(pair), max(pair)) for pair in pairs):
        expected = other.yearFraction(ql_date(start), ql_date(end))
        assert year_fraction(name, start, end) == pytest.approx(expected, rel=1e-13, abs=1e-13), (start, end)


def test_known_act_365l_divides_by_366_where_its_rule_says_so():
    """ICMA Rule 251.1(i)(2); own figures: semi-annual looks at the end of the period, annual at a 29 February in it."""
    half, year = (D("2023-09-15"), D("2024-03-15")), (D("2023-09-15"), D("2024-09-15"))
    assert year_fraction("ACT/365L", half[0], D("2023-12-15"), period=half, frequency=2) == 91 / 366
    later = (D("2024-03-15"), D("2024-09-15"))
    assert year_fraction("ACT/365L", later[0], D("2024-06-13"), period=later, frequency=2) == 90 / 366
    assert year_fraction("ACT/365L", year[0], D("2023-12-15"), period=year, frequency=1) == 91 / 366
    plain = (D("2024-02-29"), D("2025-02-28"))
    assert year_fraction("ACT/365L", plain[0], D("2024-03-30"), period=plain, frequency=1) == 30 / 365


def test_order_fractions_never_fall_as_the_end_moves_on_from_1900_to_2500():
    for start in (date(1900, 2, 28), date(2400, 2, 29), date(2499, 1, 1)):
        period = (start, daycounts.months_before(start, -12, month_end=False))
        days = [start + timedelta(days=k) for k in range(366) if start + timedelta(days=k) <= period[1]]
        for name in set(DAY_COUNTS) - {"30E/360.ISDA"}:  # that one goes back from 28 to 29 February of a leap year
            found = [year_fraction(name, start, day, period=period, frequency=1) for day in days]
            assert found[0] == 0.0
            assert all(earlier <= later + 1 / 360 for earlier, later in itertools.pairwise(found)), name


def test_limit_iso_codes_name_our_counts_and_unknown_names_are_refused():
    assert set(ISO_20022.values()) == set(DAY_COUNTS)
    assert daycounts.day_count_named("A001") == "30/360"
    with pytest.raises(ValueError, match="day count 'A012' is unknown"):
        year_fraction("A012", D("2024-01-01"), D("2024-02-01"))
    with pytest.raises(ValueError, match="needs the coupon period"):
        year_fraction("ACT/ACT.ICMA", D("2024-01-01"), D("2024-02-01"))
    with pytest.raises(ValueError, match="is before the start"):
        year_fraction("ACT/360", D("2024-02-01"), D("2024-01-01"))


# ---- United States Treasury: 31 CFR 356, Appendix B; published (2024 edition), read in public transcriptions --------


def test_known_treasury_price_in_a_regular_first_period():
    """Section II.A: 8 3/4 % of 15 May 1990 to 15 May 2020 at 8.84 %."""
    found = bond(0.0875, "1990-05-15", "2020-05-15")
    assert clean_price(found, D("1990-05-15"), 0.0884, "treasury") == pytest.approx(99.057893, abs=5e-7)


def test_known_treasury_annuity_values():
    """Section II.A, intermediate values: 59 payments at 4.42 % a half-year."""
    assert npv([1.0] * 59, 0.0442, first_time=1) == pytest.approx(20.8610780353, abs=6e-11)
    assert npv([1.0], 0.0442, first_time=59) == pytest.approx(0.0779403508, abs=6e-11)


def test_known_treasury_price_with_a_long_first_period():
    """Section II.C: 8 1/2 % of 1 March 1990 to 15 May 1995, first interest 15 November 1990, at 8.53 %."""
    found = bond(0.085, "1990-03-01", "1995-05-15", first_coupon=D("1990-11-15"))
    assert found.coupons[0].amount == pytest.approx(4.25 * (1 + 75 / 181), abs=1e-12)
    assert clean_price(found, D("1990-03-01"), 0.0853, "treasury") == pytest.approx(99.805118, abs=5e-7)


def test_known_treasury_price_of_a_reopening_tells_the_two_conventions_apart():
    """Section II.D: 9 1/2 % of 15 November 1985 to 1995, settled 29 November 1985, at 9.54 %."""
    found, day = bond(0.095, "1985-11-15", "1995-11-15"), D("1985-11-29")
    assert accrued_interest(found, day) == pytest.approx(0.367403, abs=5e-7)
    assert clean_price(found, day, 0.0954, "treasury") == pytest.approx(99.730918, abs=5e-7)
    street = clean_price(found, day, 0.0954, "street")
    assert abs(street - 99.730918) == pytest.approx(0.0077, abs=5e-5)  # own: what the wrong convention would miss by


def test_known_treasury_price_of_a_reopening_in_a_short_first_period():
    """Section II.F: 10 1/2 % of 16 May 1983 to 15 May 1991, first interest 15 November 1983, settled 15 August 1983."""
    found, day = bond(0.105, "1983-05-16", "1991-05-15", first_coupon=D("1983-11-15")), D("1983-08-15")
    assert found.coupons[0].amount == pytest.approx(5.25 * 183 / 184, abs=1e-12)
    assert dirty_price(found, day, 0.1053, "treasury") == pytest.approx(102.373541, abs=1e-6)
    assert clean_price(found, day, 0.1053, "treasury") == pytest.approx(99.777074, abs=1e-6)


def test_known_treasury_accrued_interest_over_two_half_years():
    """Section I.D(2): 10 3/4 % on 1,000, 44/181 of one half-year and 81/184 of the next. The dates are ours."""
    found = bond(0.1075, "1985-04-01", "1989-11-15", first_coupon=D("1985-11-15"))
    assert 10 * accrued_interest(found, D("1985-08-04")) == pytest.approx(36.727983109, abs=2e-8)


# ---- United Kingdom: Debt Management Office, Formulae for Calculating Gilt Prices from Yields (1998), annex;
# published, read in the documentation of an open-source fixed-income library that tabulates the examples


@pytest.mark.parametrize(
    ("rate", "issue", "maturity", "settled", "annual_yield", "dirty"),
    [
        (0.08, "1996-06-07", "2015-12-07", "1999-05-24", 0.04445, 145.012268),
        (0.08, "1996-06-07", "2015-12-07", "1999-06-07", 0.04445, 141.257676),
        (0.0675, "1996-05-26", "2004-11-26", "1999-05-17", 0.04634, 113.415969),
    ],
)
def test_known_gilt_prices(rate, issue, maturity, settled, annual_yield, dirty):
    found = dirty_price(bond(rate, issue, maturity), D(settled), annual_yield, "street")
    assert found == pytest.approx(dirty, abs=6e-7)


def test_known_gilt_price_in_the_ex_dividend_period():
    """The same annex, first example settled 27 May 1999: the buyer does not get the next coupon."""
    payments = remaining_payments(bond(0.08, "1996-06-07", "2015-12-07"), D("1999-05-27"), "street")
    without = replace(payments, amounts=(0.0, *payments.amounts[1:]))
    assert yields.present_value(without, 0.04445) == pytest.approx(141.070132, abs=6e-7)


# ---- spreadsheet help: Microsoft Excel and LibreOffice Calc, PRICE, YIELD, DURATION, ODDFPRICE ----------------------


@pytest.mark.parametrize(
    ("settled", "maturity", "clean", "within"),
    [
        ("1999-02-15", "2007-11-15", 95.04287, 5e-6),  # published: LibreOffice help, read in a test that quotes it
        ("2008-02-15", "2017-11-15", 94.63436162, 5e-9),  # recalled: Excel help
    ],
)
def test_known_spreadsheet_prices(settled, maturity, clean, within):
    found = bond(0.0575, "1997-11-15", maturity, day_count="30/360")
    assert clean_price(found, D(settled), 0.065, "street") == pytest.approx(clean, abs=within)


def test_known_spreadsheet_yield():
    """Excel help, YIELD; recalled."""
    found = bond(0.0575, "2006-11-15", "2016-11-15", day_count="30/360")
    assert yields.yield_from_clean(found, D("2008-02-15"), 95.04287, "street") == pytest.approx(0.065000007, abs=6e-10)


def test_known_spreadsheet_duration():
    """Excel help, DURATION; recalled. Modified duration is Macaulay's over 1 + y / 2."""
    payments = remaining_payments(bond(0.08, "2018-01-01", "2048-01-01"), D("2018-07-01"), "street")
    assert yields.macaulay_duration(payments, 0.09) == pytest.approx(10.9191453, abs=5e-8)
    assert yields.modified_duration(payments, 0.09) == pytest.approx(10.9191453 / 1.045, abs=5e-8)


def test_known_spreadsheet_price_with_a_short_first_coupon():
    """Excel help, ODDFPRICE; recalled."""
    found = bond(0.0785, "2008-10-15", "2021-03-01", first_coupon=D("2009-03-01"))
    assert clean_price(found, D("2008-11-11"), 0.0625, "street") == pytest.approx(113.597717, abs=5e-7)


# ---- MSRB Rule G-33: formulas of the rule, figures own --------------------------------------------------------------


def test_known_msrb_price_of_interest_paid_at_redemption():
    """G-33(b)(i)(A): 4.5 % of 15 January 2025 paid once on 15 October 2025; 85 days accrued of 270."""
    terms = {"frequency": 1, "day_count": "30/360", "first_coupon": D("2025-10-15")}
    found = bond(0.045, "2025-01-15", "2025-10-15", **terms)
    assert daycounts.thirty_360_days(found.issue, D("2025-04-10")) == 85
    assert daycounts.thirty_360_days(found.issue, found.maturity) == 270
    assert clean_price(found, D("2025-04-10"), 0.05, "street") == pytest.approx(99.722876, abs=5e-7)


def test_known_msrb_price_with_one_coupon_left_bears_simple_interest():
    """G-33(b)(i)(B)(1): 5 % to 1 November 2025, settled 17 June 2025, at 4.1 %."""
    found = bond(0.05, "2015-11-01", "2025-11-01", day_count="30/360")
    assert clean_price(found, D("2025-06-17"), 0.041, "street") == pytest.approx(100.320361, abs=5e-7)
    assert accrued_interest(found, D("2025-06-17")) == pytest.approx(0.638889, abs=5e-7)


# ---- a pricing library on random bonds ------------------------------------------------------------------------------


@pytest.fixture
def evaluation_date():
    before = ql.Settings.instance().evaluationDate
    yield lambda day: setattr(ql.Settings.instance(), "evaluationDate", ql_date(day))
    ql.Settings.instance().evaluationDate = before


def ql_bond(ours: DatedBond, day_count: str):
    period = ql.Period(12 // ours.frequency, ql.Months)
    none, still = ql.NullCalendar(), ql.Unadjusted
    back = ql.DateGeneration.Backward
    dates = ql_date(ours.coupons[0].start), ql_date(ours.maturity)
    schedule = ql.Schedule(*dates, period, none, still, still, back, ours.end_of_month)
    icma = ql.ActualActual(ql.ActualActual.ISMA, schedule)
    count = icma if day_count == "ACT/ACT.ICMA" else ql.Thirty360(ql.Thirty360.BondBasis)
    return ql.FixedRateBond(0, 100.0, schedule, [ours.coupon_rate], count), count


@pytest.mark.parametrize("day_count", ["30/360", "ACT/ACT.ICMA"])
def test_known_prices_yields_and_accrued_agree_with_a_pricing_library(day_count, evaluation_date):
    rng = random.Random(5)
    for _ in range(60):
        frequency = rng.choice([1, 2, 4, 12])
        maturity = random_day(rng, 2030, 2080).replace(day=rng.randint(1, 28))
        settled = random_day(rng, 2022, 2028).replace(day=rng.randint(1, 28))
        terms = {"frequency": frequency, "day_count": day_count}
        ours = bond(round(rng.uniform(0.005, 0.12), 5), "2015-03-01", maturity.isoformat(), **terms)
        theirs, count = ql_bond(ours, day_count)
        evaluation_date(settled)
        rate = rng.uniform(-0.01, 0.15)
        clean = theirs.cleanPrice(rate, count, ql.Compounded, frequency, ql_date(settled))
        assert accrued_interest(ours, settled) == pytest.approx(theirs.accruedAmount(ql_date(settled)), abs=1e-11)
        assert clean_price(ours, settled, rate, "street") == pytest.approx(clean, rel=1e-11)
        assert yields.yield_from_clean(ours, settled, clean, "street") == pytest.approx(rate, abs=1e-11)
        slope = ql.BondFunctions.duration(
            theirs, ql.InterestRate(rate, count, ql.Compounded, frequency), ql.Duration.Modified, ql_date(settled)
        )
        bend = ql.BondFunctions.convexity(
            theirs, ql.InterestRate(rate, count, ql.Compounded, frequency), ql_date(settled)
        )
        payments = remaining_payments(ours, settled, "street")
        assert yields.modified_duration(payments, rate) == pytest.approx(slope, rel=1e-10)
        assert yields.convexity(payments, rate) == pytest.approx(bend, rel=1e-10)


def test_known_month_end_schedules_agree_with_a_pricing_library():
    for maturity, months_end in itertools.product(
        ["2050-02-28", "2048-02-29", "2051-08-31", "2050-04-30"], [True, False]
    ):
        ours = bond(0.05, "2020-01-15", maturity, end_of_month=months_end, frequency=4)
        theirs, _ = ql_bond(ours, "30/360")
        paid = [flow.date().to_date() for flow in theirs.cashflows()][:-1]
        assert [coupon.payment for coupon in ours.coupons] == paid


# ---- limits and orders ----------------------------------------------------------------------------------------------


@pytest.mark.parametrize("convention", ["street", "treasury"])
@pytest.mark.parametrize("day_count", DAY_COUNTS)
@pytest.mark.parametrize("frequency", [0, 1, 2, 4, 12])
def test_limit_yield_and_price_undo_each_other(convention, day_count, frequency):
    rng = random.Random(frequency)
    for _ in range(8):
        rate = rng.uniform(0.001, 0.1) if frequency else 0.0
        maturity = random_day(rng, 2031, 2090).isoformat()
        ours = bond(rate, "2019-05-05", maturity, day_count=day_count, frequency=frequency, end_of_month=True)
        settled = random_day(rng, 2020, 2030)
        call = None if rng.random() < 0.5 else Redemption(settled + timedelta(days=rng.randint(1, 300)), 103.0)
        for annual_yield in (-0.02, 0.0, 0.043, 0.3):
            clean = clean_price(ours, settled, annual_yield, convention, call)
            found = yields.yield_from_clean(ours, settled, clean, convention, call)
            assert found == pytest.approx(annual_yield, abs=2e-12), (maturity, settled, call)


def test_limit_bond_on_a_coupon_date_yields_its_coupon_at_par():
    for frequency in (1, 2, 4, 12):
        ours = bond(0.047, "2021-01-31", "2060-07-31", frequency=frequency, end_of_month=True)
        day = ours.coupons[3].payment
        assert accrued_interest(ours, day) == 0.0
        assert_allclose([clean_price(ours, day, 0.047, name) for name in yields.CONVENTIONS], 100.0, atol=1e-12)


def test_limit_zero_coupon_bond_is_compounded_half_yearly_and_simple_in_the_last_half_year():
    ours = bond(0.0, "2020-02-01", "2040-02-01", frequency=0, day_count="30/360")
    assert ours.coupons == ()
    assert accrued_interest(ours, D("2030-05-17")) == 0.0
    assert dirty_price(ours, D("2030-02-01"), 0.05, "street") == pytest.approx(100 / 1.025**20, rel=1e-14)
    assert dirty_price(ours, D("2039-11-01"), 0.05, "street") == pytest.approx(100 / 1.0125, rel=1e-14)


def test_limit_first_coupon_is_regular_without_a_date_and_by_the_days_with_one():
    regular = bond(0.06, "2020-01-20", "2030-06-15", day_count="30/360")
    assert regular.coupons[0][:2] == (D("2019-12-15"), D("2020-06-15"))
    assert {coupon.amount for coupon in regular.coupons} == {3.0}
    short = bond(0.06, "2020-01-20", "2030-06-15", day_count="30/360", first_coupon=D("2020-06-15"))
    assert short.coupons[0][:3] == (D("2020-01-20"), D("2020-06-15"), pytest.approx(6.0 * 145 / 360))
    long = bond(0.06, "2020-01-20", "2030-06-15", day_count="30/360", first_coupon=D("2020-12-15"))
    assert long.coupons[0].amount == pytest.approx(6.0 * 325 / 360)
    assert short.coupons[1:] == regular.coupons[1:]
    stated = bond(0.06, "2019-12-15", "2030-06-15", day_count="ACT/360", first_coupon=D("2020-06-15"))
    assert stated.coupons == regular.coupons


def test_order_accrued_never_passes_the_coupon_and_falls_to_nothing_on_payment():
    for day_count, frequency in itertools.product(DAY_COUNTS, (1, 2, 4, 12)):
        terms = {"day_count": day_count, "frequency": frequency, "end_of_month": True}
        ours = bond(0.05, "2021-03-10", "2031-08-31", first_coupon=None, **terms)
        for coupon in coupons_between(ours, D("2023-01-01"), D("2025-01-01")):
            found = [accrued_interest(ours, coupon.payment - timedelta(days=k)) for k in (5, 1, 0)]
            assert 0.0 < found[0] <= found[1] <= coupon.amount
            assert found[2] == 0.0


def test_order_time_to_maturity_always_falls_and_is_whole_on_coupon_dates():
    for day_count in ("30/360", "ACT/ACT.ICMA"):
        ours = bond(0.05, "2021-03-10", "2031-08-31", day_count=day_count, end_of_month=True)
        days = [D("2023-01-01") + timedelta(days=k) for k in range(800)]
        left = [periods_left(ours, day) for day in days]
        assert all(later <= earlier + 1 / 90 for earlier, later in itertools.pairwise(left))
        assert [periods_left(ours, coupon.payment) for coupon in ours.coupons[-4:]] == [3.0, 2.0, 1.0, 0.0]


def test_limit_bond_valued_the_day_before_it_matures_on_30_360_still_has_a_yield():
    ours = bond(0.05, "2013-01-01", "2023-01-01", day_count="30/360")
    assert yields.yield_from_clean(ours, D("2022-12-31"), 100.0, "street") == pytest.approx(0.0, abs=1e-12)
    assert yields.yield_from_clean(ours, D("2022-12-31"), 99.99, "street") > 0.03


def test_limit_call_the_day_after_settlement_has_a_yield_on_any_day_of_any_count():
    for day_count, months_end in itertools.product(DAY_COUNTS, [True, False]):
        ours = bond(0.05, "2013-02-28", "2033-08-31", day_count=day_count, end_of_month=months_end)
        for day in (D("2024-01-15") + timedelta(days=k) for k in range(400)):
            call = Redemption(day + timedelta(days=1), 100.0)
            payments = remaining_payments(ours, day, "street", call)
            assert 0.0 < payments.broken < 0.02
            assert yields.yield_of(payments, yields.present_value(payments, 0.04)) == pytest.approx(0.04, abs=1e-9)


def test_limit_slopes_are_those_of_the_price():
    for convention, settled in itertools.product(yields.CONVENTIONS, ["2024-03-03", "2030-04-04"]):
        payments = remaining_payments(bond(0.05, "2020-06-15", "2030-06-15"), D(settled), convention)
        up, mid, down = (yields.present_value(payments, 0.06 + change) for change in (1e-4, 0.0, -1e-4))
        assert yields.modified_duration(payments, 0.06) == pytest.approx((down - up) / 2e-4 / mid, rel=1e-6)
        assert yields.convexity(payments, 0.06) == pytest.approx((up + down - 2 * mid) / 1e-8 / mid, rel=1e-4)


def test_limit_bond_equivalent_keeps_the_yearly_growth():
    assert yields.bond_equivalent(0.05, 2) == 0.05
    assert yields.bond_equivalent(0.05, 1) == pytest.approx(2 * (1.05**0.5 - 1), rel=1e-14)
    assert (1 + yields.bond_equivalent(0.06, 12) / 2) ** 2 == pytest.approx(1.005**12, rel=1e-14)


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"frequency": 3}, "coupon frequency 3 is not one of"),
        ({"frequency": 0}, "coupon rate 0.05 does not go with 0 coupons a year"),
        ({"issue": D("2031-01-01")}, "issue 2031-01-01 is not before maturity 2030-06-15"),
        ({"first_coupon": D("2020-07-15")}, "first coupon 2020-07-15 is not on the schedule counted back"),
        ({"first_coupon": D("2019-12-15")}, "first coupon 2019-12-15 is not possible between"),
        ({"day_count": "ACT/ACT"}, "day count 'ACT/ACT' is unknown"),
    ],
)
def test_limit_contradicting_terms_are_refused(change, message):
    terms = {
        "coupon_rate": 0.05,
        "frequency": 2,
        "day_count": "30/360",
        "end_of_month": False,
        "issue": D("2020-01-15"),
        "maturity": D("2030-06-15"),
    }
    with pytest.raises(ValueError, match=message):
        dated_bond(**{**terms, **change})


def test_limit_days_outside_the_life_and_unknown_conventions_are_refused():
    ours = bond(0.05, "2020-06-15", "2030-06-15")
    with pytest.raises(ValueError, match="is not from issue 2020-06-15"):
        accrued_interest(ours, D("2030-06-15"))
    with pytest.raises(ValueError, match="redemption 2024-01-01 is not after settlement"):
        remaining_payments(ours, D("2024-01-01"), "street", Redemption(D("2024-01-01"), 100.0))
    with pytest.raises(ValueError, match="yield convention 'moosmueller' is not one of"):
        remaining_payments(ours, D("2024-01-01"), "moosmueller")
    with pytest.raises(ValueError, match="has no yield"):
        yields.yield_from_clean(ours, D("2024-01-01"), -5.0, "street")
