"""Volatility curves against QuantLib's, and the covariance against a day by day sum."""

import math
from datetime import date, timedelta

import numpy as np
import pytest
import QuantLib as ql

from pricer.market.volatility import CalendarArbitrageError, VolatilityCurve, covariance

TODAY = date(2026, 11, 30)
DATES = [date(2026, 12, 18), date(2027, 6, 18), date(2028, 12, 15)]
VOLS = [0.24, 0.21, 0.22]


def curve(dates=DATES, vols=VOLS):
    return VolatilityCurve.from_quotes(TODAY, dates, vols)


def quantlib_curve(dates, vols):
    as_ql = [ql.Date(d.day, d.month, d.year) for d in (TODAY, *dates)]
    out = ql.BlackVarianceCurve(as_ql[0], as_ql[1:], vols, ql.Actual365Fixed())
    out.enableExtrapolation()
    return out


def test_total_variance_is_that_of_quantlib_between_at_and_beyond_the_quotes():
    ours, theirs = curve(), quantlib_curve(DATES, VOLS)
    for days in (1, 17, 18, 19, 100, 200, 201, 500, 746, 747, 1500):
        day = TODAY + timedelta(days=days)
        assert ours.total_variance(day) == pytest.approx(theirs.blackVariance(days / 365, 1.0), rel=1e-12)
        assert ours.volatility(day) == pytest.approx(theirs.blackVol(days / 365, 1.0), rel=1e-12)


def test_the_volatility_is_flat_before_the_first_and_after_the_last_quote():
    ours = curve()
    assert ours.volatility(TODAY) == pytest.approx(0.24, rel=1e-15)
    assert ours.volatility(date(2026, 12, 1)) == pytest.approx(0.24, rel=1e-14)
    assert ours.volatility(date(2040, 1, 1)) == pytest.approx(0.22, rel=1e-14)
    assert not ours.is_extrapolated(DATES[-1])
    assert ours.is_extrapolated(date(2028, 12, 16))


def test_todays_variance_is_zero_and_yesterdays_unknown():
    assert curve().total_variance(TODAY) == 0.0
    with pytest.raises(ValueError, match="2026-11-29 lies before the valuation date 2026-11-30 and has no volatility"):
        curve().total_variance(date(2026, 11, 29))


def test_falling_total_variance_is_refused_with_both_dates_its_size_and_the_mend():
    dates = [date(2027, 11, 30), date(2028, 11, 29)]
    with pytest.raises(CalendarArbitrageError) as caught:
        curve(dates, [0.30, 0.21])
    assert str(caught.value) == (
        "total variance falls from 0.090000 on 2027-11-30 to 0.088200 on 2028-11-29, by 0.001800; "
        "the volatility of 2028-11-29 must be at least 21.22 %"
    )
    assert (caught.value.earlier, caught.value.later) == tuple(dates)
    curve(dates, [0.30, 0.2122])  # what the message asks for is enough


def test_constant_total_variance_is_no_arbitrage():
    dates = [date(2027, 11, 30), date(2028, 11, 29)]
    flat = curve(dates, [0.30, 0.30 / math.sqrt(2.0)])
    assert flat.total_variance(date(2028, 6, 1)) == pytest.approx(0.09, rel=1e-12)


@pytest.mark.parametrize(
    ("dates", "vols", "message"),
    [
        ([], [], "a volatility curve needs at least one quote"),
        (DATES, [0.2], "3 expiry dates for 1 volatilities"),
        ([TODAY], [0.2], "2026-11-30 follows 2026-11-30"),
        ([DATES[1], DATES[0]], [0.2, 0.2], "2026-12-18 follows 2027-06-18"),
        ([DATES[0]], [-0.2], "must be a number from 0 up; got -0.2"),
        ([DATES[0]], [math.nan], "must be a number from 0 up; got nan"),
    ],
)
def test_bad_quotes_are_refused(dates, vols, message):
    with pytest.raises(ValueError) as caught:
        curve(dates, vols)
    assert message in str(caught.value)


@pytest.mark.parametrize("days", [1, 18, 90, 201, 555, 900, 1600])
def test_covariance_is_the_integral_of_the_product_of_instantaneous_volatilities(days):
    """Day by day, with each day's variance from QuantLib: quotes fall on dates, so daily steps lose nothing."""
    quotes = [
        (DATES, VOLS),
        ([date(2027, 3, 19), date(2028, 12, 15)], [0.30, 0.34]),
        ([date(2027, 9, 17), date(2031, 12, 19)], [0.18, 0.25]),
    ]
    correlation = np.array([[1.0, 0.6, -0.2], [0.6, 1.0, 0.3], [-0.2, 0.3, 1.0]])
    steps = np.arange(days + 1) / 365
    daily = np.array([np.diff([quantlib_curve(*quote).blackVariance(t, 1.0) for t in steps]) for quote in quotes])
    integral = np.einsum("it,jt->ij", np.sqrt(daily), np.sqrt(daily))
    ours = covariance([curve(*quote) for quote in quotes], correlation, TODAY + timedelta(days=days))
    np.testing.assert_allclose(ours, correlation * integral, rtol=1e-10)


def test_covariance_of_flat_volatilities_by_hand():
    flat = [curve([DATES[0]], [0.2]), curve([DATES[1]], [0.3])]
    ours = covariance(flat, np.array([[1.0, 0.5], [0.5, 1.0]]), date(2028, 11, 29))
    np.testing.assert_allclose(ours, [[0.08, 0.06], [0.06, 0.18]], rtol=1e-13)


def test_different_term_structures_decorrelate():
    """All of one's variance lies before, all of the other's after the middle: levels are uncorrelated."""
    early = curve([date(2027, 11, 30), date(2028, 11, 29)], [0.3, 0.3 / math.sqrt(2)])
    late = curve([date(2027, 11, 30), date(2028, 11, 29)], [0.0, 0.3])
    ours = covariance([early, late], np.ones((2, 2)), date(2028, 11, 29))
    np.testing.assert_allclose(ours, np.diag([0.09, 0.18]), atol=1e-12)


def test_today_has_no_covariance_and_misfits_are_refused():
    np.testing.assert_array_equal(covariance([curve()], np.ones((1, 1)), TODAY), [[0.0]])
    with pytest.raises(ValueError, match="do not fit a correlation matrix of shape"):
        covariance([curve()], np.ones((2, 2)), DATES[0])
    with pytest.raises(ValueError, match="lies before the valuation date"):
        covariance([curve()], np.ones((1, 1)), date(2026, 1, 1))
    other = VolatilityCurve.from_quotes(date(2026, 11, 27), DATES, VOLS)
    with pytest.raises(ValueError, match="different valuation dates: 2026-11-27, 2026-11-30"):
        covariance([curve(), other], np.ones((2, 2)), DATES[0])
