import numpy as np
import pytest

from pricer.regression.least_squares import NormalEquations, fit
from pricer.regression.polynomial import PolynomialBasis


def sample(n_inputs: int, lanes: int, seed: int = 1) -> np.ndarray:
    mixing = np.random.default_rng(99).normal(size=(n_inputs, n_inputs))
    return (mixing @ np.random.default_rng(seed).normal(size=(n_inputs, lanes)) + 3.0).astype(np.float32)


def in_numpy(basis: PolynomialBasis, inputs: np.ndarray) -> np.ndarray:
    """The kernel's twin, in double precision."""
    centred = inputs.astype(float) - basis.centre[:, None]
    free = (centred * basis.scale[:, None])[basis.first_free :]
    held = np.clip(centred, basis.reach[0][:, None], basis.reach[1][:, None])
    whitened = np.clip(basis.whitening @ held, basis.bounds[0][:, None], basis.bounds[1][:, None])
    rows = [np.ones(inputs.shape[1]), *whitened, *free]
    for m in range(len(rows), basis.size):
        rows.append(rows[basis.parents[m]] * rows[basis.factors[m]])
    return np.array(rows)


@pytest.mark.parametrize(("degree", "free"), [(0, 0), (1, 1), (3, 0), (4, 2)])
def test_the_kernel_agrees_with_numpy(degree, free):
    inputs = sample(4, 1024)
    basis = PolynomialBasis.of(inputs, degree, free=free)
    fresh = sample(4, 512, seed=2)
    assert np.allclose(basis(fresh), in_numpy(basis, fresh), rtol=2e-4, atol=2e-4)  # single precision, powers of 3


def test_a_combination_is_the_sum_over_the_basis():
    inputs = sample(3, 1024)
    basis = PolynomialBasis.of(inputs, 3, free=1)
    coefficients = np.random.default_rng(5).normal(size=basis.size).astype(np.float32)
    out = np.empty(1024, dtype=np.float32)
    basis.combined(coefficients, inputs, out)
    assert np.allclose(out, coefficients.astype(float) @ basis(inputs), rtol=1e-4, atol=1e-4)


def test_a_lane_does_not_depend_on_its_neighbours():
    inputs = sample(3, 1024)
    basis = PolynomialBasis.of(inputs, 3)
    turned = np.ascontiguousarray(inputs[:, ::-1])
    assert np.array_equal(basis(turned)[:, ::-1], basis(inputs))


def test_monomials_of_equally_important_inputs_are_all_there():
    inputs = np.random.default_rng(1).normal(size=(4, 2048)).astype(np.float32)
    assert PolynomialBasis.of(inputs, 3).size == 35  # (4 + 3 choose 3)


def test_inputs_that_nearly_repeat_another_count_double():
    first = np.random.default_rng(1).normal(size=2048)
    second = first + 1e-2 * np.random.default_rng(2).normal(size=2048)
    basis = PolynomialBasis.of(np.array([first, second], dtype=np.float32), 3)
    assert basis.size == 1 + 2 + 3  # 1, x, y, xx, xxx, xy; neither yy nor xxy, which would cost 4


def test_inputs_that_say_nothing_get_no_direction():
    inputs = np.vstack([np.random.default_rng(1).normal(size=1024), np.full(1024, 7.0)]).astype(np.float32)
    basis = PolynomialBasis.of(inputs, 2)
    assert basis.size == 3
    assert PolynomialBasis.of(inputs[1:], 3).size == 1


def test_beyond_the_sample_a_polynomial_stays_put_and_a_free_input_goes_on():
    inputs = np.random.default_rng(1).normal(size=(1, 4096)).astype(np.float32)
    basis = PolynomialBasis.of(inputs, 3, free=1)
    far = np.repeat(np.array([[10.0, 1000.0]], dtype=np.float32), 64, axis=1)
    held, free = basis(far)[[0, 1, 3, 4]], basis(far)[2]
    assert np.all(held[:, 0] == held[:, -1])
    assert free[-1] > 90.0 * free[0]


def test_a_planted_polynomial_is_recovered():
    inputs = sample(3, 4096)
    basis = PolynomialBasis.of(inputs, 3)
    planted = np.random.default_rng(3).normal(size=basis.size)
    functions = basis(inputs)
    seen, held_out = NormalEquations(basis.size), NormalEquations(basis.size)
    seen.add(functions[:, :3072], planted @ functions[:, :3072])
    held_out.add(functions[:, 3072:], planted @ functions[:, 3072:])
    result = fit(seen, held_out)
    assert np.allclose(result.coefficients, planted, atol=1e-5)
    assert result.held_out_share < 1e-6


def test_faults_are_told():
    with pytest.raises(ValueError, match="degree must not be negative; got -1"):
        PolynomialBasis.of(sample(2, 128), -1)
    with pytest.raises(ValueError, match="inputs must be finite"):
        PolynomialBasis.of(np.array([[1.0, np.nan]], dtype=np.float32), 1)
