"""Coupons: fixed, conditional, with memory, and accrued over the days in a range."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from datetime import date

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.feature import Appointment, Payout, Step
from pricer.contracts.observation import Payment, in_order
from pricer.contracts.trigger import Direction, Trigger


@dataclass(frozen=True, slots=True)
class Coupon:
    """``amount`` per unit, decided on ``day``.

    ``level`` is the trigger's; None for a coupon that is paid whatever happens. With
    ``accrual_dates`` the amount times the share of these days that meet the trigger is paid;
    ``ceiling`` is the other end of the range then (None: open).
    """

    day: date
    payment_date: date
    amount: float
    level: float | None = None
    accrual_dates: tuple[date, ...] = ()
    ceiling: float | None = None

    def __post_init__(self) -> None:
        in_order(self.accrual_dates, "accrual dates")
        if self.payment_date < self.day:
            raise ValueError(f"the coupon decided on {self.day} is paid on {self.payment_date}, before that")
        if self.accrual_dates and (self.level is None or self.accrual_dates[-1] > self.day):
            raise ValueError(f"the accrual of the coupon of {self.day} needs a level, and days up to that date")
        if self.ceiling is not None and not self.accrual_dates:
            raise ValueError("only an accrual has a ceiling")


@dataclass(frozen=True, slots=True)
class CouponState:
    """Coupons decided so far, the sum of missed amounts in memory, and days in the range of the current period."""

    decided: int = 0
    memory: float = 0.0
    days_in_range: int = 0
    days_seen: int = 0


@dataclass(frozen=True, slots=True)
class Coupons:
    """Coupons in the order of their dates; those with a level compare ``trigger`` with it.

    With ``memory`` a coupon that is paid brings all that were missed before it.
    """

    coupons: tuple[Coupon, ...]
    trigger: Trigger | None = None
    memory: bool = False

    def __post_init__(self) -> None:
        in_order((coupon.day for coupon in self.coupons), "coupons")
        in_order((day for coupon in self.coupons for day in coupon.accrual_dates), "accrual dates")
        last = date.min
        for coupon in self.coupons:
            if coupon.accrual_dates and coupon.accrual_dates[0] <= last:
                raise ValueError(f"the accrual of the coupon of {coupon.day} starts before the coupon before it ends")
            last = coupon.day
        if self.trigger is None and any(coupon.level is not None for coupon in self.coupons):
            raise ValueError("coupons with a level need a trigger")
        if any(c.ceiling is not None for c in self.coupons) and self.trigger and self.trigger.direction != Direction.UP:
            raise ValueError("a range is given from its lower end: its trigger looks up")
        if self.memory and any(coupon.accrual_dates for coupon in self.coupons):
            raise ValueError("accrued coupons have no memory")

    @property
    def label(self) -> str:
        if any(coupon.accrual_dates for coupon in self.coupons):
            return "range accrual"
        return "memory coupon" if self.memory else "coupon"

    @property
    def dates(self) -> tuple[date, ...]:
        return tuple(sorted({day for coupon in self.coupons for day in (coupon.day, *coupon.accrual_dates)}))

    def measure(self, levels: NDArray[np.float64]) -> NDArray[np.float64]:
        return np.zeros((*levels.shape[:-1], 1)) if self.trigger is None else self.trigger.measure(levels)

    def start(self) -> CouponState:
        return CouponState()

    def needs(self, state: CouponState, day: date) -> bool:
        coupon = next(coupon for coupon in self.coupons[state.decided :] if day <= coupon.day)
        return coupon.level is not None and (not coupon.accrual_dates or day in coupon.accrual_dates)

    def observe(self, state: CouponState, day: date, measured: Sequence[float]) -> Step[CouponState]:
        coupon = self.coupons[state.decided]
        met = self._met(coupon, measured[0])
        if coupon.accrual_dates:
            seen, within = state.days_seen, state.days_in_range
            if seen < len(coupon.accrual_dates) and coupon.accrual_dates[seen] == day:
                seen, within = seen + 1, within + met
            if day != coupon.day:
                return Step(CouponState(state.decided, 0.0, within, seen))
            amount = coupon.amount * within / len(coupon.accrual_dates)
            return Step(CouponState(state.decided + 1), (Payment(coupon.payment_date, amount, "coupon", day),))
        if not met:
            return Step(CouponState(state.decided + 1, state.memory + coupon.amount if self.memory else 0.0))
        payment = Payment(coupon.payment_date, coupon.amount + state.memory, "coupon", day)
        return Step(CouponState(state.decided + 1), (payment,))

    def payout_instead(self, state: CouponState) -> Payout | None:
        return None

    def appointments(self, state: CouponState) -> Iterator[Appointment]:
        memory = state.memory
        for coupon in self.coupons[state.decided :]:
            trigger = None if coupon.level is None or coupon.accrual_dates else self.trigger
            level = None if trigger is None else coupon.level
            for day in coupon.accrual_dates:
                yield Appointment(day, "accrual", trigger=self.trigger, level=coupon.level)
            # The amount in memory is what the next coupon brings; later ones depend on what happens until then.
            yield Appointment(coupon.day, "coupon", coupon.payment_date, coupon.amount + memory, trigger, level)

    def _met(self, coupon: Coupon, measured: float) -> bool:
        if coupon.level is None or self.trigger is None:
            return True
        below = coupon.ceiling is None or Trigger(Direction.DOWN, self.trigger.aggregate).met(measured, coupon.ceiling)
        return below and self.trigger.met(measured, coupon.level)
