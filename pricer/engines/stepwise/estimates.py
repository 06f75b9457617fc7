"""Value and slopes of sampled legs, with lognormal legs on the same paths as a control variate."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from pricer.engines.contract_legs.drawing import Drawn
from pricer.engines.stepwise.sampler import StepwiseSampler
from pricer.simulation.batch_means import batch_estimate, batch_regression

Array = NDArray[np.float64]

#: Relative rounding of a control's mean.
_ROUNDING = 2.0**-24


def value_of(legs: StepwiseSampler, control: StepwiseSampler | None, known: Drawn | None) -> tuple[float, float]:
    """Of the legs together, and its standard error; ``known`` has the mean of ``control``."""
    means = legs.values.sum(axis=1, keepdims=True) / legs.points
    if control is None or known is None:
        found = batch_estimate(means)
    else:
        others = control.values.sum(axis=1, keepdims=True) / control.points
        found = controlled(means, others, np.array([known.value]), np.array([known.standard_error]))
    return float(found[0][0]), float(found[1][0])


def slopes_of(legs: StepwiseSampler, control: StepwiseSampler | None, known: Drawn | None) -> tuple[Array, Array]:
    """By the logarithm of each X at the start, and standard errors, (n,)."""
    means = legs.slopes / legs.slope_points
    if control is None or known is None:
        return batch_estimate(means)
    return controlled(means, control.slopes / control.slope_points, known.log_deltas, known.log_delta_errors)


def controlled(means: Array, others: Array, known: Array, known_errors: Array) -> tuple[Array, Array]:
    """Estimates and errors of columns of ``means`` (R, m) with ``others`` (R, m) of mean ``known`` (m,) as controls.

    A column goes without its control where that does not pay: a control that is 0 but for rounding (the delta of a
    start still to come, under lognormal levels) tells nothing, and one whose mean is known badly does harm.
    """
    sizes = np.maximum(np.abs(known), np.maximum(np.abs(others), np.abs(means)).max(axis=0))
    sizes = np.maximum(sizes, 1e-300)
    estimates, errors, slopes = batch_regression(means, (others - known) / sizes, _ROUNDING)
    errors = np.hypot(errors, slopes / sizes * known_errors)
    plain, plain_errors = batch_estimate(means)
    pays = errors < plain_errors
    return np.where(pays, estimates, plain), np.where(pays, errors, plain_errors)
