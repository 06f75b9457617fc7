"""From the sums of each randomisation to a value, its sensitivities and their errors."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import AggregateKind
from pricer.simulation.batch_means import batch_estimate
from pricer.simulation.design import Design

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
    degrees_of_freedom: int  # of the value's error


def estimates(design: Design, means: Array, points: int) -> Estimates:
    """From the means of each randomisation's sums over ``points``, (randomisations, 3 + 5 n).

    With z the normals and w the common factor, ``ln X_i = ln F_i - s_i^2 / 2 + y_i + c w``
    for an asset that the factor scales, and ``(y_i + c w) / s_i`` is the standard normal
    that moves with ``s_i``, so ``dV/ds_i = E[f'(A) dA/d ln X_i ((y_i + c w) / s_i - s_i)]``.

    Controls: the aggregate's own forward for the value, each asset's forward for its delta
    and vega; both are known exactly. Ranked aggregates have none.

    Where the aggregate switches between legs, deltas and vegas jump. Evenly spread points can
    fall on the same side of a switch in every randomisation, whose spread then says nothing:
    errors are never below that of one point on the wrong side, uniform over a point's width.
    """
    value, scaled, outside = (means[:, [k]] for k in range(_HEAD))
    legs = means[:, _HEAD:].reshape(len(means), design.n_assets, _PER_LEG)
    by_level, by_log, by_factor, second, level = (legs[:, :, k] for k in range(_PER_LEG))
    scales, s, c = design.scales, design.deviations, design.common
    growth = np.exp(0.5 * design.factor_deviation**2)
    deltas = scales * by_level
    gammas = scales**2 * second
    per_deviation = np.where(s > 0.0, 1.0 / np.where(s > 0.0, s, 1.0), 0.0)
    vegas = scales * (by_log * np.log(2.0) + c * by_factor) * per_deviation - s * deltas
    control = leg_controls = None
    if design.kind is AggregateKind.GEOMETRIC:
        gammas = gammas + (scales - 1.0) * deltas
        control = growth * scaled / _geometric_forward(design) - 1.0
        leg_controls = np.broadcast_to(control, deltas.shape)
    elif design.kind is AggregateKind.WEIGHTED_SUM:
        forwards = design.weights * design.forwards
        control = (growth * scaled + outside - forwards.sum()) / np.abs(forwards).sum()
        leg_growth = np.where(np.arange(design.n_assets) < design.n_common, growth, 1.0)
        leg_controls = leg_growth * level * design.drifted / design.forwards - 1.0
    (v,), (v_error,) = batch_estimate(value, control)
    d, d_error = batch_estimate(deltas, leg_controls)
    g, g_error = batch_estimate(gammas)
    w, w_error = batch_estimate(vegas, leg_controls)
    rounding = _ROUNDING * (abs(float(v)) + float(np.abs(d).sum()))
    # a jump is at most about twice the mean: an option pays more where its legs switch than elsewhere
    jump = 2.0 * float(np.abs(d).sum()) if _switches(design) else 0.0
    one_point = jump / (points * np.sqrt(12.0 * len(means)))
    place = np.argsort(design.order)
    return Estimates(
        float(v),
        float(np.hypot(v_error, rounding)),
        d[place],
        np.hypot(d_error, _ROUNDING * np.abs(d) + one_point)[place],
        g[place],
        g_error[place],
        w[place],
        np.hypot(w_error, one_point)[place],
        rounding,
        len(means) - (1 if control is None else 2),
    )


def _switches(design: Design) -> bool:
    """Does a leg's share of the aggregate, or an unsmoothed payoff's slope, jump from path to path?"""
    return bool(np.any(np.diff(design.rank_weights))) or (design.common == 0.0 and bool(design.payoff.knots))


def _geometric_forward(design: Design) -> float:
    """Expectation of a geometric aggregate, which is lognormal."""
    sampled = float(np.sum((design.weights @ design.loadings) ** 2)) * np.log(2.0) ** 2
    return float(2.0**design.log2_scale * np.exp(0.5 * (sampled + design.factor_deviation**2)))
