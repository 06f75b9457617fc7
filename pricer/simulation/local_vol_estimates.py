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
from numpy.typing import ArrayLike, NDArray

from pricer.simulation.batch_means import batch_estimate, batch_regression
from pricer.simulation.local_vol_plan import LocalVolPlan
from pricer.simulation.unseen import Unseen, few_paths_decide

Array = NDArray[np.float64]

#: Levels in single precision, and tables of the path, are off by this much relatively; errors never
#: claim to be smaller.
_ROUNDING = 2.0**-22

#: The scheme is of weak order 2: of what halving the steps changes, this part is left.
EXTRAPOLATION = 1.0 / 3.0

#: Parts of what halvings say that are stated as error.
_OF_DISAGREEMENT, _OF_DIFFERENCE = 0.5, 1.0 / 6.0

#: Standard errors beyond which it is no noise: it is looked at several times.
_SURE = 2.5

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


@dataclass(frozen=True, slots=True)
class StepEvidence:
    """What two successive halvings of the steps say of the bias; undiscounted, per unit.

    ``difference`` : value on all steps less that on half as many, ``disagreement`` : how far the extrapolated value
    moves by the last halving; each with its standard error. ``correction`` : (randomisations, 2) what
    extrapolation adds to the means of the payoff and of the control.
    """

    difference: float
    difference_error: float
    disagreement: float
    disagreement_error: float
    correction: Array

    @classmethod
    def of(cls, fine: Array, coarse: Array, coarsest: Array) -> StepEvidence:
        """From means of each randomisation's sums on common points, on all steps, half and a quarter of them.

        The lognormal value has no time steps: its difference, of mean 0, is the control variate for the unlike
        smoothing of the three.
        """
        f, c, q = fine[:, :2], coarse[:, :2], coarsest[:, :2]
        last, first = f - c, c - q
        rounding = _ROUNDING * abs(float(f[:, 0].mean()))

        def estimate(moves: Array) -> tuple[float, float]:
            (value,), (error,), _ = _controlled(moves[:, [0]], moves[:, [1]])
            return float(value), float(np.hypot(error, rounding))

        disagreement = last + EXTRAPOLATION * (last - first)
        return cls(*estimate(last), *estimate(disagreement), EXTRAPOLATION * last)

    @property
    def bias(self) -> float:
        """Standard error to allow the extrapolated value for its steps, see ``step_bias``."""
        return float(step_bias(self.difference, self.disagreement))

    @property
    def least_bias(self) -> float:
        """The same as far as it cannot be noise."""
        difference = max(abs(self.difference) - _SURE * self.difference_error, 0.0)
        return float(step_bias(difference, max(abs(self.disagreement) - _SURE * self.disagreement_error, 0.0)))

    @property
    def noise(self) -> float:
        """How much of the bias is noise."""
        return float(step_bias(self.difference_error, self.disagreement_error))


def step_bias(difference: ArrayLike, disagreement: ArrayLike) -> Array:
    """Standard error to allow an extrapolated value for its steps, from what ``StepEvidence`` describes.

    Were the order exactly 2, what is left would be a fifteenth of the disagreement; at order 1 it is all of
    it. Where the last halving itself moved the value, agreement may be chance: a part of that is the least.
    """
    of_disagreement, of_difference = _OF_DISAGREEMENT * np.abs(disagreement), _OF_DIFFERENCE * np.abs(difference)
    return np.asarray(np.maximum(of_disagreement, of_difference))


def _controlled(
    means: Array, controls: Array, known: Array | float = 0.0, known_error: Array | float = 0.0
) -> tuple[Array, Array, Array]:
    """Estimates, errors with that of the known means in them, and slopes, each (m,)."""
    size = np.maximum(np.maximum(np.abs(known), np.abs(controls).max(axis=0)), 1e-300)
    estimate, error, slope = batch_regression(means, (controls - known) / size, _ROUNDING)
    slope = slope / size
    return estimate, np.hypot(error, slope * known_error), slope
