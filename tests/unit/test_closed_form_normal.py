"""Multivariate normal probabilities: symmetries, independent routes, singular cases, honest errors."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.special import ndtr
from scipy.stats import multivariate_normal

from pricer.engines.closed_form import one_factor
from pricer.engines.closed_form.multivariate_normal import cdf, within
from pricer.engines.closed_form.normal_kernels import bivariate, multivariate
from pricer.engines.closed_form.normal_lattice import by_lattice
from pricer.engines.closed_form.quadrature import gauss_legendre, integrate, normal_density
from tests.unit.closed_form_cases import equal_correlation, random_correlation


def bivariate_by_conditioning(h, k, rho):
    """``integral of phi(x) Phi((k - rho x) / sqrt(1 - rho^2))``, adaptively."""
    own = np.sqrt((1.0 - rho) * (1.0 + rho))
    edges = np.linspace(-9.0, min(h, 9.0), 9)
    return integrate(lambda x: normal_density(x) * ndtr((k - rho * x) / own), edges, 1e-16).value


@pytest.mark.parametrize("rho", [-0.9999, -0.95, -0.925, -0.6, 0.0, 0.3, 0.9249, 0.9251, 0.97, 0.999, 0.9999])
def test_bivariate_probabilities_agree_with_conditioning_at_any_correlation(rho):
    rng = np.random.default_rng(1)
    for h, k in [*rng.normal(size=(40, 2)) * 2.0, (0.3, 0.3), (-1.0, 1.0), (0.7, 0.7001), (5.0, -3.0)]:
        assert bivariate(h, k, rho) == pytest.approx(bivariate_by_conditioning(h, k, rho), abs=3e-15)


@pytest.mark.parametrize(("rho", "wanted"), [(1.0, ndtr(-0.4)), (-1.0, ndtr(0.9) - ndtr(0.4))])
def test_bivariate_probabilities_hold_at_perfect_correlation(rho, wanted):
    h, k = (-0.4, 0.9)
    assert bivariate(h, k, rho) == pytest.approx(wanted, abs=1e-15)
    assert cdf(np.array([h, k]), equal_correlation(2, rho)).value == pytest.approx(wanted, abs=1e-15)


@pytest.mark.parametrize("n", [3, 4, 5])
def test_the_recursion_agrees_with_one_more_conditioning(n):
    rng = np.random.default_rng(n)
    nodes, weights = gauss_legendre(48)
    for _ in range(4 if n < 5 else 2):
        r, h = random_correlation(rng, n), rng.normal(size=n)
        rest = r[1:, 1:] - np.outer(r[1:, 0], r[1:, 0])
        deviation = np.sqrt(np.diag(rest))
        total = 0.0
        x = -8.5 + 0.5 * (h[0] + 8.5) * (1.0 + nodes)
        for z, weight in zip(x, 0.5 * (h[0] + 8.5) * weights, strict=True):
            given = cdf((h[1:] - r[1:, 0] * z) / deviation, rest / np.outer(deviation, deviation))
            total += weight * normal_density(np.array(z)) * given.value
        found = cdf(h, r)
        assert found.value == pytest.approx(total, abs=found.error + 1e-12)
        assert found.error < 1e-8


@pytest.mark.parametrize("n", [3, 4, 5, 6])
def test_the_recursion_agrees_with_the_one_factor_integral(n):
    rng = np.random.default_rng(10 + n)
    for strength in (0.5, 0.95):
        loading = strength * rng.uniform(0.8, 1.0, n) * rng.choice([-1.0, 1.0], n)
        r = np.outer(loading, loading)
        np.fill_diagonal(r, 1.0)
        h = rng.normal(size=n)
        assert one_factor.loadings(r) is not None
        value, error = multivariate(h, r, 1e-10, 40)
        assert value == pytest.approx(cdf(h, r).value, abs=error + 1e-14)


def test_the_compiled_recursion_and_its_plain_python_agree():
    rng = np.random.default_rng(3)
    r, h = random_correlation(rng, 3), rng.normal(size=3)
    assert multivariate(h, r, 1e-8, 10) == pytest.approx(multivariate.py_func(h, r, 1e-8, 10), abs=1e-15)
    assert bivariate(0.4, -0.3, 0.96) == pytest.approx(bivariate.py_func(0.4, -0.3, 0.96), abs=1e-16)


@pytest.mark.parametrize("n", [3, 4, 5])
def test_singular_correlations_are_integrated_within_the_stated_error(n):
    rng = np.random.default_rng(20 + n)
    factors = rng.normal(size=(n, n - 1))
    scale = np.linalg.norm(factors, axis=1)
    r = factors @ factors.T / np.outer(scale, scale)
    h = rng.normal(size=n)
    found = cdf(h, r)
    draws = multivariate_normal(np.zeros(n), r, allow_singular=True, seed=5).rvs(400_000)
    share = float(np.all(draws <= h, axis=1).mean())
    assert found.error < 1e-7
    # 4.5 standard errors of 400,000 draws: one false alarm in 100,000
    assert abs(found.value - share) < 4.5 * np.sqrt(share * (1.0 - share) / 400_000)


def test_variables_that_are_equal_or_opposite_are_folded_exactly():
    r = equal_correlation(3, 0.4)
    h = np.array([0.3, -0.2, 0.8])
    doubled = np.array([0, 1, 2, 1])
    same = cdf(np.append(h, 0.1), r[np.ix_(doubled, doubled)])
    assert same.value == pytest.approx(cdf(h, r).value, abs=1e-14)
    mirror = np.diag([1.0, 1.0, 1.0, -1.0])
    opposite = cdf(np.append(h, 0.9), mirror @ r[np.ix_(doubled, doubled)] @ mirror)  # -0.9 <= X1 <= -0.2
    wanted = cdf(h, r).value - cdf(np.array([0.3, -0.9, 0.8]), r).value
    assert opposite.value == pytest.approx(wanted, abs=1e-14)
    assert cdf(np.append(h, 0.1), mirror @ r[np.ix_(doubled, doubled)] @ mirror).value == 0.0


def test_infinite_limits_drop_out_or_decide():
    r = random_correlation(np.random.default_rng(4), 4)
    h = np.array([0.5, np.inf, -0.3, 1.0])
    kept = [0, 2, 3]
    assert cdf(h, r).value == cdf(h[kept], r[np.ix_(kept, kept)]).value
    assert cdf(np.array([0.5, -np.inf, 0.0, 1.0]), r).value == 0.0
    assert cdf(np.full(4, np.inf), r).value == 1.0


@pytest.mark.parametrize("n", [7, 9])
def test_the_lattice_covers_the_one_factor_value_and_repeats_itself(n):
    rng = np.random.default_rng(n)
    loading = rng.uniform(0.3, 0.9, n)
    r = np.outer(loading, loading)
    np.fill_diagonal(r, 1.0)
    h = rng.normal(0.8, 0.5, n)
    first, second = by_lattice(h, r), by_lattice(h, r)
    assert first == second
    assert abs(first.value - cdf(h, r).value) <= first.error
    assert first.error < 5e-5


def test_the_lattice_is_used_where_nothing_better_applies_and_agrees_with_scipy():
    rng = np.random.default_rng(8)
    r = random_correlation(rng, 8, common=2.0)
    h = rng.normal(0.5, 0.5, 8)
    found = cdf(h, r)
    wanted = multivariate_normal.cdf(h, np.zeros(8), r, abseps=1e-6, releps=1e-6, maxpts=2_000_000, rng=rng)
    assert 0.0 < found.error < 1e-4
    assert abs(found.value - wanted) <= found.error + 2e-6


def test_one_factor_structures_are_found_and_others_are_not():
    loading = np.array([0.9, -0.4, 0.0, 0.7])
    r = np.outer(loading, loading)
    np.fill_diagonal(r, [1.0, 2.0, 0.5, 1.0])
    found = one_factor.loadings(r)
    assert np.allclose(np.outer(found, found)[~np.eye(4, dtype=bool)], r[~np.eye(4, dtype=bool)], atol=1e-15)
    assert one_factor.loadings(np.eye(3)) is not None
    assert one_factor.loadings(equal_correlation(2, -0.7)) is not None
    assert one_factor.loadings(equal_correlation(3, -0.2)) is None
    assert one_factor.loadings(random_correlation(np.random.default_rng(0), 4)) is None


def test_rows_without_variance_are_decided_by_their_limits():
    covariance = np.array([[0.04, 0.04], [0.04, 0.04]])
    rows, no_strict = np.array([[1.0, -1.0], [1.0, 0.0]]), np.zeros(2, dtype=bool)
    half = within(rows, np.array([0.0, 0.0]), covariance, no_strict)
    assert half.value == pytest.approx(0.5, abs=1e-15)
    assert within(rows, np.array([0.0, 0.0]), covariance, np.array([True, False])).value == 0.0
    assert within(rows, np.array([-1e-9, 0.0]), covariance, no_strict).value == 0.0
