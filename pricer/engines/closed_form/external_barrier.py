"""A barrier on one level, watched continuously, under an option on another or on several others.

The reflection moves the watched level's start; the other levels move with it as far as they are correlated
(Heynen & Kat 1994). All volatilities must have constant ratios in time, and correlations be constant.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.closed_form.barrier import Corridor, WatchedLevel, survival_given_end
from pricer.engines.closed_form.family import Estimate, Side
from pricer.engines.closed_form.given_driver import ValueOf, expectation_given
from pricer.engines.closed_form.one_sided_lognormal import OneSidedLognormal, weighted_expectation
from pricer.engines.problem import EuropeanProblem

Array = NDArray[np.float64]


def knock_out_by_another(
    watched: WatchedLevel,
    corridor: Corridor,
    forward: float,
    deviation: float,
    correlation: float,
    payoff: PiecewiseLinear,
) -> Estimate | None:
    """``E[payoff(level); watched level never outside]``, undiscounted; the level is lognormal at expiry.

    ``forward`` > 0 and ``deviation`` >= 0 are the level's, ``correlation`` that of the two logs, which must be
    constant in time. None for a corridor with two barriers. The weight of the image multiplies the error of the
    normal probabilities: where it is large, :func:`knock_out_of_aggregate` is the better way.
    """
    barrier, side = _single(corridor)
    if barrier is None:
        return None
    h = math.log(barrier / watched.spot)
    if side * h <= 0.0:
        return Estimate(0.0)
    alive: Side = -1 if side == 1 else 1
    limit = (h - watched.drift) / watched.deviation
    # The image starts 2h higher, which the other level follows by its regression on the watched one.
    shift = 2.0 * h / watched.deviation
    weight = math.exp(watched.image(2.0 * h)[0])
    moved = forward * math.exp(correlation * deviation * shift)
    total = Estimate(0.0)
    for factor, start, edge in ((1.0, forward, limit), (-weight, moved, limit - shift)):
        law = OneSidedLognormal(start, deviation, correlation, edge, alive)
        value = weighted_expectation(payoff, law, law.mass())
        if value is None:
            return None
        total = total + value.times(factor)
    return total


def knock_out_of_aggregate(
    problem: EuropeanProblem, watched: WatchedLevel, corridor: Corridor, covariance: Array, value_of: ValueOf
) -> Estimate | None:
    """Discounted value on any aggregate whose European value is known.

    ``covariance`` (n,) is that of the log-levels with the log of the watched one.
    One integral over the watched level at expiry, weighted with the chance of its path's having stayed
    inside on the way there. The watched level may be one of the aggregate's own. None where a conditional value is
    unknown.
    """
    if not corridor.contains(watched.spot):
        return Estimate(0.0)
    s = watched.deviation
    barriers = [barrier for barrier in (corridor.lower, corridor.upper) if 0.0 < barrier < math.inf]
    value = expectation_given(
        problem,
        np.asarray(covariance / s),
        lambda w: survival_given_end(watched, corridor, watched.drift + s * w),
        value_of,
        breaks=[(math.log(barrier / watched.spot) - watched.drift) / s for barrier in barriers],
    )
    return None if value is None else value.times(problem.discount_factor)


def _single(corridor: Corridor) -> tuple[float | None, Side]:
    """The only barrier, and the side on which it lies: +1 above, -1 below the start."""
    if corridor.lower > 0.0 and corridor.upper == math.inf:
        return corridor.lower, -1
    if corridor.lower == 0.0 and corridor.upper < math.inf:
        return corridor.upper, 1
    return None, 1
