"""What the desk would rather book than a payout that jumps: spreads for digitals, moved barriers and triggers.

Near a jump a hedge asks for more shares than can be traded. Booking a payout that is never better for the desk, and
whose delta is bounded by the spread's width, keeps the hedge tradable; the value given up for it is the cost of the
overhedge. It is common practice, not a reserve that any rule asks for: widths are the desk's own, and whether
their cost belongs in a fair value, a valuation adjustment or neither is for the local rules to decide. It is no
substitute for a limit on the position either, and moves nothing that lies in the past.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from datetime import date
from itertools import product
from typing import Any, TypeVar

import numpy as np

from pricer.contracts.autocall import Autocall
from pricer.contracts.average import Average
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.contract import Contract
from pricer.contracts.coupons import Coupon, Coupons
from pricer.contracts.exercise import Exercise
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.feature import Feature, Payout
from pricer.contracts.option import EuropeanOption
from pricer.contracts.profile import Profile
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction

#: Coupons are spread as a staircase of so many equal steps: an exact ramp is no coupon, and its mean is the same.
STEPS = 3


@dataclass(frozen=True, slots=True)
class Overhedge:
    """How far the desk moves what jumps, as shares of the level at which it does; 0 moves nothing.

    ``digital_spread`` : width over which a jump of a payout or of a coupon is paid, on the desk's safe side.
    ``barrier_shift`` : how far barriers and call triggers are moved. A level of 0 has no share and stays.
    """

    digital_spread: float = 0.0
    barrier_shift: float = 0.0

    def __post_init__(self) -> None:
        for share in (self.digital_spread, self.barrier_shift):
            if not 0.0 <= share < 1.0:
                raise ValueError(f"an overhedge is a share of the level, from 0 to below 1; got {share}")


def overhedged(
    contract: EuropeanOption | Contract, overhedge: Overhedge, *, long: bool, after: date = date.min
) -> tuple[EuropeanOption | Contract, ...]:
    """What the desk would book instead of ``contract``, of which it is ``long`` or short.

    Only what is observed later than ``after``, the valuation date, is moved: what has happened stays as it was. Where
    it is not known in advance which direction is the safe one (a call pays less than the note may be worth, or more)
    there is one contract for either; the desk counts the worse. Jumps of a cliquet's periods and of a writer's
    structural default stay as they are.
    """
    share = overhedge.digital_spread if long else -overhedge.digital_spread
    if isinstance(contract, EuropeanOption):
        return (replace(contract, profile=_ramped(contract.profile, share)),)
    choices = [_choices(contract, i, overhedge, long=long, after=after) for i in range(len(contract.features))]
    payout = _ramped(contract.payout, share)
    found = (
        replace(contract, payout=payout, features=tuple(part for parts in chosen for part in parts))
        for chosen in product(*choices)
    )
    return tuple(dict.fromkeys(found))


_Choices = Sequence[tuple[Feature[Any], ...]]
_L = TypeVar("_L", Autocall, Barrier)


def _choices(contract: Contract, i: int, overhedge: Overhedge, *, long: bool, after: date) -> _Choices:
    """What may stand in the place of feature ``i``; more than one where the safe direction is not known."""
    feature, shift = contract.features[i], overhedge.barrier_shift
    share = overhedge.digital_spread if long else -overhedge.digital_spread
    match feature:
        case Coupons():
            return [_staircase(feature, overhedge.digital_spread, long=long, after=after)]
        case Autocall():
            return [(_with_levels(feature, shift, after=after, sooner=sooner),) for sooner in (True, False)]
        case Barrier():
            spread = replace(feature, instead=_ramped(feature.instead, share))
            return [(_with_levels(spread, shift, after=after, sooner=s),) for s in _safe(contract, i, long=long)]
        case Exercise() if feature.payout is not None:
            return [(replace(feature, payout=_ramped(feature.payout, share)),)]
    return [(feature,)]


def _ramped(payout: Any, share: float) -> Any:
    """The payout with its jumps spread; only profiles jump."""
    return replace(payout, jump_ramp=share) if isinstance(payout, Profile) and any(payout.payoff().jumps) else payout


def _moved(level: float, share: float, direction: Direction, *, sooner: bool) -> float:
    """The level moved to where the trigger is met ``sooner``, or later."""
    down = (direction is Direction.UP) is sooner
    return level - share * abs(level) if down else level + share * abs(level)


def _with_levels(feature: _L, shift: float, *, after: date, sooner: bool) -> _L:
    """The feature with its levels to come moved; a hit on record leaves nothing to move."""
    if isinstance(feature, Barrier) and feature.recorded_hit is not None:
        return feature
    levels = (
        _moved(level, shift, feature.trigger.direction, sooner=sooner) if observation.day > after else level
        for observation, level in zip(feature.schedule, feature.levels, strict=True)
    )
    return replace(feature, levels=tuple(levels))


def _safe(contract: Contract, i: int, *, long: bool) -> tuple[bool, ...]:
    """Whether the barrier of feature ``i`` is to be hit sooner or later for safety; both where that is not known."""
    barrier = contract.features[i]
    assert isinstance(barrier, Barrier)
    lowest = 0.0 if _is_positive(contract) else -np.inf
    others = [contract.payout]
    others += [
        other.instead
        for j, other in enumerate(contract.features)
        if isinstance(other, Barrier) and j != i and other.rebate_at_hit is None
    ]
    if barrier.rebate_at_hit is not None:
        # A hit takes all that is to come: surely a loss to the long side only where that is never below 0.
        nothing = Redemption(capital=0.0)
        is_loss = barrier.rebate_at_hit <= 0.0 and all(_at_least(p, nothing, lowest) for p in _pays(contract, others))
        return (long,) if is_loss else (True, False)
    gains = all(_at_least(other, barrier.instead, lowest) for other in others)
    loses = all(_at_least(barrier.instead, other, lowest) for other in others)
    if gains is loses:
        return (True,) if gains else (True, False)
    hit_gains = gains if barrier.kind is BarrierKind.IN else loses
    return (hit_gains is not long,)


def _pays(contract: Contract, final: Iterable[Payout]) -> Iterable[Payout]:
    """Everything that the contract may pay."""
    yield from final
    for feature in contract.features:
        match feature:
            case Coupons():
                yield from (Redemption(capital=coupon.amount) for coupon in feature.coupons)
            case Autocall():
                yield from (Redemption(capital=amount) for amount in feature.amounts)
            case Exercise():
                yield from (Redemption(capital=amount) for amount in feature.amounts or ())
                if feature.payout is not None:
                    yield feature.payout


def _is_positive(contract: Contract) -> bool:
    """Whether the statistic cannot be negative."""
    statistic = contract.statistic
    return isinstance(statistic, (ExpiryLevel, Average)) and min(statistic.aggregate.weights) >= 0.0


def _at_least(payout: Payout, other: Payout, lowest: float) -> bool:
    """Whether ``payout`` pays at least as much as ``other`` at every level from ``lowest`` on."""
    first, second = payout.payoff(), other.payoff()
    knots = np.array([knot for knot in (*first.knots, *second.knots) if knot >= lowest])
    far = 1e6 * (1.0 + np.max(np.abs(knots), initial=0.0))
    # Straight in between, so the ends of all pieces tell; a jump is paid above its knot.
    points = np.concatenate(([max(lowest, -far)], knots, np.nextafter(knots, np.inf), [far]))
    return bool(np.all(first(points) - second(points) >= -1e-9 * (1.0 + np.abs(points))))


def _staircase(feature: Coupons, width: float, *, long: bool, after: date) -> tuple[Coupons, ...]:
    """Coupons to come whose levels jump, each split into steps on the safe side; the rest as it is.

    With memory, all coupons are split, so that each step remembers its own share.
    """
    trigger = feature.trigger
    if trigger is None or not width:
        return (feature,)
    parts = [part for coupon in feature.coupons for part in _at_day(coupon, after)]
    split = [part for part in parts if _jumps(part, after)]
    if not split:
        return (feature,)
    kept = () if feature.memory else tuple(part for part in parts if not _jumps(part, after))
    stepped = parts if feature.memory else split
    steps = []
    for step in range(STEPS):
        share = width * (step + 0.5) / STEPS
        coupons = (_step(coupon, share, trigger.direction, long=long, after=after) for coupon in stepped)
        steps.append(replace(feature, coupons=tuple(coupons)))
    return ((replace(feature, coupons=kept), *steps)) if kept else tuple(steps)


def _jumps(coupon: Coupon, after: date) -> bool:
    """Whether a trigger that is still to be observed decides on the coupon."""
    days = coupon.accrual_dates or (coupon.day,)
    return coupon.level is not None and days[-1] > after


def _at_day(coupon: Coupon, after: date) -> tuple[Coupon, ...]:
    """A coupon, or the parts of an accrual on both sides of ``after``."""
    days = coupon.accrual_dates
    past, to_come = tuple(day for day in days if day <= after), tuple(day for day in days if day > after)
    if not past or not to_come:
        return (coupon,)
    return tuple(
        replace(coupon, amount=coupon.amount * len(part) / len(days), accrual_dates=part) for part in (past, to_come)
    )


def _step(coupon: Coupon, share: float, direction: Direction, *, long: bool, after: date) -> Coupon:
    """One step of the coupon's staircase: its part of the amount, at a level moved to the safe side."""
    amount = coupon.amount / STEPS
    if coupon.level is None or not _jumps(coupon, after):
        return replace(coupon, amount=amount)
    sooner = long is (coupon.amount < 0.0)
    level = _moved(coupon.level, share, direction, sooner=sooner)
    ceiling = coupon.ceiling
    if ceiling is not None:
        ceiling = _moved(ceiling, share, Direction.DOWN, sooner=sooner)
    return replace(coupon, amount=amount, level=level, ceiling=ceiling)
