"""From the sums of local-volatility and lognormal payoffs on the same noise to values and errors.

The lognormal payoff, whose mean is known without the noise, is the control variate: regressed
over the means of the randomisations, for the value and for each sensitivity. What neither the
spread of the randomisations nor a regression can see is added as for lognormal paths: see
``estimates.estimates`` and ``unseen``.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from pricer.simulation.batch_means import batch_estimate, batch_regression
from pricer.simulation.local_vol_plan import LocalVolPlan
from pricer.simulation.unseen import Unseen, few_paths_decide

Array = NDArray[np.float64]

#: Levels in single precision, and tables of the path, are off by this much relatively; errors never
#: claim to be smaller.
_ROUNDING = 2.0**-22

_HEAD = 3  # sums per randomisation before those per asset, see ``kernels.local_vol_paths.accumulate``


@dataclass(frozen=True, slots=True)
class KnownAnswer:
    """What is known of the control: undiscounted value and ``dV/d ln F`` (n,), with standard errors."""

    value: float
    value_error: float
    log_deltas: Array
    log_delta_errors: Array


class LocalVolEstimates(NamedTuple):
    """Undiscounted, per unit; arrays (n,) in the problem's asset order."""

    value: float
    value_error: float
    control_slope: float  # of the value: how much of the control's own error is in it
    log_deltas: Array  # dV / d ln X(0)
    log_delta_errors: Array
    level_deltas: Array  # dV / d ln of each level at expiry
    level_delta_errors: Array
    means: Array  # of the martingales before the last step: 1 but for sampling where no measure is changed
    mean_errors: Array
    few_decide: bool  # errors hold what all paths may have missed
    degrees_of_freedom: int


def local_vol_estimates(plan: LocalVolPlan, means: Array, points: int, known: KnownAnswer) -> LocalVolEstimates:
    """From the means of each randomisation's sums over ``points``, (randomisations, 3 + 4 n)."""
    design = plan.design
    n = design.n_assets
    value, other, aggregate = (means[:, [k]] for k in range(_HEAD))
    deltas, other_deltas, levels, by_level = (means[:, _HEAD + k * n : _HEAD + (k + 1) * n] for k in range(4))
    deltas, other_deltas, by_level = plan.scales * deltas, plan.scales * other_deltas, plan.scales * by_level
    d_known, d_known_error = known.log_deltas[design.order], known.log_delta_errors[design.order]

    (v,), (v_error,), (v_slope,) = _controlled(value, other, np.array([known.value]), np.array([known.value_error]))
    d, d_error, _ = _controlled(deltas, other_deltas, d_known, d_known_error)
    b, b_error, _ = _controlled(by_level, other_deltas, d_known, d_known_error)
    gross = max(float(np.abs(d).sum()), float(np.abs(b).sum()))
    rounding = _ROUNDING * (abs(float(v)) + gross)
    width = 1.0 / (points * np.sqrt(12.0 * len(means)))  # one point on the wrong side of a jump
    unsmoothed = not plan.smooth and bool(design.payoff.knots)
    at_jump = width * float(np.abs(design.payoff.jumps).sum()) if unsmoothed else 0.0
    switches = unsmoothed or bool(np.any(np.diff(design.rank_weights)))
    at_switch = 2.0 * gross * width if switches else 0.0
    few = few_paths_decide(design.payoff, value, aggregate, rounding)
    unseen = Unseen.of(design, points * len(means)) if few else Unseen.nothing(n)
    level, level_errors = batch_estimate(levels)
    of_deltas = at_switch + unseen.log_deltas
    place = np.argsort(design.order)
    return LocalVolEstimates(
        value=float(v),
        value_error=float(np.linalg.norm([v_error, rounding, at_jump, unseen.value])),
        control_slope=float(v_slope),
        log_deltas=d[place],
        log_delta_errors=np.hypot(d_error, _ROUNDING * np.abs(d) + of_deltas)[place],
        level_deltas=b[place],
        level_delta_errors=np.hypot(b_error, _ROUNDING * np.abs(b) + of_deltas)[place],
        means=(1.0 + (level - 1.0) / plan.shares)[place],
        mean_errors=(level_errors / plan.shares)[place],
        few_decide=few,
        degrees_of_freedom=len(means) - 2,
    )


def step_difference(fine: Array, coarse: Array) -> tuple[float, float]:
    """Value on all steps less that on half as many, on common points, and its standard error.

    The lognormal value has no time steps: its difference, of mean 0, is the control variate for the
    unlike smoothing of the two.
    """
    (difference,), (error,), _ = _controlled(fine[:, [0]] - coarse[:, [0]], fine[:, [1]] - coarse[:, [1]])
    rounding = _ROUNDING * abs(float(fine[:, 0].mean()))
    return float(difference), float(np.hypot(error, rounding))


def _controlled(
    means: Array, controls: Array, known: Array | float = 0.0, known_error: Array | float = 0.0
) -> tuple[Array, Array, Array]:
    """Estimates, errors with that of the known means in them, and slopes, each (m,)."""
    size = np.maximum(np.maximum(np.abs(known), np.abs(controls).max(axis=0)), 1e-300)
    estimate, error, slope = batch_regression(means, (controls - known) / size, _ROUNDING)
    slope = slope / size
    return estimate, np.hypot(error, slope * known_error), slope
