"""Local volatility against CEV closed forms and against QuantLib's finite differences on the same table."""

from __future__ import annotations

from datetime import date, timedelta

import numpy as np
import pytest
import QuantLib as ql
from scipy.stats import norm

from pricer.market.black import implied_deviation
from pricer.market.forward_equation import model_volatilities
from pricer.market.implied_surface import ImpliedSurface
from pricer.market.local_vol_surface import LocalVolSurface
from pricer.market.smile_quotes import SmileParameters, SmileQuotes
from tests.reference.quantlib_local_vol import tabulated_in_quantlib

TODAY = date(2026, 11, 30)
DAY_COUNT = ql.Actual365Fixed()


@pytest.fixture(autouse=True)
def _evaluation_date():
    before = ql.Settings.instance().evaluationDate
    ql.Settings.instance().evaluationDate = quantlib_day(TODAY)
    yield
    ql.Settings.instance().evaluationDate = before


def quantlib_day(day):
    return ql.Date(day.day, day.month, day.year)


def cev_volatility(sigma, beta, k, day):
    """Implied volatility of ``dX = sigma X^beta dW`` from X = 1, by QuantLib's closed form (Schroder 1989)."""
    curve = ql.YieldTermStructureHandle(ql.FlatForward(quantlib_day(TODAY), 0.0, DAY_COUNT))
    engine = ql.AnalyticCEVEngine(1.0, sigma, beta, curve)
    exercise, prices = ql.EuropeanExercise(quantlib_day(day)), []
    for x in k:
        option = ql.VanillaOption(ql.PlainVanillaPayoff(ql.Option.Call, float(np.exp(x))), exercise)
        option.setPricingEngine(engine)
        prices.append(option.NPV())
    return implied_deviation(k, np.array(prices)) / np.sqrt((day - TODAY).days / 365)


@pytest.mark.parametrize(("sigma", "beta"), [(0.2, 0.5), (0.3, 0.0), (0.25, 0.8)])
def test_the_local_volatility_of_a_cev_market_is_recovered_from_its_implied_volatilities(sigma, beta):
    days = [TODAY + timedelta(days=d) for d in (91, 182, 365, 730)]
    smiles = []
    for day in days:
        k = np.linspace(-2.0, 2.0, 11) * sigma * np.sqrt((day - TODAY).days / 365)
        smiles.append(SmileQuotes.of(day, k, cev_volatility(sigma, beta, k, day)))
    surface = ImpliedSurface.from_quotes(TODAY, smiles)
    # SVI is not the CEV smile: within 0.05 vol points up to 1.2 deviations, and 0.3 at the ends for exponent 0.
    for errors in surface.fit_errors():
        assert np.abs(errors[2:-2]).max() < 5e-4
        assert np.abs(errors).max() < 3e-3
    local = LocalVolSurface.from_implied(surface)
    for time in (0.25, 0.6, 1.0, 1.7):
        k = np.linspace(-1.0, 1.0, 9) * sigma * np.sqrt(time)
        np.testing.assert_allclose(local.volatility(k, time), sigma * np.exp((beta - 1.0) * k), rtol=0, atol=0.003)


def test_quantlibs_finite_differences_on_our_table_give_the_implied_volatilities_back():
    surface = ImpliedSurface.from_quotes(
        TODAY,
        [
            SmileParameters(TODAY + timedelta(days=91), 0.18, -0.35, 1.2),
            SmileParameters(TODAY + timedelta(days=365), 0.20, -0.20, 0.35),
        ],
    )
    local = LocalVolSurface.from_implied(surface)
    time = surface.times[-1]
    k = norm.ppf(np.array([0.1, 0.3, 0.5, 0.7, 0.9])) * 0.20
    wanted = surface.volatility(k, time)
    ours = model_volatilities(local, [k], [time])[0]

    table = tabulated_in_quantlib(local, quantlib_day(TODAY))
    zero = ql.YieldTermStructureHandle(ql.FlatForward(quantlib_day(TODAY), 0.0, DAY_COUNT))
    flat = ql.BlackVolTermStructureHandle(ql.BlackConstantVol(quantlib_day(TODAY), ql.NullCalendar(), 0.20, DAY_COUNT))
    process = ql.GeneralizedBlackScholesProcess(
        ql.QuoteHandle(ql.SimpleQuote(1.0)), zero, zero, flat, ql.LocalVolTermStructureHandle(table)
    )
    theirs = []
    for x in k:
        option = ql.VanillaOption(
            ql.PlainVanillaPayoff(ql.Option.Call, float(np.exp(x))),
            ql.EuropeanExercise(quantlib_day(surface.dates[-1])),
        )
        option.setPricingEngine(ql.FdBlackScholesVanillaEngine(process, 400, 800, 4, ql.FdmSchemeDesc.Douglas(), True))
        theirs.append(option.NPV())
    theirs = implied_deviation(k, np.array(theirs)) / np.sqrt(time)
    # 0.03 vol points between table and surface, 0.01 between the two solvers on one table.
    np.testing.assert_allclose(ours, wanted, rtol=0, atol=3e-4)
    np.testing.assert_allclose(theirs, wanted, rtol=0, atol=3e-4)
    np.testing.assert_allclose(theirs, ours, rtol=0, atol=1e-4)
