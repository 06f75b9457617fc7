"""Quanto and composite laws against published values, QuantLib's quanto engine and a simulation."""

from __future__ import annotations

import math
from dataclasses import replace
from datetime import date
from itertools import pairwise

import numpy as np
import pytest
import QuantLib as ql

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.option import Conversion
from pricer.contracts.profile import Profile, ProfileKind
from pricer.engines.closed_form.black_scholes import BLACK_SCHOLES
from pricer.engines.problem import EuropeanProblem
from pricer.market.correlation import checked
from pricer.market.currency_conversion import composite, quanto
from pricer.market.evaluation_date import evaluation_date
from pricer.market.fx import FxRates
from pricer.market.market import Market
from pricer.market.volatility import VolatilityCurve
from tests.reference.checker import value_by
from tests.unit.markets import TODAY, small_market, volatility

EXPIRY = date(2029, 11, 29)  # 3 years of ACT/365F


def call(law, strike, discount_factor):
    problem = EuropeanProblem(
        law, Aggregate.weighted_sum((1.0,)), Profile(ProfileKind.CALL, strike).payoff(), discount_factor
    )
    return value_by(BLACK_SCHOLES, problem)


def pair(variance, covariance, fx_variance):
    return np.array([[variance, covariance], [covariance, fx_variance]])


def test_a_published_quanto_call():
    """Haug (2007), Option Pricing Formulas, fixed exchange rate foreign-equity option: spot 100, strike 105, half a
    year, domestic rate 8 %, foreign 5 %, yield 4 %, volatilities 20 % and 10 %, correlation 0.3, fixed rate 1.5:
    5.3280 (from memory)."""
    years = 0.5
    forwards = np.array([100.0 * math.exp((0.05 - 0.04) * years)])
    law = quanto(forwards, years * pair(0.04, 0.3 * 0.2 * 0.1, 0.01))
    assert 1.5 * call(law, 105.0, math.exp(-0.08 * years)) == pytest.approx(5.3280, abs=5e-5)


def test_a_published_composite_call():
    """Haug (2007), foreign-equity option struck in domestic currency: spot 100 at a rate of 1.5, strike 160, half a
    year, domestic rate 8 %, yield 5 %, volatilities 20 % and 12 %, correlation 0.45: 8.3056 (from memory).

    The foreign rate drops out; 3 % stands for it."""
    years = 0.5
    forwards = np.array([100.0 * math.exp((0.03 - 0.05) * years)])
    fx_forwards = np.array([1.5 * math.exp((0.08 - 0.03) * years)])
    law = composite(forwards, fx_forwards, years * pair(0.04, 0.45 * 0.2 * 0.12, 0.0144))
    assert call(law, 160.0, math.exp(-0.08 * years)) == pytest.approx(8.3056, abs=5e-5)


def market_with_fx(pair_name: str, matrix_name: str, correlation: float) -> Market:
    """CADMUS, in USD, with a EUR/USD volatility and a correlation given for the rate as ``matrix_name``."""
    fx = FxRates.from_pairs(
        {"EURUSD": 1.10},
        {pair_name: VolatilityCurve.from_quotes(TODAY, [date(2027, 12, 1), date(2030, 6, 3)], [0.09, 0.12])},
    )
    matrix = checked(("CADMUS", matrix_name), np.array([[1.0, correlation], [correlation, 1.0]]))[0]
    market = small_market(fx=fx, correlation=matrix)
    cadmus = replace(market.underlyings["CADMUS"], volatility=volatility(0.25))
    return replace(market, underlyings={**market.underlyings, "CADMUS": cadmus})


