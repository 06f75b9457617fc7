"""Surfaces against other people's models: Heston by QuantLib, and the local volatility that is known of CEV.

The smiles of tests/unit/model_smiles.py are what surfaces are tested with, so they are themselves checked here.
"""

import math

import numpy as np
import pytest
import QuantLib as ql

from pricer.market.black import call
from pricer.market.implied_surface import ImpliedSurface
from pricer.market.local_vol_surface import LocalVolSurface
from tests.unit.model_smiles import cev, heston, model_quotes
from tests.unit.smiles import TODAY

START, MEAN, REVERSION, VOL_OF_VOL, RHO = 0.04, 0.05, 1.5, 0.6, -0.7


def quantlib_engine(today):
    flat = ql.YieldTermStructureHandle(ql.FlatForward(today, 0.0, ql.Actual365Fixed()))
    spot = ql.QuoteHandle(ql.SimpleQuote(1.0))
    process = ql.HestonProcess(flat, flat, spot, START, REVERSION, MEAN, VOL_OF_VOL, RHO)
    return ql.AnalyticHestonEngine(ql.HestonModel(process), 1e-12, 100000)


@pytest.mark.parametrize("days", [30, 365, 1095])
def test_heston_smiles_are_quantlibs(days):
    today = ql.Date(30, 11, 2026)
    ql.Settings.instance().evaluationDate = today
    engine, t = quantlib_engine(today), days / 365
    k = np.linspace(-1.5, 1.2, 7) * 0.2 * math.sqrt(t)
    prices = []
    for strike in np.exp(k):
        option = ql.VanillaOption(
            ql.PlainVanillaPayoff(ql.Option.Call, float(strike)), ql.EuropeanExercise(today + days)
        )
        option.setPricingEngine(engine)
        prices.append(option.NPV())
    np.testing.assert_allclose(call(k, heston(k, t) * math.sqrt(t)), prices, atol=1e-8)


def test_cev_smiles_are_quantlibs():
    """QuantLib's analytic engine for dF = alpha F^beta dW."""
    today = ql.Date(30, 11, 2026)
    ql.Settings.instance().evaluationDate = today
    flat = ql.YieldTermStructureHandle(ql.FlatForward(today, 0.0, ql.Actual365Fixed()))
    engine = ql.AnalyticCEVEngine(1.0, 0.25, 0.4, flat)
    k = np.linspace(-0.4, 0.4, 9)
    prices = []
    for strike in np.exp(k):
        option = ql.VanillaOption(
            ql.PlainVanillaPayoff(ql.Option.Call, float(strike)), ql.EuropeanExercise(today + 365)
        )
        option.setPricingEngine(engine)
        prices.append(option.NPV())
    np.testing.assert_allclose(call(k, cev(k, 1.0)), prices, atol=1e-9)


def test_quotes_of_cev_give_the_local_volatility_of_cev():
    """``dX = level X^beta dW`` has the local volatility ``level X^(beta - 1)`` on all dates (Cox 1975).

    Within 1.7 standard deviations, where there are quotes, and from the first expiry on, to 1 % of itself at worst.
    """
    days = (30, 91, 182, 365, 730, 1095)
    surface = ImpliedSurface.from_quotes(TODAY, model_quotes("cev", days, n=13))
    local = LocalVolSurface.from_implied(surface)
    for cell, end in enumerate(local.times[1:]):
        k = local.nodes(cell)
        k = k[(k > -1.7 * local.widths[cell]) & (k < 1.7 * local.widths[cell])]
        ratios = local.volatility(k, float(end)) / (0.25 * np.exp((0.4 - 1.0) * k))
        assert np.abs(ratios - 1.0).max() < 0.01, end
