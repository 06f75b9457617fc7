"""True errors of the basket quadrature far from the money, where all its central nodes see one payoff."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.special import ndtr, ndtri
from scipy.stats import qmc

from pricer.engines.closed_form.basket_quadrature import BasketQuadrature
from pricer.engines.closed_form.lognormal_sum import LognormalSum
from pricer.engines.closed_form.normal_trapezoid import expectation
from tests.unit.closed_form_cases import equal_correlation, random_correlation

QUANTILES = (0.0005, 0.01, 0.1, 0.5, 0.9, 0.99, 0.9995)


class OneLegGivenTheRest:
    """The option given all logs but one, by Black (1976): a path to the value that shares none of our code."""

    def __init__(self, total, strike, side, digital):
        covariance, coefficients = total.covariance, total.coefficients
        own = 1.0 / np.sqrt(np.diag(np.linalg.inv(covariance)))
        leg = int(np.argmax(own * np.abs(coefficients)))
        rest = [i for i in range(total.n_terms) if i != leg]
        self.factor = np.linalg.cholesky(covariance[np.ix_(rest, rest)])
        self.loading = np.linalg.solve(self.factor, covariance[rest, leg])
        self.own, self.leg, self.rest = own[leg], coefficients[leg], coefficients[rest]
        self.variance = np.diag(covariance)[rest]
        self.strike, self.side, self.digital = strike - total.shift, side, digital

    def __call__(self, z):
        """Values at ``z`` (m, n - 1)."""
        left = self.strike - np.exp(z @ self.factor.T - 0.5 * self.variance) @ self.rest
        forward = abs(self.leg) * np.exp(z @ self.loading - 0.5 * self.loading @ self.loading)
        side = self.side if self.leg > 0.0 else -self.side
        level = left if self.leg > 0.0 else -left
        positive = level > 0.0
        log = np.log(forward / np.where(positive, level, 1.0)) / self.own
        d1 = np.where(positive, log + 0.5 * self.own, np.inf)
        d2 = d1 - self.own
        if self.digital:
            return ndtr(side * d2)
        return np.maximum(side * (forward * ndtr(side * d1) - level * ndtr(side * d2)), 0.0)


def by_trapezoid(total, strike, side, digital):
    """Value of a three-asset sum and the difference to half the step."""
    given = OneLegGivenTheRest(total, strike, side, digital)
    end = 9.0 + 1.2 * float(total.deviations.max())
    found = []
    for step in (0.04, 0.02):
        axis = np.arange(-end, end, step)
        weights = np.exp(-0.5 * axis * axis) * step / math.sqrt(2.0 * math.pi)
        rows = [weights @ given(np.column_stack((np.full_like(axis, x), axis))) for x in axis]
        found.append(float(weights @ np.array(rows)))
    return found[1], abs(found[1] - found[0])


def by_sobol_points(total, strike, side, digital, repeats=8):
    """Value and six standard errors over independent scramblings: with 7 degrees, 1 in 2,000 lies outside."""
    given = OneLegGivenTheRest(total, strike, side, digital)
    means = []
    for repeat in range(repeats):
        points = qmc.Sobol(total.n_terms - 1, rng=repeat).random_base2(13)
        means.append(given(ndtri(np.clip(points, 1e-12, 1.0 - 1e-12))).mean())
    return float(np.mean(means)), 6.0 * float(np.std(means, ddof=1)) / math.sqrt(repeats)


def random_sum(rng, n):
    """A sum of n levels, half of them with signed weights, and a strike at a quantile of it."""
    years = float(rng.choice([0.25, 1.0, 3.0, 5.0]))
    deviations = rng.uniform(0.12, 0.5, n) * math.sqrt(years)
    if rng.random() < 0.3:
        correlation = equal_correlation(n, 0.5)
    else:
        correlation = random_correlation(rng, n, float(rng.choice([0.0, 0.7, 1.5])))
    signs = rng.choice([-1.0, 1.0], n) if rng.random() < 0.6 else np.ones(n)
    coefficients = signs * rng.dirichlet(np.full(n, 2.0)) * rng.uniform(0.7, 1.3, n)
    total = LognormalSum(0.0, coefficients, correlation * np.outer(deviations, deviations))
    logs = rng.normal(size=(20_000, n)) @ np.linalg.cholesky(total.covariance).T
    levels = np.exp(logs - 0.5 * np.diag(total.covariance)) @ coefficients
    return total, float(np.quantile(levels, rng.choice(QUANTILES)))


def checked(total, strike, side, digital, truth):
    """Whether a value was given; if so, it is within its error of the truth."""
    law = BasketQuadrature(total)
    found = law.digital(strike, side) if digital else law.option(strike, side)
    if found is None:
        return False
    assert found.error <= 1.1e-6 * (1.0 if digital else total.gross + abs(strike))
    value, error = truth(total, strike, side, digital)
    assert abs(found.value - value) <= found.error + error + 1e-12, (total, strike, side, digital, found, value, error)
    return True


def test_three_asset_values_are_within_their_errors_of_an_independent_integral():
    rng = np.random.default_rng(71)
    given = 0
    for k in range(24):
        total, strike = random_sum(rng, 3)
        given += checked(total, strike, 1 if k % 3 else -1, k % 2 == 0, by_trapezoid)
    assert given >= 22


@pytest.mark.parametrize("n", [4, 5, 6, 8])
def test_values_of_larger_sums_are_within_their_errors_of_an_independent_integral(n):
    rng = np.random.default_rng(100 + n)
    given = 0
    for k in range(30):
        total, strike = random_sum(rng, n)
        given += checked(total, strike, 1 if k % 3 else -1, k % 2 == 0, by_sobol_points)
    assert given >= 12


SIGNED = np.array([[1.0, -0.41, 0.64], [-0.41, 1.0, 0.42], [0.64, 0.42, 1.0]])


@pytest.mark.parametrize("strike", [60.0, 90.0, 110.0, 130.0, 140.0, 160.0])
@pytest.mark.parametrize("digital", [True, False])
def test_two_long_legs_against_one_that_moves_with_both_are_exact_at_every_strike(strike, digital):
    deviations = np.array([0.41, 0.38, 0.27]) * math.sqrt(3.0)
    total = LognormalSum(0.0, 106.0 * np.array([0.36, 0.26, -0.38]), SIGNED * np.outer(deviations, deviations))
    assert checked(total, strike, 1, digital, by_trapezoid)


def test_wide_laws_with_narrow_legs_are_exact_or_not_given():
    # One leg moves by e^2 in one deviation, another hardly at all; no direction serves them all.
    rng = np.random.default_rng(3)
    for _ in range(12):
        deviations = rng.choice([0.01, 0.05, 0.2, 0.5, 0.9], 3) * math.sqrt(float(rng.choice([1.0, 3.0, 5.0])))
        correlation = random_correlation(rng, 3, float(rng.choice([0.0, 2.0])))
        coefficients = rng.choice([-1.0, 1.0], 3) * rng.dirichlet(np.full(3, 2.0))
        total = LognormalSum(0.0, coefficients, correlation * np.outer(deviations, deviations))
        logs = rng.normal(size=(20_000, 3)) @ np.linalg.cholesky(total.covariance).T
        levels = np.exp(logs - 0.5 * np.diag(total.covariance)) @ coefficients
        strike = float(np.quantile(levels, rng.choice(QUANTILES)))
        checked(total, strike, 1, bool(rng.random() < 0.5), by_trapezoid)


def test_the_trapezoidal_rule_is_within_its_error_for_smooth_functions_and_for_kinks():
    smooth = expectation(lambda z, variables: np.exp(z @ np.array([0.8, -0.3])), 2, 0.8, 1e-9, 100_000)
    assert abs(smooth.value - math.exp(0.5 * (0.64 + 0.09))) <= smooth.error < 1e-9
    # E |z1 + z2| = 2 / sqrt(pi)
    kinked = expectation(lambda z, variables: np.abs(z.sum(axis=1)), 2, 0.0, 1e-9, 100_000)
    assert 1e-9 < abs(kinked.value - 2.0 / math.sqrt(math.pi)) <= kinked.error
    one = expectation(lambda z, variables: ndtr(5.0 * (z[:, 0] - 3.0)), 1, 0.0, 1e-10, 100_000)
    assert one.value == pytest.approx(
        float(ndtr(-15.0 / math.sqrt(26.0))), abs=one.error + 1e-15
    )  # and the rounding of the sum
