"""Forwards, joint laws and conversions of a whole market."""

import math
import pickle
from dataclasses import replace
from datetime import date

import numpy as np
import pytest
import QuantLib as ql

from pricer.market.market import MissingMarketDataError
from pricer.market.underlying import Underlying
from tests.unit.markets import CORRELATION, TODAY, small_market

EXPIRY = date(2027, 11, 30)  # one year of ACT/365F


def test_forwards_by_hand():
    market = small_market()
    assert market.forward("ARVENNE", EXPIRY) == pytest.approx(100.0 * math.exp(0.02 - 0.02), rel=1e-14)
    assert market.forward("BELCOR", EXPIRY) == pytest.approx(50.0 * 0.97 * math.exp(0.02), rel=1e-14)
    assert market.forward("CADMUS", EXPIRY) == pytest.approx(80.0 * math.exp(0.035 - 0.01), rel=1e-14)
    assert market.forward("BELCOR", TODAY) == 50.0


def test_the_forward_is_that_of_quantlibs_lognormal_process():
    """Spot, yield and rate curves in QuantLib's Black-Scholes process; its forward is spot times the ratio of both."""
    market, day = small_market(), date(2029, 3, 15)
    start, end = ql.Date(30, 11, 2026), ql.Date(15, 3, 2029)
    count = ql.Actual365Fixed()
    rates = ql.YieldTermStructureHandle(
        ql.DiscountCurve(
            [start, ql.Date(30, 11, 2027), ql.Date(28, 11, 2031)],
            [1.0, math.exp(-0.02), math.exp(-0.025 * 1824 / 365)],
            count,
        )
    )
    yields = ql.YieldTermStructureHandle(ql.FlatForward(start, 0.02, count))
    forward = 100.0 * yields.discount(end) / rates.discount(end)
    assert market.forward("ARVENNE", day) == pytest.approx(forward, rel=1e-12)


def test_forwards_ignore_the_trades_collateral():
    market = small_market()
    assert market.discount_factor("EUR", "USD", EXPIRY) == pytest.approx(math.exp(-0.018), rel=1e-14)
    without = replace(market, curves={k: v for k, v in market.curves.items() if k != ("EUR", "USD")})
    assert without.forward("ARVENNE", EXPIRY) == market.forward("ARVENNE", EXPIRY)


def test_the_joint_law_is_made_of_forwards_and_covariances():
    law = small_market().joint_lognormal(("BELCOR", "ARVENNE"), date(2028, 12, 15))
    np.testing.assert_allclose(
        law.forwards, [small_market().forward(u, date(2028, 12, 15)) for u in ("BELCOR", "ARVENNE")]
    )
    years = 746 / 365
    np.testing.assert_allclose(law.deviations, [0.31 * math.sqrt(years), 0.21 * math.sqrt(years)], rtol=1e-12)
    # Both curves keep nearly one ratio of volatilities over time, so almost all correlation survives.
    assert 0.4995 < law.correlation[0, 1] < CORRELATION[0, 1]


def test_on_the_valuation_date_the_law_is_todays_spots():
    law = small_market().joint_lognormal(("ARVENNE", "BELCOR"), TODAY)
    np.testing.assert_array_equal(law.forwards, [100.0, 50.0])
    np.testing.assert_array_equal(law.covariance, np.zeros((2, 2)))


def test_one_underlying_needs_no_correlations():
    law = small_market(correlation=None).joint_lognormal(("CADMUS",), EXPIRY)
    assert law.n_assets == 1
    assert law.covariance[0, 0] > 0.0


def test_what_is_missing_is_named():
    market = small_market()
    bare = Underlying("DORNACH", "EUR", 10.0, "TARGET")
    lacking = replace(market, underlyings={**market.underlyings, "DORNACH": bare})
    for call, message in (
        (lambda: market.forward("NOBODY", EXPIRY), 'the market has no underlying "NOBODY"'),
        (
            lambda: lacking.joint_lognormal(("DORNACH",), EXPIRY),
            'the market has no volatility for underlying "DORNACH"',
        ),
        (
            lambda: market.discount_factor("EUR", "GBP", EXPIRY),
            'the market has no discount curve for EUR with collateral "GBP"',
        ),
        (
            lambda: replace(market, correlation=None).joint_lognormal(("ARVENNE", "BELCOR"), EXPIRY),
            "the market has no usable correlation matrix",
        ),
    ):
        with pytest.raises(MissingMarketDataError) as caught:
            call()
        assert str(caught.value) == message


def test_several_currencies_have_no_joint_law_yet():
    with pytest.raises(ValueError, match="a joint law needs underlyings in one currency; got EUR, USD"):
        small_market().joint_lognormal(("ARVENNE", "CADMUS"), EXPIRY)


def test_conversion_to_the_reporting_currency():
    assert small_market().to_reporting("EUR") == 1.0
    assert small_market().to_reporting("USD") == pytest.approx(1 / 1.10)


def test_impossible_underlyings_are_refused():
    with pytest.raises(ValueError, match=r"the spot of X must be above 0; got 0\.0"):
        Underlying("X", "EUR", 0.0, "TARGET")
    with pytest.raises(ValueError, match="the lot size of X must be above 0; got nan"):
        Underlying("X", "EUR", 1.0, "TARGET", math.nan)
    with pytest.raises(ValueError, match='"MOON" is not a calendar'):
        Underlying("X", "EUR", 1.0, "MOON")


def test_a_market_travels_to_another_process_unchanged():
    market = small_market()
    there = pickle.loads(pickle.dumps(market))
    ours, theirs = (m.joint_lognormal(("ARVENNE", "BELCOR"), EXPIRY) for m in (market, there))
    np.testing.assert_array_equal(ours.forwards, theirs.forwards)
    np.testing.assert_array_equal(ours.covariance, theirs.covariance)
