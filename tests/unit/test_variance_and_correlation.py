"""Realised variance and correlation: seasoned, in expectation, and as simulated returns show them."""

from __future__ import annotations

import math
from itertools import pairwise

import numpy as np
import pytest

from pricer.engines.closed_form.log_contract import variance_of_surface
from pricer.engines.closed_form.realised_correlation import (
    average_correlation,
    dispersion,
    expected_sample_correlation,
    fixed_weight_variance,
    implied_average_correlation,
    realised_correlations,
)
from pricer.engines.closed_form.variance_swap import ObservedVariance, expected_squares, sum_of_squares
from pricer.market.implied_surface import ImpliedSurface
from pricer.market.volatility import VolatilityCurve
from tests.unit.markets import TODAY
from tests.unit.smiles import day

CORRELATION = np.array([[1.0, 0.6, 0.2], [0.6, 1.0, 0.4], [0.2, 0.4, 1.0]])
VOLATILITIES = np.array([0.2, 0.3, 0.25])
COVARIANCE = CORRELATION * np.outer(VOLATILITIES, VOLATILITIES)


def test_a_flat_surface_expects_its_own_variance_between_any_dates():
    surface = ImpliedSurface.flat(VolatilityCurve.from_quotes(TODAY, [day(91), day(365)], [0.2, 0.25]))
    for years in (0.1, 91 / 365, 0.6, 1.0, 2.0):
        found = variance_of_surface(surface, years)
        assert found.value == pytest.approx(float(surface.total_variance(0.0, years)), abs=1e-12 + found.error)


def test_squares_to_come_equal_those_of_simulated_returns():
    variances = np.array([0.002, 0.01, 0.03])
    growths = np.array([0.001, -0.02, 0.04])
    since = -0.03
    draws = np.random.default_rng(4).standard_normal((400_000, 3)) * np.sqrt(variances) + growths - 0.5 * variances
    draws[:, 0] += since
    squares = (draws**2).sum(axis=1)
    # Four standard errors of a fixed seed.
    error = squares.std() / math.sqrt(squares.size)
    assert expected_squares(variances, growths, since) == pytest.approx(squares.mean(), abs=4.0 * error)


def test_a_seasoned_swap_adds_what_was_seen_to_what_is_expected():
    fixings = np.array([100.0, 101.0, 99.5, 102.0])
    seen = sum_of_squares(fixings)
    assert seen == pytest.approx(sum(math.log(b / a) ** 2 for a, b in pairwise(fixings)))
    swap = ObservedVariance(252.0, 12, seen)
    to_come = 9 * 0.04 / 252.0
    assert swap.annualised(to_come) == pytest.approx(252.0 / 12.0 * (seen + to_come))
    assert swap.value(to_come, 0.05, 0.9) == pytest.approx(0.9 * (252.0 / 12.0 * (seen + to_come) - 0.05))
    assert ObservedVariance(252.0, 252).annualised(0.04) == pytest.approx(0.04)


@pytest.mark.parametrize("centred", [True, False])
@pytest.mark.parametrize("rho", [-0.8, 0.3, 0.6])
def test_sample_correlation_of_few_returns_has_hotellings_mean(rho, centred):
    z = np.random.default_rng(9).standard_normal((400_000, 6, 2))
    x, y = z[..., 0], rho * z[..., 0] + math.sqrt(1.0 - rho * rho) * z[..., 1]
    if centred:
        x, y = x - x.mean(axis=1, keepdims=True), y - y.mean(axis=1, keepdims=True)
    sample = (x * y).sum(axis=1) / np.sqrt((x * x).sum(axis=1) * (y * y).sum(axis=1))
    error = sample.std() / math.sqrt(sample.size)
    assert expected_sample_correlation(rho, 6, centred=centred) == pytest.approx(sample.mean(), abs=4.0 * error)


def test_sample_correlation_of_many_returns_is_nearly_unbiased():
    for rho in (-0.5, 0.0, 0.7, 1.0):
        found = expected_sample_correlation(rho, 500, centred=True)
        assert found == pytest.approx(rho - rho * (1.0 - rho * rho) / (2.0 * 499), abs=2e-6)


def test_correlation_seen_so_far_is_joined_with_what_is_to_come():
    found = realised_correlations(COVARIANCE)
    np.testing.assert_allclose(found, CORRELATION, atol=1e-15)
    past = 0.5 * np.outer(VOLATILITIES, VOLATILITIES)  # returns that were all alike
    joined = realised_correlations(COVARIANCE, past)
    np.testing.assert_allclose(joined, (CORRELATION + 0.5) / 1.5, atol=1e-15)
    assert average_correlation(found, np.full(3, 1 / 3)) == pytest.approx(0.4)
    assert average_correlation(found, np.array([0.5, 0.5, 0.0])) == pytest.approx(0.6)


def test_dispersion_is_zero_for_equal_movers_and_tells_the_implied_correlation():
    weights = np.array([0.5, 0.3, 0.2])
    assert dispersion(np.full((3, 3), 0.04), weights) == pytest.approx(0.0, abs=1e-16)
    for rho in (0.0, 0.35, 0.9):
        covariance = (rho + (1.0 - rho) * np.eye(3)) * np.outer(VOLATILITIES, VOLATILITIES)
        index = fixed_weight_variance(covariance, weights)
        assert implied_average_correlation(index, VOLATILITIES**2, weights) == pytest.approx(rho)
        assert dispersion(covariance, weights) == pytest.approx(weights @ VOLATILITIES**2 - index)


def test_a_portfolio_of_constant_weights_realises_its_variance():
    # 2000 rebalanced periods: its realised variance is certain up to sqrt(2 / 2000) of itself.
    weights = np.array([0.5, 0.3, 0.2])
    returns = np.random.default_rng(1).multivariate_normal(np.zeros(3), COVARIANCE / 2000, size=(200, 2000))
    realised = (np.log1p(np.expm1(returns) @ weights) ** 2).sum(axis=1)
    error = realised.std() / math.sqrt(realised.size)
    assert fixed_weight_variance(COVARIANCE, weights) == pytest.approx(realised.mean(), abs=4.0 * error + 2e-6)
    assert realised.std() < 0.04 * realised.mean()


def test_too_few_returns_make_no_correlation():
    with pytest.raises(ValueError, match="do not make a correlation"):
        expected_sample_correlation(0.5, 1, centred=True)
