"""Several controls at once: the ordinary regression, and an error that sees when one randomisation decides."""

import numpy as np
import pytest

from pricer.simulation.batch_means import batch_estimate, batch_estimate_with, batch_regression


def draws(n: int = 32, columns: int = 5, seed: int = 1):
    rng = np.random.default_rng(seed)
    controls = rng.standard_normal((n, columns, 2))
    means = 3.0 + 0.5 * controls[:, :, 0] - 0.2 * controls[:, :, 1] + 0.1 * rng.standard_normal((n, columns))
    return means, controls


def test_one_control_among_several_is_the_regression_with_one():
    means, controls = draws()
    controls[:, :, 1] = 0.0
    value, error = batch_estimate_with(means, controls)
    want, want_error = batch_estimate(means, controls[:, :, 0])
    assert value == pytest.approx(want, rel=1e-12)
    assert error == pytest.approx(want_error, rel=1e-10)


def test_controls_that_move_together_count_once():
    means, controls = draws()
    controls[:, :, 1] = -2.0 * controls[:, :, 0]
    value, error = batch_estimate_with(means, controls)
    want, want_error = batch_estimate(means, controls[:, :, 0])
    assert value == pytest.approx(want, rel=1e-9) and error == pytest.approx(want_error, rel=1e-6)


def test_errors_with_two_controls_are_those_of_leaving_one_out():
    means, controls = draws()
    n = len(means)
    value, error = batch_estimate_with(means, controls)
    left_out = np.stack(
        [batch_estimate_with(*(np.delete(x, i, axis=0) for x in (means, controls)))[0] for i in range(n)]
    )
    moves = left_out - value
    skewness = np.abs((moves**3).mean(axis=0)) / ((moves**2).mean(axis=0)) ** 1.5
    want = np.sqrt((n - 1) / n * (moves**2).sum(axis=0)) * (1.0 + 2.0 * skewness / np.sqrt(n))
    assert error == pytest.approx(want, rel=1e-8)


def test_intervals_with_two_controls_cover_the_truth():
    means, controls = draws(columns=2000, seed=2)
    value, error = batch_estimate_with(means, controls)
    assert np.median(error) < 0.03  # without controls 0.1
    missed = np.mean(np.abs(value - 3.0) > 2.045 * error)  # 95 % of Student's t, 29 degrees of freedom
    assert missed < 0.06


def test_the_slope_tells_how_much_of_a_controls_own_error_enters():
    means, controls = draws()
    value, _, slope = batch_regression(means, controls[:, :, 0])
    moved, _, _ = batch_regression(means, controls[:, :, 0] - 0.01)
    assert moved - value == pytest.approx(0.01 * slope, rel=1e-9)
    assert batch_regression(means)[2] == pytest.approx(np.zeros(5))
