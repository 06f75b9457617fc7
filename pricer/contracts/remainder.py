"""What is left of a contract tonight: its past filled in, spent features dropped."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from datetime import date
from typing import Any

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.autocall import Autocall
from pricer.contracts.barrier import Barrier, BarrierKind, BarrierState
from pricer.contracts.contract import Contract
from pricer.contracts.coupons import Coupons, CouponState
from pricer.contracts.exercise import Exercise
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.feature import Feature, Payout
from pricer.contracts.known_level import paid_at
from pricer.contracts.life_cycle import AsOf, Status
from pricer.contracts.redemption import Redemption


@dataclass(frozen=True, slots=True)
class Remaining:
    """The contract that is left, with tonight's states of its statistic and of its features, in its order."""

    contract: Contract
    statistic: Any
    features: tuple[Any, ...]


def remainder(as_of: AsOf) -> Contract:
    """A contract that pays, after the valuation date, what the one of ``as_of`` still does.

    References that are known are filled in. Features go that can do nothing any more: barriers that were hit, or
    can no longer be, with what this makes of the payout; calls and coupons that have all passed; rights that
    ended. A final level that is known becomes the amount that is paid on it. Features half-way through stay
    whole, as their states rest on their past. A contract that is not live stays as it is.
    """
    return remaining(as_of).contract


def remaining(as_of: AsOf) -> Remaining:
    """:func:`remainder` with the states of its parts."""
    contract, progress, today = as_of.contract, as_of.progress, as_of.valuation_date
    if as_of.status is not Status.LIVE:
        return Remaining(contract, progress.statistic, progress.features)
    levels = contract.levels
    known = as_of.references
    if levels.references is None and known is not None:
        levels = replace(levels, references=tuple(map(float, known)), reference_dates=())
    kept, payout = _kept(contract, progress.features, today)
    statistic, state = contract.statistic, progress.statistic
    if statistic.dates[-1] <= today:
        level = statistic.value(state)
        payout = _constant(payout, level)
        kept = [(_of_known_level(feature, level), left) for feature, left in kept]
        statistic, state = ExpiryLevel(contract.expiry.day, _aggregate(contract)), None
    features = tuple(feature for feature, _ in kept)
    left = replace(contract, levels=levels, statistic=statistic, payout=payout, features=features)
    return Remaining(left, state, tuple(left for _, left in kept))


def _kept(contract: Contract, states: Sequence[Any], today: date) -> tuple[list[tuple[Feature[Any], Any]], Payout]:
    """The features that may still do something, with their states, and the payout that they may change."""
    kept: list[tuple[Feature[Any], Any]] = []
    payout, decided = contract.payout, False
    for feature, state in zip(contract.features, states, strict=True):
        if isinstance(feature, Barrier):
            if feature.rebate_at_hit is None and decided:
                continue  # an earlier barrier has taken the payout out of force for good
            in_force = _in_force(feature, state, today)
            if in_force is None:
                kept.append((feature, state))
            elif not in_force:
                payout, decided = feature.instead, True
        elif _is_open(feature, state, today):
            kept.append((feature, state))
    return kept, payout


def _in_force(barrier: Barrier, state: BarrierState, today: date) -> bool | None:
    """Whether the barrier leaves the payout in force for good; None while that is open."""
    if state.hit_on is not None:
        return barrier.kind is BarrierKind.IN
    watched = any(day > today for day in barrier.dates)
    return None if watched else barrier.kind is BarrierKind.OUT


def _is_open(feature: Feature[Any], state: Any, today: date) -> bool:
    if isinstance(feature, Coupons) and isinstance(state, CouponState):
        return state.decided < len(feature.coupons)
    if isinstance(feature, Autocall):
        return bool(state < len(feature.schedule))
    if isinstance(feature, Exercise):
        last = feature.rights[-1].day if feature.exercised is None else feature.exercised.day
        return last > today
    return True


def _constant(payout: Payout, level: float) -> Payout:
    return Redemption(capital=paid_at(payout, level))


def _of_known_level(feature: Feature[Any], level: float) -> Feature[Any]:
    return replace(feature, instead=_constant(feature.instead, level)) if isinstance(feature, Barrier) else feature


def _aggregate(contract: Contract) -> Aggregate:
    found = getattr(contract.statistic, "aggregate", None)
    n = len(contract.underlyings)
    return found if isinstance(found, Aggregate) else Aggregate.weighted_sum((1.0 / n,) * n)
