"""Smiles of a price with cash dividends and of its random part: one option price behind both."""

import numpy as np
import pytest
from scipy.stats import norm

from pricer.market.affine_price import AffineLevel
from pricer.market.pure_smile import (
    price_deviations,
    price_error,
    price_strikes,
    pure_deviations,
    pure_log_strikes,
    pure_parameters,
)
from pricer.market.smile_quotes import SmileParameters
from tests.unit.smiles import day

LEVEL = AffineLevel(90.0, 12.0)
STRIKES = np.array([40.0, 70.0, 95.0, 102.0, 110.0, 140.0, 200.0])


def black(forward, strike, deviation):
    """Black (1976) in currency, from the normal distribution alone."""
    d = np.log(forward / strike) / deviation + 0.5 * deviation
    return forward * norm.cdf(d) - strike * norm.cdf(d - deviation)


def test_the_same_option_costs_the_same_on_the_price_and_on_its_random_part():
    deviations = np.array([0.5, 0.35, 0.25, 0.22, 0.21, 0.22, 0.25])
    pure = pure_deviations(LEVEL, STRIKES, deviations)
    on_price = black(102.0, STRIKES, deviations)
    on_pure = 90.0 * black(1.0, (STRIKES - 12.0) / 90.0, pure)
    np.testing.assert_allclose(on_pure, on_price, rtol=1e-12, atol=1e-12)
    assert np.all(pure > deviations)


def test_the_way_back_is_the_way_there():
    deviations = np.array([0.5, 0.35, 0.25, 0.22, 0.21, 0.22, 0.25])
    pure = pure_deviations(LEVEL, STRIKES, deviations)
    k = pure_log_strikes(LEVEL, STRIKES)
    np.testing.assert_allclose(price_deviations(LEVEL, k, pure), deviations, rtol=1e-12)
    np.testing.assert_allclose(price_strikes(LEVEL, k), STRIKES, rtol=1e-14)


def test_at_the_forward_it_is_the_level_conversion():
    assert float(pure_deviations(LEVEL, 102.0, 0.2)) == pytest.approx(LEVEL.pure_deviation(0.2), rel=1e-12)


def test_without_a_floor_nothing_changes():
    level = AffineLevel(100.0, 0.0)
    np.testing.assert_array_equal(pure_deviations(level, STRIKES, 0.2), 0.2)
    np.testing.assert_array_equal(price_deviations(level, np.log(STRIKES / 100.0), 0.2), 0.2)
    assert price_error(level, 0.1, 0.2, 0.01) == 0.01
    given = SmileParameters(day(365), 0.2, -0.1)
    assert pure_parameters(level, given, 1.0) is given


def test_where_no_random_part_has_the_price_there_is_no_volatility():
    found = pure_deviations(LEVEL, [10.0, 12.0, 13.0, 102.0, 12.5], [0.2, 0.2, 3.0, 0.2, 0.01])
    assert np.isnan(found).tolist() == [True, True, True, False, True]


def test_an_error_in_volatility_is_converted_to_first_order():
    k, own = 0.1, np.array([0.25])
    there = price_deviations(LEVEL, np.array([k]), own + 1e-5) - price_deviations(LEVEL, np.array([k]), own)
    assert price_error(LEVEL, k, 0.25, 1e-5) == pytest.approx(float(there[0]), rel=1e-3)


def test_parameters_are_the_derivatives_of_the_converted_smile():
    stated = SmileParameters(day(182), 0.2, -0.1, 0.4)
    found = pure_parameters(LEVEL, stated, 0.5)
    h = 1e-3
    strikes = 12.0 + 90.0 * np.exp([-h, 0.0, h])
    quoted = np.sqrt(stated.slice(0.5).total_variance(np.log(strikes / 102.0)))
    low, mid, high = pure_deviations(LEVEL, strikes, quoted) / np.sqrt(0.5)
    assert found.volatility == pytest.approx(mid, rel=1e-12)
    assert found.skew == pytest.approx((high - low) / (2 * h), abs=1e-5)
    assert found.curvature == pytest.approx((high - 2 * mid + low) / h**2, abs=2e-4)


def test_parameters_of_an_option_worth_more_than_the_random_part_are_refused():
    with pytest.raises(ValueError, match="worth more than the random part"):
        pure_parameters(AffineLevel(10.0, 90.0), SmileParameters(day(365), 0.5, -0.1), 1.0)
