import numpy as np
import pytest

from pricer.regression.least_squares import NormalEquations, fit


def made(samples: int, size: int, noise: float, seed: int = 1) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    rng = np.random.default_rng(seed)
    basis = np.vstack([np.ones(samples), rng.normal(size=(size - 1, samples))]).astype(np.float32)
    planted = np.random.default_rng(7).normal(size=size)
    return basis, planted, planted @ basis + noise * rng.normal(size=samples)


def equations(basis, targets, weights=None) -> NormalEquations:
    out = NormalEquations(len(basis))
    out.add(basis, targets, weights)
    return out


def test_chunks_give_what_one_solve_over_all_samples_gives():
    basis, _, targets = made(5000, 6, 0.5)
    wanted = np.linalg.lstsq(basis.T.astype(float), targets, rcond=None)[0]
    assert np.allclose(equations(basis, targets).solve(0.0), wanted, atol=1e-12)


def test_sums_of_parts_are_the_sum_of_the_whole():
    basis, _, targets = made(4096, 4, 0.5)
    both = equations(basis[:, :1000], targets[:1000]) + equations(basis[:, 1000:], targets[1000:])
    assert np.allclose(both.solve(1e-6), equations(basis, targets).solve(1e-6), atol=1e-12)


def test_a_weight_of_two_is_a_sample_twice():
    basis, _, targets = made(600, 4, 0.5)
    weights = np.repeat([1.0, 2.0], 300)
    twice = np.concatenate([basis, basis[:, 300:]], axis=1)
    wanted = equations(twice, np.concatenate([targets, targets[300:]]))
    got = equations(basis, targets, weights)
    assert np.allclose(got.solve(1e-4), wanted.solve(1e-4), atol=1e-12)
    assert got.mean_square_error(got.solve(0.0)) == pytest.approx(wanted.mean_square_error(wanted.solve(0.0)))


def test_the_error_is_that_of_the_samples_held_out():
    basis, _, targets = made(40_000, 5, 0.5)
    fresh, _, aims = made(40_000, 5, 0.5, seed=2)
    result = fit(equations(basis, targets), equations(fresh, aims))
    # the deviation of the noise, whose own estimate has a relative standard error of 1/sqrt(80000): 4 of them
    assert result.held_out_error == pytest.approx(0.5, rel=4.0 / np.sqrt(80_000))


def test_where_samples_are_few_and_noisy_a_larger_ridge_is_chosen():
    basis, _, targets = made(60, 50, 20.0)
    fresh, _, aims = made(2000, 50, 20.0, seed=2)
    assert fit(equations(basis, targets), equations(fresh, aims), (1e-9, 30.0)).ridge == 30.0
    basis, _, targets = made(5000, 50, 0.01)
    fresh, _, aims = made(2000, 50, 0.01, seed=2)
    assert fit(equations(basis, targets), equations(fresh, aims), (1e-9, 30.0)).ridge == 1e-9


def test_the_ridge_does_not_see_the_scale_of_a_basis_function_nor_shrink_the_constant():
    basis, _, targets = made(500, 3, 0.1)
    scaled = basis.copy()
    scaled[1] *= 1024.0
    plain, other = equations(basis, targets).solve(10.0), equations(scaled, targets).solve(10.0)
    assert other[1] * 1024.0 == pytest.approx(plain[1], rel=1e-9)
    assert equations(basis[:1], np.full(500, 4.0)).solve(10.0)[0] == pytest.approx(4.0)


def test_a_basis_function_that_is_always_zero_is_left_alone():
    basis, planted, targets = made(500, 3, 0.0)
    idle = np.vstack([basis, np.zeros(500, dtype=np.float32)])
    assert np.allclose(equations(idle, targets).solve(0.0), [*planted, 0.0], atol=1e-8)
