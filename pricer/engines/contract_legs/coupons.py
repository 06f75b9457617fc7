"""Coupons as payments of legs: fixed, conditional, remembered, accrued."""

from __future__ import annotations

from datetime import date

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.coupons import Coupon, Coupons, CouponState
from pricer.contracts.profile import PiecewiseLinear
from pricer.contracts.trigger import Direction, Trigger
from pricer.engines.contract_legs.draft import DraftLeg
from pricer.engines.contract_legs.readings import Bound, Readings
from pricer.engines.contract_legs.unsayable import UnsayableError
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.paths.leg import Payment, Reading, Remembered, When
from pricer.engines.paths.leg import Trigger as PathTrigger


class CouponWriter:
    """Adds one feature's coupons to a leg; ``enders`` are the features that may end the contract, by date."""

    def __init__(
        self,
        coupons: Coupons,
        state: CouponState,
        number: int,
        terms: ContractTerms,
        places: dict[date, int],
        enders: dict[int, list[int]],
    ) -> None:
        self._coupons, self._state, self._number = coupons, state, number
        self._terms, self._places, self._enders = terms, places, enders

    def add_to(self, draft: DraftLeg) -> None:
        """Raises UnsayableError for what depends on more than the day that decides."""
        to_come = self._coupons.coupons[self._state.decided :]
        for place, coupon in enumerate(to_come):
            carried = self._state.memory if place == 0 else 0.0
            if coupon.accrual_dates:
                self._add_accrual(draft, coupon, self._state.days_in_range if place == 0 else 0)
            elif self._coupons.memory:
                self._add_remembered(draft, coupon, carried)
            else:
                self._add_conditional(draft, coupon, coupon.day, coupon.amount + carried, self._when(coupon.day))

    @property
    def needs_own_leg(self) -> bool:
        """A leg remembers one series of coupons."""
        return self._coupons.memory

    def _when(self, day: date, until: date | None = None) -> When:
        """Which paths get what is decided on ``day`` if the contract is alive on ``until``, the coupon's day."""
        place = self._places[day]
        first = [number < self._number for number in self._enders.get(place, [])]
        if until is not None and until > day:
            end = self._places[until]
            between = any(place < other < end for other in self._enders)
            if between or any(number < self._number for number in self._enders.get(end, [])):
                raise UnsayableError("the contract may end between a day of accrual and its coupon")
            return When.SURVIVING if first else When.ALIVE
        if any(first) and not all(first):
            raise UnsayableError("a coupon is decided between two features that may end the contract that day")
        return When.SURVIVING if any(first) else When.ALIVE

    def _add_conditional(
        self, draft: DraftLeg, coupon: Coupon, day: date, amount: float, when: When, *, below: float | None = None
    ) -> None:
        """``amount`` if the trigger is met on ``day``, and no level above ``below``."""
        place, df = self._places[day], self._terms.discount(coupon.payment_date)
        met = self._bound(draft.readings, day, coupon.level)
        if below is not None and self._coupons.trigger is not None:
            ceiling = Trigger(Direction.DOWN, self._coupons.trigger.aggregate, self._coupons.trigger.scales)
            self._add_range(draft, place, met, draft.readings.bound(ceiling, day, below), amount, df, when)
        elif isinstance(met, Bound):
            draft.pay(place, _digital(met, amount, df, when))
        elif met:
            draft.pay(place, Payment.fixed(amount, df, when))

    def _add_range(
        self,
        draft: DraftLeg,
        place: int,
        floor: Bound | bool,
        ceiling: Bound | bool,
        amount: float,
        df: float,
        when: When,
    ) -> None:
        if floor is False or ceiling is False:
            return
        if isinstance(floor, Bound) and isinstance(ceiling, Bound):
            low, high = floor.trigger.level, ceiling.trigger.level
            if low < high:
                payoff = PiecewiseLinear(0.0, 0.0, (low, high), (0.0, 0.0), (amount, -amount))
                draft.pay(place, Payment(payoff, df, when, floor.trigger.reading))
        elif isinstance(floor, Bound):
            draft.pay(place, _digital(floor, amount, df, when))
        elif isinstance(ceiling, Bound):
            draft.pay(place, _digital(ceiling, amount, df, when))
        else:
            draft.pay(place, Payment.fixed(amount, df, when))

    def _add_accrual(self, draft: DraftLeg, coupon: Coupon, so_far: int) -> None:
        today = self._terms.as_of.valuation_date
        per_day = coupon.amount / len(coupon.accrual_dates)
        if so_far:
            known = Payment.fixed(per_day * so_far, self._terms.discount(coupon.payment_date), self._when(coupon.day))
            draft.pay(self._places[coupon.day], known)
        for day in coupon.accrual_dates:
            if day > today:
                self._add_conditional(draft, coupon, day, per_day, self._when(day, coupon.day), below=coupon.ceiling)

    def _add_remembered(self, draft: DraftLeg, coupon: Coupon, carried: float) -> None:
        if self._when(coupon.day) is When.SURVIVING:
            raise UnsayableError("a coupon in memory is decided after the day's call")
        found = self._bound(draft.readings, coupon.day, coupon.level)
        n = len(draft.readings.references)
        if found is True:
            trigger = draft.readings.always.trigger
        elif found is False:
            trigger = PathTrigger(Reading(Aggregate.best_of(n), (1.0,) * n), 1e300)
        elif found.above:
            trigger = found.trigger
        else:
            raise UnsayableError("a coupon in memory is paid below its level")
        df = self._terms.discount(coupon.payment_date)
        draft.remember(self._places[coupon.day], Remembered(trigger, coupon.amount + carried, df))

    def _bound(self, readings: Readings, day: date, level: float | None) -> Bound | bool:
        trigger = self._coupons.trigger
        return True if level is None or trigger is None else readings.bound(trigger, day, level)


def _digital(bound: Bound, amount: float, discount_factor: float, when: When) -> Payment:
    level, reading = bound.trigger.level, bound.trigger.reading
    if bound.above:
        payoff = PiecewiseLinear(0.0, 0.0, (level,), (0.0,), (amount,))
    else:
        payoff = PiecewiseLinear(amount, 0.0, (level,), (0.0,), (-amount,))
    return Payment(payoff, discount_factor, when, reading)
