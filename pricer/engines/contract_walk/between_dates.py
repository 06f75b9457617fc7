"""Barriers that are watched at all times, on paths that are known on dates only.

Between two dates a lognormal level, given both ends, is a Brownian bridge in its logarithm, and the chance
that it crossed a level is known (Andersen & Brotherton-Ratcliffe 1996). One underlying is
treated so; the hit is drawn. Several cross together in ways that no formula tells: there the
barrier is moved towards the level by 0.5826 deviations of a step, which makes crossings seen on dates as likely as
those seen at all times (Broadie, Glasserman & Kou 1997), each underlying by its own deviation
where the extreme of all is watched, a sum or a geometric mean by its deviation at the forwards. Under a smile an
underlying's own deviation is that of its local volatility at the barrier.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from datetime import date
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.barrier import Barrier
from pricer.contracts.option import Conversion
from pricer.contracts.trigger import Direction, Trigger
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.contract_walk.bulk import met, read
from pricer.market.local_vol_surface import LocalVolSurface

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: Minus the zeta function at 1/2 over the root of two pi: how far a random walk steps beyond a level on average.
OVERSHOOT = 0.5825971579390107


class Watch(Protocol):
    """Decides whether a barrier was hit since the date before."""

    def beyond(self, trigger: Trigger, place: int, levels: Array, level: float) -> Mask:
        """Where ``level`` was met by ``levels`` (n_assets, n_paths) of the date at ``place``, or since the last one."""


class ShiftedWatch:
    """Levels moved towards the barrier; ``factors`` (n_dates, n_assets)."""

    def __init__(self, factors: Array) -> None:
        self._factors = factors

    def beyond(self, trigger: Trigger, place: int, levels: Array, level: float) -> Mask:
        return met(trigger, read(trigger, levels * self._factors[place][:, None]), level)


class BridgeWatch:
    """Crossings between dates drawn; serves one block of paths.

    ``deviations`` (n_dates,) of the logarithm of the reading since the date before, 0 where the time between is not
    watched; ``start`` the reading tonight.
    """

    def __init__(self, deviations: Array, start: float, draws: np.random.Generator) -> None:
        self._deviations, self._draws = deviations, draws
        self._before: Array | None = None if math.isnan(start) else np.array(start)

    def beyond(self, trigger: Trigger, place: int, levels: Array, level: float) -> Mask:
        reading = read(trigger, levels)
        found = met(trigger, reading, level)
        deviation, before = float(self._deviations[place]), self._before
        self._before = reading
        if deviation > 0.0 and before is not None and level > 0.0:
            # Both distances are positive where the path is still alive and was not found beyond.
            product = np.log(before / level) * np.log(reading / level)
            crossed = self._draws.random(len(reading)) < np.exp(-2.0 * np.maximum(product, 0.0) / deviation**2)
            found = found | crossed
        return found


def is_bridged(barrier: Barrier, terms: ContractTerms) -> bool:
    """Whether the crossing between dates is exact: one underlying without known parts, read as it is."""
    aggregate = barrier.trigger.aggregate
    one = len(aggregate.weights) == 1 and aggregate.cash is None and aggregate.weights[0] > 0.0
    return barrier.continuous and one and not terms.has_floors


def watched_steps(barrier: Barrier, terms: ContractTerms) -> NDArray[np.bool_]:
    """Whether the time up to each date, since the date before, is watched, (n_dates,)."""
    first, day = barrier.schedule[0].day, terms.as_of.valuation_date
    befores = (day, *terms.dates[:-1])
    return np.array([before >= first for before in befores])


def bridge_deviations(barrier: Barrier, terms: ContractTerms) -> Array:
    """Of the logarithm of one underlying's reading, (n_dates,); dates that the barrier skips are joined to the next."""
    weight = barrier.trigger.aggregate.weights[0]
    power = weight if barrier.trigger.aggregate.kind is AggregateKind.GEOMETRIC else 1.0
    variances = _since_last_seen(barrier, terms, terms.covariances[:, :1, :1])[:, 0, 0]
    return np.asarray(np.where(watched_steps(barrier, terms), power * np.sqrt(variances), 0.0))


def shift_factors(
    barrier: Barrier, terms: ContractTerms, references: Array, surfaces: Sequence[LocalVolSurface] = ()
) -> Array:
    """What levels are multiplied by before they are compared, (n_dates, n_assets); ``references`` (n_assets,).

    With ``surfaces`` (n_assets,) an extreme's underlyings move by their local volatility at the barrier, where a hit
    is decided; sums, and composites with their exchange rates, keep the deviation of lognormal levels.
    """
    trigger, floors = barrier.trigger, terms.floors
    towards = OVERSHOOT if trigger.direction is Direction.UP else -OVERSHOOT
    scales = references if trigger.scales is None else references * np.array(trigger.scales)
    shares = terms.forwards / (terms.forwards + floors)  # of the price that moves
    own_level = trigger.aggregate.is_ranked or len(references) == 1
    if surfaces and own_level and terms.contract.conversion is not Conversion.COMPOSITE:
        deviations = _local_deviations(barrier, terms, scales, surfaces)
    else:
        covariances = _since_last_seen(barrier, terms, terms.covariances) * shares[:, :, None] * shares[:, None, :]
        levels = (terms.forwards + floors) / scales
        deviations = np.sqrt(_reading_variances(trigger.aggregate, levels, covariances))
    factors = np.exp(towards * deviations)
    return np.asarray(np.where(watched_steps(barrier, terms)[:, None], factors, 1.0))


def _local_deviations(
    barrier: Barrier, terms: ContractTerms, scales: Array, surfaces: Sequence[LocalVolSurface]
) -> Array:
    """Of each price's logarithm at the barrier since it was last watched, (n_dates, n_assets)."""
    own = {observation.day: level for observation, level in zip(barrier.schedule, barrier.levels, strict=True)}
    out, last = np.zeros(terms.forwards.shape), 0.0
    for k, day in enumerate(terms.dates):
        if day not in own:
            continue
        time = float(terms.times[k])
        for i, surface in enumerate(surfaces):
            price = own[day] * scales[i]
            moving = price - terms.floors[k, i]
            if moving > 0.0:  # a barrier within what is known of the price is never reached
                at_barrier = surface.volatility(np.log(moving / terms.forwards[k, i]), time)
                out[k, i] = float(at_barrier) * math.sqrt(time - last) * moving / price
        last = time
    return out


def _reading_variances(aggregate: Aggregate, levels: Array, covariances: Array) -> Array:
    """Variance by which to move each underlying, (n_dates, n_assets)."""
    weights = np.array(aggregate.weights)
    if aggregate.is_ranked:
        return np.diagonal(covariances, axis1=1, axis2=2)
    if aggregate.kind is AggregateKind.WEIGHTED_SUM:
        exposures = weights * levels
        exposures = exposures / exposures.sum(axis=1, keepdims=True)
    else:
        exposures = np.broadcast_to(weights / weights.sum(), levels.shape)
    variances = np.einsum("ki,kij,kj->k", exposures, covariances, exposures)
    return np.repeat(variances[:, None], levels.shape[1], axis=1)


def _since_last_seen(barrier: Barrier, terms: ContractTerms, covariances: Array) -> Array:
    """Covariances since the barrier's own date before, for dates on which others are observed, too."""
    own: set[date] = {observation.day for observation in barrier.schedule}
    out, run = covariances.copy(), np.zeros(covariances.shape[1:])
    for k, day in enumerate(terms.dates):
        run = run + covariances[k]
        if day in own:
            out[k], run = run, np.zeros(run.shape)
    return out
