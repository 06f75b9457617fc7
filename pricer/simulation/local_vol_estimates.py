"""From the sums of local-volatility and lognormal payoffs on the same noise to values and errors.

The lognormal payoff, whose mean is known without the noise, is the control variate: regressed
over the means of the randomisations, for the value and for each sensitivity.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from pricer.simulation.batch_means import batch_estimate, batch_regression
from pricer.simulation.local_vol_plan import LocalVolPlan

Array = NDArray[np.float64]

#: Levels in single precision, and tables of the path, are off by this much relatively; errors never
#: claim to be smaller.
_ROUNDING = 2.0**-22


@dataclass(frozen=True, slots=True)
class LognormalAnswer:
    """What is known of the lognormal problem: undiscounted value and ``dV/d ln F`` (n,), with standard errors."""

    value: float
    value_error: float
    log_deltas: Array
    log_delta_errors: Array


class LocalVolEstimates(NamedTuple):
    """Undiscounted, per unit; arrays (n,) in the problem's asset order."""

    value: float
    value_error: float
    log_deltas: Array
    log_delta_errors: Array
    difference: float  # local volatility less lognormal
    difference_error: float
    means: Array  # of the unit martingales before the last step: 1 but for sampling
    mean_errors: Array
    rounding: float  # part of the value's error that more paths do not lower
    degrees_of_freedom: int


def local_vol_estimates(plan: LocalVolPlan, means: Array, lognormal: LognormalAnswer) -> LocalVolEstimates:
    """From the means of each randomisation's sums, (randomisations, 2 + 3 n)."""
    design = plan.design
    n = design.n_assets
    value, other = means[:, [0]], means[:, [1 + n]]
    deltas, other_deltas = (plan.scales * means[:, a : a + n] for a in (1, 2 + n))
    d_known, d_known_error = lognormal.log_deltas[design.order], lognormal.log_delta_errors[design.order]
    (v,), (v_error,), (slope,), size = _controlled(value, other, np.array([lognormal.value]))
    v_slope = float(slope / size[0])
    d, d_error, d_slope, d_size = _controlled(deltas, other_deltas, d_known)
    d_error = np.hypot(d_error, d_slope / d_size * d_known_error)
    rounding = _ROUNDING * (abs(float(v)) + float(np.abs(d).sum()))
    levels, level_errors = batch_estimate(means[:, 2 + 2 * n :])
    moving = 1.0 + (levels - 1.0) / plan.shares, level_errors / plan.shares
    place = np.argsort(design.order)
    return LocalVolEstimates(
        value=float(v),
        value_error=float(np.hypot(np.hypot(v_error, v_slope * lognormal.value_error), rounding)),
        log_deltas=d[place],
        log_delta_errors=np.hypot(d_error, _ROUNDING * np.abs(d))[place],
        difference=float(v) - lognormal.value,
        difference_error=float(np.hypot(np.hypot(v_error, (v_slope - 1.0) * lognormal.value_error), rounding)),
        means=moving[0][place],
        mean_errors=moving[1][place],
        rounding=rounding,
        degrees_of_freedom=len(means) - 2,
    )


def _controlled(means: Array, controls: Array, known: Array) -> tuple[Array, Array, Array, Array]:
    """Estimates, errors, slopes and the sizes that made the controls of order 1, each (m,)."""
    size = np.maximum(np.maximum(np.abs(known), np.abs(controls).mean(axis=0)), 1e-300)
    return (*batch_regression(means, (controls - known) / size), size)
