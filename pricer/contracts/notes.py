"""Everyday notes, each put together from the contract's parts."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.autocall import Autocall
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.contract import Contract
from pricer.contracts.coupons import Coupons
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.feature import Feature
from pricer.contracts.levels import Levels
from pricer.contracts.observation import Observation
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction, Trigger


def knock_in(
    aggregate: Aggregate, schedule: Sequence[Observation], level: float, *, at_level_counts: bool = False
) -> Barrier:
    """A note's down-and-in barrier, flat over ``schedule``; untouched, the note redeems its capital of 1."""
    trigger = Trigger(Direction.DOWN, aggregate, at_level_counts=at_level_counts)
    return Barrier(BarrierKind.IN, trigger, tuple(schedule), (level,) * len(schedule), instead=Redemption())


def autocallable(
    levels: Levels,
    aggregate: Aggregate,
    expiry: Observation,
    calls: Sequence[Observation],
    call_levels: Sequence[float],
    call_amounts: Sequence[float],
    redemption: Redemption,
    coupons: Coupons | None = None,
    barrier: Barrier | None = None,
) -> Contract:
    """A note that is called where ``aggregate`` is at or above its level, and else redeems its short put.

    With a ``barrier`` of :func:`knock_in` the put counts only once knocked in. Coupons are
    observed before the call of the day, the barrier after it.
    """
    trigger = Trigger(Direction.UP, aggregate)
    features: list[Feature[Any]] = [] if coupons is None else [coupons]
    features.append(Autocall(tuple(calls), trigger, tuple(call_levels), tuple(call_amounts)))
    if barrier is not None:
        features.append(barrier)
    return Contract(levels, ExpiryLevel(expiry.day, aggregate), redemption, expiry, tuple(features))


def reverse_convertible(
    levels: Levels,
    aggregate: Aggregate,
    expiry: Observation,
    redemption: Redemption,
    coupons: Coupons,
    barrier: Barrier | None = None,
) -> Contract:
    """Coupons, and at expiry the capital less a short put, which may have to be knocked in."""
    features: list[Feature[Any]] = [coupons]
    if barrier is not None:
        features.append(barrier)
    return Contract(levels, ExpiryLevel(expiry.day, aggregate), redemption, expiry, tuple(features))
