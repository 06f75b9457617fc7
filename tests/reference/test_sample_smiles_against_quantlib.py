"""The quotes of the sample's smiles are prices of the model they name: QuantLib's own engine gives the same."""

from __future__ import annotations

import math
from datetime import date

import pytest
import QuantLib as ql

from pricer.market.affine_price import AffineLevel
from pricer.market.evaluation_date import evaluation_date
from tests.end_to_end.desk import saltmarsh

TODAY, LAST = date(2026, 11, 30), date(2028, 12, 15)


@pytest.mark.parametrize("skewness", [0.7, 1.0, 1.3])
@pytest.mark.parametrize("expiry", [date(2026, 12, 18), date(2027, 6, 18), LAST])
@pytest.mark.parametrize("deviations", [-2.2, -0.6, 0.7, 1.8])
def test_calls_are_those_of_quantlibs_bates_engine(skewness, expiry, deviations):
    smiles = saltmarsh("smiles")
    dynamics = smiles.Dynamics.around(0.25, skewness)
    years = (expiry - TODAY).days / 365.0
    strike = math.exp(deviations * 0.25 * math.sqrt(years))
    assert dynamics.call(strike, years) == pytest.approx(quantlib_call(dynamics, expiry, strike), abs=1e-9)


def quantlib_call(dynamics, expiry: date, strike: float) -> float:
    with evaluation_date(TODAY):
        today = ql.Date(TODAY.day, TODAY.month, TODAY.year)
        flat = ql.YieldTermStructureHandle(ql.FlatForward(today, 0.0, ql.Actual365Fixed()))
        process = ql.BatesProcess(
            flat, flat, ql.QuoteHandle(ql.SimpleQuote(1.0)), dynamics.start, dynamics.reversion, dynamics.mean,
            dynamics.variance_volatility, dynamics.correlation, dynamics.jumps, dynamics.jump, dynamics.jump_deviation,
        )  # fmt: skip
        option = ql.VanillaOption(
            ql.PlainVanillaPayoff(ql.Option.Call, strike),
            ql.EuropeanExercise(ql.Date(expiry.day, expiry.month, expiry.year)),
        )
        option.setPricingEngine(ql.BatesEngine(ql.BatesModel(process), 1e-12, 100_000))
        return float(option.NPV())


def test_a_price_above_a_floor_has_the_volatility_of_its_own_black_formula():
    """A price with cash dividends to come: its call is that of its random part at the strike above the floor."""
    smiles = saltmarsh("smiles")
    dynamics, level, expiry = smiles.Dynamics.around(0.25, 1.0), AffineLevel(95.0, 6.0), date(2027, 6, 18)
    years = (expiry - TODAY).days / 365.0
    volatility = smiles.volatility(dynamics, level, 90.0, years)
    deviation = volatility * math.sqrt(years)
    ours = ql.blackFormula(ql.Option.Call, 90.0, level.forward, deviation)
    assert ours == pytest.approx(95.0 * quantlib_call(dynamics, expiry, 84.0 / 95.0), abs=2e-6)