@pytest.mark.parametrize(
    ("pair_name", "matrix_name"), [("EURUSD", "EURUSD"), ("EURUSD", "USDEUR"), ("USDEUR", "EURUSD")]
)
def test_a_quanto_call_is_that_of_quantlib(pair_name, matrix_name):
    """QuantLib's quanto engine takes the rate in domestic units (EUR) for one foreign (USD), and its correlation.

    Flat equivalents at the expiry replace the term structures: constant volatilities would
    give a larger covariance than the integral of their product, so the correlation carries the ratio.
    """
    rho = 0.4  # of CADMUS with USD in EUR
    market = market_with_fx(pair_name, matrix_name, rho if matrix_name == "USDEUR" else -rho)
    law = market.joint_lognormal(("CADMUS",), EXPIRY, payment_currency="EUR", conversion=Conversion.QUANTO)
    ours = call(law, 82.0, market.discount_factor("EUR", "", EXPIRY))

    asset, rate = market.underlyings["CADMUS"].volatility, market.fx.volatilities[pair_name[:3], pair_name[3:]]
    steps = np.sort(np.unique([0.0, *asset.times, *rate.times, 3.0]))
    steps = steps[steps <= 3.0]
    product = sum(
        math.sqrt((asset.variance_at(b) - asset.variance_at(a)) * (rate.variance_at(b) - rate.variance_at(a)))
        for a, b in pairwise(steps)
    )
    flat = rho * product / math.sqrt(asset.variance_at(3.0) * rate.variance_at(3.0))
    with evaluation_date(TODAY):
        theirs = quantlib_call(market, asset.volatility(EXPIRY), rate.volatility(EXPIRY), flat)
    assert ours == pytest.approx(theirs, rel=1e-10)


def quantlib_call(market, asset_volatility, fx_volatility, correlation):
    start, count = ql.Date(30, 11, 2026), ql.Actual365Fixed()

    def rates(level):
        return ql.YieldTermStructureHandle(ql.FlatForward(start, level, count))

    def vols(level):
        return ql.BlackVolTermStructureHandle(ql.BlackConstantVol(start, ql.NullCalendar(), level, count))

    domestic, foreign = (market.curves[currency, ""].zero_rate(EXPIRY) for currency in ("EUR", "USD"))
    process = ql.BlackScholesMertonProcess(
        ql.QuoteHandle(ql.SimpleQuote(80.0)), rates(0.01), rates(domestic), vols(asset_volatility)
    )
    engine = ql.QuantoEuropeanEngine(
        process, rates(foreign), vols(fx_volatility), ql.QuoteHandle(ql.SimpleQuote(correlation))
    )
    option = ql.QuantoVanillaOption(
        ql.PlainVanillaPayoff(ql.Option.Call, 82.0), ql.EuropeanExercise(ql.Date(29, 11, 2029))
    )
    option.setPricingEngine(engine)
    return option.NPV()


@pytest.mark.parametrize("conversion", list(Conversion))
def test_both_conversions_agree_with_a_simulation_in_the_shares_own_currency(conversion):
    """A payment of f(T) euro is worth f(T) q(T) dollars, q in dollars per euro, to a dollar investor.

    Under the dollar measure the drifts of the share and of EURUSD need no conversion at all; the
    dollar value is then changed into euro at tonight's rate. 400,000 antithetic paths, seed fixed;
    4 standard errors leave one chance in 16,000 of a false alarm.
    """
    rho = -0.35  # of CADMUS with EURUSD
    market = market_with_fx("EURUSD", "EURUSD", rho)
    law = market.joint_lognormal(("CADMUS",), EXPIRY, payment_currency="EUR", conversion=conversion)
    strike = 85.0 if conversion is Conversion.QUANTO else 76.0
    exact = call(law, strike, market.discount_factor("EUR", "", EXPIRY))

    covariance = market.log_covariance(("CADMUS", "EURUSD"), EXPIRY)
    normals = np.random.default_rng(20261130).standard_normal((200_000, 2))
    logs = np.concatenate([normals, -normals]) @ np.linalg.cholesky(covariance).T - 0.5 * np.diag(covariance)
    share = market.forward("CADMUS", EXPIRY) * np.exp(logs[:, 0])
    dollars = market.fx_forward("EUR", "USD", EXPIRY) * np.exp(logs[:, 1])  # for one euro
    level = share if conversion is Conversion.QUANTO else share / dollars
    paid = np.maximum(level - strike, 0.0) * dollars * market.discount_factor("USD", "", EXPIRY) / 1.10
    pairs = 0.5 * (paid[:200_000] + paid[200_000:])
    assert abs(pairs.mean() - exact) < 4.0 * pairs.std() / math.sqrt(len(pairs))
    # The test can tell a wrong sign: the quanto adjustment is many errors wide.
    if conversion is Conversion.QUANTO:
        assert abs(law.forwards[0] / market.forward("CADMUS", EXPIRY) - 1.0) > 0.02
