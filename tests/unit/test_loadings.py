"""Splitting a covariance into a common factor and loadings."""

import numpy as np
import pytest

from pricer.simulation.loadings import cholesky, common_deviations, common_to_all, principal_components


def common_deviation(covariance: np.ndarray, members: np.ndarray) -> float:
    return float(common_deviations(covariance, members[None, :])[0])


def covariance(n: int, seed: int) -> np.ndarray:
    rng = np.random.default_rng(seed)
    a = rng.normal(size=(n, n + 2))
    c = a @ a.T
    d = np.sqrt(np.diag(c))
    s = rng.uniform(0.1, 0.5, n)
    return c / np.outer(d, d) * np.outer(s, s)


@pytest.mark.parametrize("n", [1, 2, 5, 30])
def test_the_common_factor_is_the_largest_that_leaves_a_covariance(n):
    c = covariance(n, n)
    members = np.arange(n) % 3 != 1
    one = members.astype(float)
    deviation = common_deviation(c, members)
    assert np.linalg.eigvalsh(c - deviation**2 * np.outer(one, one))[0] == pytest.approx(0.0, abs=1e-14)
    assert np.linalg.eigvalsh(c - (1.01 * deviation) ** 2 * np.outer(one, one))[0] < -1e-8


def test_one_asset_is_all_common_factor():
    assert common_deviation(np.array([[0.09]]), np.array([True])) == pytest.approx(0.3, rel=1e-14)


def test_perfect_correlation_of_equal_deviations_is_all_common_factor():
    assert common_deviation(np.full((3, 3), 0.04), np.ones(3, dtype=bool)) == pytest.approx(0.2, rel=1e-12)


def test_perfect_correlation_of_unequal_deviations_has_no_common_factor():
    s = np.array([0.1, 0.3])
    assert common_deviation(np.outer(s, s), np.ones(2, dtype=bool)) == 0.0


def test_a_member_that_cannot_move_leaves_no_common_factor():
    assert common_deviation(np.diag([0.04, 0.0]), np.ones(2, dtype=bool)) == 0.0
    assert common_deviation(np.diag([0.04, 0.0]), np.array([True, False])) == pytest.approx(0.2)


def test_a_nearly_lost_common_factor_is_given_up():
    # correlation of 1 - 1e-9: a factor of 1e-5 of the deviation would smooth nothing that a sample sees
    s = np.array([0.1, 0.3])
    c = np.outer(s, s) * np.array([[1.0, 1.0 - 1e-9], [1.0 - 1e-9, 1.0]])
    assert common_deviation(c, np.ones(2, dtype=bool)) == 0.0


@pytest.mark.parametrize("n", [1, 2, 5, 24, 25, 60])
def test_both_loadings_reproduce_the_covariance_with_one_dimension_less(n):
    c = covariance(n, n)
    members = np.ones(n, dtype=bool)
    rest = c - common_deviation(c, members) ** 2
    importance = np.random.default_rng(0).uniform(0.1, 2.0, n)
    for loadings in (cholesky(rest, np.diag(c)), principal_components(rest, importance, np.diag(c))):
        assert loadings.shape == (n, n - 1)
        assert loadings @ loadings.T == pytest.approx(rest, abs=1e-9)


def test_principal_components_come_in_order_of_importance():
    c, importance = covariance(6, 1), np.array([1.0, 2.0, 0.5, 3.0, 1.0, 1.0])
    loadings = principal_components(c, importance, np.diag(c)) * importance[:, None]
    size = np.sum(loadings**2, axis=0)
    assert np.all(np.diff(size) < 0.0)
    assert size[0] == pytest.approx(np.linalg.eigvalsh(c * np.outer(importance, importance))[-1], rel=1e-12)


def test_cholesky_is_lower_triangular():
    c = covariance(7, 3)
    assert np.array_equal(cholesky(c, np.diag(c)), np.tril(cholesky(c, np.diag(c))))


def test_cholesky_skips_assets_that_are_combinations_of_earlier_ones():
    low = np.array([[1.0, 0.0], [0.5, 0.0], [0.3, 1.0], [0.2, 0.4]])
    loadings = cholesky(low @ low.T, np.ones(4))
    assert loadings.shape == (4, 2)
    assert loadings @ loadings.T == pytest.approx(low @ low.T, abs=1e-14)


def test_a_covariance_of_zero_has_no_loadings():
    zero = np.zeros((3, 3))
    assert cholesky(zero, np.ones(3)).shape == (3, 0)
    assert principal_components(zero, np.ones(3), np.ones(3)).shape == (3, 0)


def test_common_deviations_of_many_steps_are_those_of_each():
    random = np.random.default_rng(5)
    roots = random.standard_normal((20, 4, 4))
    covariances = roots @ roots.transpose(0, 2, 1)
    covariances[0] = 0.0
    covariances[1] = np.ones((4, 4))
    covariances[2, 0, :] = covariances[2, :, 0] = 0.0
    expected = [float(common_deviations(one, np.ones((1, 4), dtype=bool))[0]) for one in covariances]
    np.testing.assert_allclose(common_to_all(covariances), expected, rtol=1e-9)
    assert common_to_all(covariances)[1] == pytest.approx(1.0)
