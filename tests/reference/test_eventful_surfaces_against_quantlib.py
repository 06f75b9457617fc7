"""The local volatility of a quiet week and an event after it, solved by QuantLib's finite differences."""

import math

import numpy as np
import pytest
import QuantLib as ql

from pricer.market.black import implied_deviation
from pricer.market.forward_equation import model_volatilities
from pricer.market.local_vol_surface import LocalVolSurface
from tests.reference.quantlib_local_vol import tabulated_in_quantlib
from tests.unit.smiles import TODAY
from tests.unit.surface_cases import eventful_surface

DAY_COUNT = ql.Actual365Fixed()
Z = (-1.2, -0.6, 0.0, 0.6, 1.2)


@pytest.fixture(autouse=True)
def _evaluation_date():
    before = ql.Settings.instance().evaluationDate
    ql.Settings.instance().evaluationDate = quantlib_day(TODAY)
    yield
    ql.Settings.instance().evaluationDate = before


def quantlib_day(day):
    return ql.Date(day.day, day.month, day.year)


# QuantLib's grid ends after 5.6 deviations at the forward, so no steeper wings: they have weight further out.
@pytest.mark.parametrize("expiry", [1, 2])
@pytest.mark.parametrize(("skew", "curvature"), [(-0.07, 0.045), (-0.04, 0.01)])
def test_quantlib_gives_the_event_back_from_our_table(skew, curvature, expiry):
    surface = eventful_surface("one event", skew, curvature)
    day, time = surface.dates[expiry], surface.times[expiry]
    local = LocalVolSurface.from_implied(surface, horizon=time)
    level = float(surface.volatility(0.0, time))
    k = np.array(Z) * level * math.sqrt(time)
    zero = ql.YieldTermStructureHandle(ql.FlatForward(quantlib_day(TODAY), 0.0, DAY_COUNT))
    flat = ql.BlackConstantVol(quantlib_day(TODAY), ql.NullCalendar(), level, DAY_COUNT)
    process = ql.GeneralizedBlackScholesProcess(
        ql.QuoteHandle(ql.SimpleQuote(1.0)),
        zero,
        zero,
        ql.BlackVolTermStructureHandle(flat),
        ql.LocalVolTermStructureHandle(tabulated_in_quantlib(local, quantlib_day(TODAY))),
    )
    prices = []
    for x in k:
        payoff = ql.PlainVanillaPayoff(ql.Option.Call, float(np.exp(x)))
        option = ql.VanillaOption(payoff, ql.EuropeanExercise(quantlib_day(day)))
        option.setPricingEngine(ql.FdBlackScholesVanillaEngine(process, 1600, 800, 0, ql.FdmSchemeDesc.Douglas(), True))
        prices.append(option.NPV())
    theirs = implied_deviation(k, np.array(prices)) / math.sqrt(time)
    # 0.03 vol points between table and surface, 0.02 between the two solvers on one table.
    np.testing.assert_allclose(theirs, surface.volatility(k, time), rtol=0, atol=3e-4)
    np.testing.assert_allclose(theirs, model_volatilities(local, [k], [time])[0], rtol=0, atol=2e-4)
