"""Barriers watched at all times, seen on the dates of a path.

The highest of a random walk's steps lies, on average, beta = -zeta(1/2) / sqrt(2 pi) step deviations below the highest
point of the motion between them. So a path seen on dates hits a barrier at ``H exp(-+ beta d)`` about as often as the
one watched at all times hits H, with d the deviation of the logarithm of what is watched from one date to the next, and
the barrier moved towards the level tonight (Broadie, Glasserman & Kou 1997, turned round; the error is of smaller
order than d). It holds for one level of constant volatility a few d away from its barrier; each step has
its own d here. Of best-of, worst-of and k-th best one underlying crosses: each has its own d, under a smile that of its
local volatility at the barrier, where a hit is decided. A weighted sum has that of the shares its underlyings have in
its forward; sums, and composites with their exchange rates, keep the d of lognormal levels under a smile, too.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.option import Conversion
from pricer.contracts.trigger import Direction, Trigger
from pricer.engines.closed_form.barrier import OVERSHOOT
from pricer.engines.contract_legs.readings import Readings
from pricer.engines.contract_legs.unsayable import UnsayableError
from pricer.engines.contract_terms import ContractTerms
from pricer.market.local_vol_surface import LocalVolSurface


def scales(
    terms: ContractTerms,
    readings: Readings,
    trigger: Trigger,
    level: float,
    places: Sequence[int],
    number: int,
    *,
    has_begun: bool,
    surfaces: Sequence[LocalVolSurface] = (),
) -> tuple[float, ...]:
    """What divides the levels (n,) on date ``places[number]`` of a barrier watched from date to date of ``places``.

    ``has_begun`` : whether it is watched tonight already, so that the first step starts tonight; otherwise the
    first date takes the step that follows it. ``surfaces`` (n,) of local volatility, none for lognormal levels.
    """
    if number == 0 and not has_begun:
        if len(places) == 1:
            return (1.0,) * len(terms.forwards[0])
        start, end = places[0], places[1]
    else:
        start, end = (places[number - 1] if number else -1), places[number]
    covariance = terms.covariances[start + 1 : end + 1].sum(axis=0)
    prices = terms.forwards[end] + terms.floors[end]
    random_share = terms.forwards[end] / prices
    covariance = covariance * np.outer(random_share, random_share)
    references = np.array(readings.references)
    if readings.since is not None:
        references = references * (terms.forwards[readings.since] + terms.floors[readings.since])
    if trigger.scales is not None:
        references = references * np.array(trigger.scales)
    one_crosses = trigger.aggregate.is_ranked or len(references) == 1
    if surfaces and one_crosses and terms.contract.conversion is not Conversion.COMPOSITE:
        deviations = _local_deviations(terms, level * references, start, end, surfaces)
    else:
        deviations = _deviations(trigger.aggregate, prices / references, covariance)
    sign = 1.0 if trigger.direction is Direction.DOWN else -1.0
    return tuple(math.exp(sign * OVERSHOOT * d) for d in deviations.tolist())


def _deviations(
    aggregate: Aggregate, levels: NDArray[np.float64], covariance: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Of the logarithm of what crosses, by underlying (n,)."""
    weights = np.array(aggregate.weights)
    match aggregate.kind:
        case AggregateKind.WEIGHTED_SUM:
            if weights.min() < 0.0:
                raise UnsayableError("a barrier on a difference is watched at all times")
            shares = weights * levels / (weights @ levels)
        case AggregateKind.GEOMETRIC:
            shares = weights / weights.sum()
        case AggregateKind.RANK_WEIGHTED:
            raise UnsayableError("a barrier on rank-weighted levels is watched at all times")
        case _:
            found: NDArray[np.float64] = np.sqrt(np.diagonal(covariance))
            return found
    return np.full(len(levels), math.sqrt(max(float(shares @ covariance @ shares), 0.0)))


def _local_deviations(
    terms: ContractTerms, at: NDArray[np.float64], start: int, end: int, surfaces: Sequence[LocalVolSurface]
) -> NDArray[np.float64]:
    """Of the logarithm of each price from date ``start`` (-1: tonight) to ``end`` where it is at the barrier, (n,)."""
    time = float(terms.times[end])
    step = math.sqrt(time - (float(terms.times[start]) if start >= 0 else 0.0))
    out = np.zeros(len(at))
    for i, (price, surface) in enumerate(zip(at.tolist(), surfaces, strict=True)):
        moving = price - float(terms.floors[end, i])
        if moving > 0.0:  # a barrier within what is known of the price is never reached
            volatility = surface.volatility(np.log(moving / terms.forwards[end, i]), time)
            out[i] = float(volatility) * step * moving / price
    return out
