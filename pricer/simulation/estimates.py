"""From the sums of each randomisation to a value, its sensitivities and their errors."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import AggregateKind
from pricer.simulation.batch_means import batch_estimate
from pricer.simulation.design import Design
from pricer.simulation.unseen import Unseen, few_paths_decide

Array = NDArray[np.float64]

#: Levels in single precision are off by this much, relatively; errors never claim to be smaller.
_ROUNDING = 2.0**-24

_HEAD, _PER_LEG = 3, 5  # sums per randomisation, see ``plain.path_sums``


class Estimates(NamedTuple):
    """Undiscounted, per unit; arrays (n,) in the problem's asset order.

    Log-deltas ``dV/d ln F``, log-gammas ``F^2 d2V/dF2``, vegas to the deviations of the
    log-levels at fixed correlation.
    """

    value: float
    value_error: float
    log_deltas: Array
    log_delta_errors: Array
    log_gammas: Array
    log_gamma_errors: Array
    vegas: Array
    vega_errors: Array
    rounding: float  # part of the value's error that more paths do not lower
    few_decide: bool  # errors hold what all paths may have missed
    degrees_of_freedom: int  # of the value's error


def estimates(design: Design, means: Array, points: int) -> Estimates:
    """From the means of each randomisation's sums over ``points``, (randomisations, 3 + 5 n).

    With z the normals and w the common factor, ``ln X_i = ln F_i - s_i^2 / 2 + y_i + c_i w``,
    and ``(y_i + c_i w) / s_i`` is the standard normal that moves with ``s_i``, so
    ``dV/ds_i = E[f'(A) dA/d ln X_i ((y_i + c_i w) / s_i - s_i)]``.

    Controls: the aggregate's own forward for the value of a sum, each asset's forward for its
    delta and vega; both are known exactly. Ranked aggregates have none.

    Where an unsmoothed payoff jumps, so does what is sampled; where the aggregate switches
    between legs, deltas and vegas do. Evenly spread points can fall on the same side of a jump
    in every randomisation, whose spread then says nothing: errors are never below that of
    one point on the wrong side, uniform over a point's width. See ``unseen`` for paths that
    all miss a part of the payoff.
    """
    value, scaled, outside = (means[:, [k]] for k in range(_HEAD))
    legs = means[:, _HEAD:].reshape(len(means), design.n_assets, _PER_LEG)
    by_level, by_log, by_factor, second, level = (legs[:, :, k] for k in range(_PER_LEG))
    scales, s, v = design.scales, design.deviations, design.factor_deviation
    growth = np.exp(0.5 * v**2)
    deltas = scales * by_level
    gammas = scales**2 * second
    per_deviation = np.where(s > 0.0, 1.0 / np.where(s > 0.0, s, 1.0), 0.0)
    vegas = scales * (by_log * np.log(2.0) + design.direction * by_factor) * per_deviation - s * deltas
    aggregate = growth * scaled + outside
    control = leg_controls = None
    if design.kind is AggregateKind.GEOMETRIC:
        gammas = gammas + (scales - 1.0) * deltas
    elif design.kind is AggregateKind.WEIGHTED_SUM:
        forwards = design.weights * design.forwards
        control = (aggregate - forwards.sum()) / np.abs(forwards).sum()
        leg_growth = np.where(np.arange(design.n_assets) < design.n_common, growth, 1.0)
        leg_controls = leg_growth * level * design.drifted / design.forwards - 1.0
    (found,), (error,) = batch_estimate(value, control, _ROUNDING)
    d, d_error = batch_estimate(deltas, leg_controls, _ROUNDING)
    g, g_error = batch_estimate(gammas)
    w, w_error = batch_estimate(vegas, leg_controls, _ROUNDING)
    gross = float(np.abs(d).sum())
    rounding = _ROUNDING * (abs(float(found)) + gross)
    # levels rounded in proportion move a delta by its gamma, and a gamma by up to its own part over v
    by_gamma = 2.0 * _ROUNDING * np.abs(g)
    steepness = 1.0 / v if v > 0.0 else 0.0
    width = 1.0 / (points * np.sqrt(12.0 * len(means)))
    smoothed = design.is_smoothed
    at_jump = 0.0 if smoothed else width * float(np.abs(design.payoff.jumps).sum())
    # a jump is at most about twice the mean: an option pays more where its legs switch than elsewhere
    at_switch = 2.0 * gross * width if _switches(design) else 0.0
    few = few_paths_decide(design.payoff, value, aggregate, rounding)
    unseen = Unseen.of(design, points * len(means)) if few else Unseen.nothing(design.n_assets)
    place = np.argsort(design.order)
    return Estimates(
        float(found),
        float(np.linalg.norm([error, rounding, at_jump, unseen.value])),
        d[place],
        np.hypot(d_error, _ROUNDING * np.abs(d) + by_gamma + at_switch + unseen.log_deltas)[place],
        g[place],
        np.hypot(g_error, by_gamma * (1.0 + steepness) + unseen.log_gammas)[place],
        w[place],
        np.hypot(w_error, by_gamma + at_switch + unseen.vegas)[place],
        rounding,
        few,
        len(means) - (1 if control is None else 2),
    )


def _switches(design: Design) -> bool:
    """Does a leg's share of the aggregate, or an unsmoothed payoff's slope, jump from path to path?"""
    return bool(np.any(np.diff(design.rank_weights))) or (not design.is_smoothed and bool(design.payoff.knots))
