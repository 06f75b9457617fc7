"""The features of many paths at once, from the state in which tonight finds them."""

from __future__ import annotations

from datetime import date
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.autocall import Autocall
from pricer.contracts.barrier import Barrier, BarrierKind, BarrierState
from pricer.contracts.coupons import Coupon, Coupons, CouponState
from pricer.contracts.exercise import Exercise
from pricer.contracts.feature import Ending, Feature
from pricer.contracts.trigger import Direction, Trigger
from pricer.engines.contract_walk.between_dates import Watch
from pricer.engines.contract_walk.bulk import aggregated, met, paid, read
from pricer.engines.contract_walk.ledger import Ledger
from pricer.engines.contract_walk.one_by_one import AnyFeature

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


class PathFeature(Protocol):
    """Shown the levels (n_assets, n_paths) of its dates to come, in order."""

    ending: Ending

    def observe(self, day: date, place: int, levels: Array, alive: Mask, ledger: Ledger) -> Mask | None:
        """Pays the paths of ``alive`` what they are due; those of them that end here, or None.

        ``place`` is that of ``day`` among all dates to come.
        """

    def replaced(self, payoff: Array, level: Array) -> Array:
        """The final payoff (n_paths,) where this feature leaves it in force; what it puts in its place elsewhere."""

    def hit(self) -> Mask | None:
        """Which paths hit it, (n_paths,); None for a feature that is no barrier."""


def begin(feature: Feature[Any], state: Any, paths: int, watch: Watch | None) -> PathFeature:
    """The feature in ``state``, ready for ``paths``. Raises TypeError for one that cannot be walked."""
    match feature:
        case Coupons():
            return PathCoupons(feature, state)
        case Autocall():
            return PathAutocall(feature, state)
        case Barrier():
            return PathBarrier(feature, state, paths, watch)
        case Exercise() if feature.exercised is not None:
            return PathExercise(feature)
        case Exercise():
            raise TypeError("a walk along given paths cannot tell when a right is best exercised")
    return AnyFeature(feature, state, paths)


class _Plain:
    """A feature that neither changes the final payoff nor has a barrier."""

    ending = Ending.EXPIRED

    def replaced(self, payoff: Array, level: Array) -> Array:
        return payoff

    def hit(self) -> Mask | None:
        return None


class PathCoupons(_Plain):
    """Coupons; which one is next is the same on all paths, memory and days in the range are not."""

    def __init__(self, coupons: Coupons, state: CouponState) -> None:
        self._coupons = coupons
        self._decided, self._seen = state.decided, state.days_seen
        self._memory: Array | float = state.memory
        self._within: Array | float = float(state.days_in_range)

    def observe(self, day: date, place: int, levels: Array, alive: Mask, ledger: Ledger) -> Mask | None:
        coupon = self._coupons.coupons[self._decided]
        if coupon.accrual_dates:
            self._accrue(coupon, day, levels, alive, ledger)
            return None
        self._decided += 1
        if coupon.level is None or self._coupons.trigger is None:
            ledger.pay(day, coupon.payment_date, coupon.amount + self._memory, alive)
            self._memory = 0.0
            return None
        due = met(self._coupons.trigger, read(self._coupons.trigger, levels), coupon.level)
        ledger.pay(day, coupon.payment_date, coupon.amount + self._memory, alive & due)
        if self._coupons.memory:
            self._memory = np.asarray(np.where(due, 0.0, self._memory + coupon.amount), dtype=float)
        return None

    def _accrue(self, coupon: Coupon, day: date, levels: Array, alive: Mask, ledger: Ledger) -> None:
        days = coupon.accrual_dates
        if self._seen < len(days) and days[self._seen] == day:
            self._seen += 1
            self._within = self._within + self._in_range(coupon, levels).astype(float)
        if day == coupon.day:
            ledger.pay(day, coupon.payment_date, coupon.amount * self._within / len(days), alive)
            self._decided, self._seen, self._within = self._decided + 1, 0, 0.0

    def _in_range(self, coupon: Coupon, levels: Array) -> Mask:
        trigger = self._coupons.trigger
        assert trigger is not None and coupon.level is not None  # an accrual has both
        reading = read(trigger, levels)
        inside = met(trigger, reading, coupon.level)
        if coupon.ceiling is not None:
            inside &= met(Trigger(Direction.DOWN, trigger.aggregate), reading, coupon.ceiling)
        return inside


class PathAutocall(_Plain):
    """An early redemption."""

    ending = Ending.CALLED

    def __init__(self, autocall: Autocall, passed: int) -> None:
        self._autocall, self._passed = autocall, passed

    def observe(self, day: date, place: int, levels: Array, alive: Mask, ledger: Ledger) -> Mask | None:
        autocall, k = self._autocall, self._passed
        self._passed += 1
        called = alive & met(autocall.trigger, read(autocall.trigger, levels), autocall.levels[k])
        ledger.pay(day, autocall.schedule[k].payment_date, autocall.amounts[k], called)
        return called


class PathBarrier:
    """A barrier, hit by each path once."""

    ending = Ending.KNOCKED_OUT

    def __init__(self, barrier: Barrier, state: BarrierState, paths: int, watch: Watch | None) -> None:
        self._barrier, self._seen = barrier, state.seen
        self._hit: Mask = np.full(paths, state.hit_on is not None)
        self._known = state.hit_on is not None
        self._watch = watch

    def observe(self, day: date, place: int, levels: Array, alive: Mask, ledger: Ledger) -> Mask | None:
        barrier, k = self._barrier, self._seen
        scheduled = k < len(barrier.schedule) and barrier.schedule[k].day == day
        self._seen += scheduled
        recorded = barrier.recorded_hit
        if self._known:
            return None
        if recorded is not None and day == recorded.day:
            new, paid_on, self._known = ~self._hit, recorded.payment_date, True
        elif barrier.needs(BarrierState(k), day):
            new, paid_on = ~self._hit & self._beyond(place, levels, barrier.levels[k]), barrier.schedule[k].payment_date
        else:
            return None
        new &= alive
        self._hit |= new
        if barrier.rebate_at_hit is None:
            return None
        ledger.pay(day, paid_on, barrier.rebate_at_hit, new)
        return new

    def _beyond(self, place: int, levels: Array, level: float) -> Mask:
        trigger = self._barrier.trigger
        if self._watch is None:
            return met(trigger, read(trigger, levels), level)
        return self._watch.beyond(trigger, place, levels, level)

    def replaced(self, payoff: Array, level: Array) -> Array:
        in_force = self._hit if self._barrier.kind is BarrierKind.IN else ~self._hit
        return np.where(in_force, payoff, paid(self._barrier.instead, level))

    def hit(self) -> Mask | None:
        return self._hit


class PathExercise(_Plain):
    """A right that is known to be used on a day to come."""

    ending = Ending.EXERCISED

    def __init__(self, exercise: Exercise) -> None:
        self._exercise = exercise

    def observe(self, day: date, place: int, levels: Array, alive: Mask, ledger: Ledger) -> Mask | None:
        exercise = self._exercise
        assert exercise.exercised is not None
        if exercise.payout is None:
            assert exercise.amounts is not None
            rights = [i for i, right in enumerate(exercise.rights) if right.day <= day]
            amounts: Array | float = exercise.amounts[rights[-1]]
        else:
            amounts = paid(exercise.payout, aggregated(exercise.aggregate, levels))
        ledger.pay(day, exercise.exercised.payment_date, amounts, alive)
        return alive.copy()
