"""Autocallable notes as legs: triggers, fixed and conditional coupons, coupons in memory."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.paths.leg import Event, Leg, Payment, Reading, Remembered, Trigger, When


@dataclass(frozen=True, slots=True)
class Observation:
    """One observation date of a note, amounts per unit of notional.

    The note is redeemed at ``redemption`` where the reading is above ``trigger`` (None: not callable). ``coupon`` is
    paid to whoever holds the note on that date, called or not, where the reading is above ``coupon_level`` (None:
    always).
    """

    date: int
    discount_factor: float
    trigger: float | None = None
    redemption: float = 1.0
    coupon_level: float | None = None
    coupon: float = 0.0


def autocallable(
    observations: Sequence[Observation],
    reading: Reading,
    final: PiecewiseLinear,
    *,
    memory: bool = False,
    missed: float = 0.0,
) -> Leg:
    """A note that pays ``final`` of the reading on the last date unless it has been called.

    With ``memory`` a coupon missed is paid with the next one that is not; ``missed`` is what has been missed so far.
    """
    last = len(observations) - 1
    events = []
    for place, seen in enumerate(observations):
        payments = []
        remembered = None
        if seen.trigger is not None:
            payments.append(Payment.fixed(seen.redemption, seen.discount_factor, When.STOPPED_ABOVE))
        if memory:
            remembered = _remembered(seen, reading, missed if place == 0 else 0.0)
        elif seen.coupon != 0.0:
            payments.append(_coupon(seen, reading))
        if place == last:
            payments.append(Payment(final, seen.discount_factor, When.SURVIVING, reading))
        above = None if seen.trigger is None else Trigger(reading, seen.trigger)
        events.append(Event(seen.date, above, None, tuple(payments), coupon=remembered))
    return Leg(tuple(events))


def _coupon(seen: Observation, reading: Reading) -> Payment:
    if seen.coupon_level is None:
        return Payment.fixed(seen.coupon, seen.discount_factor, When.ALIVE)
    digital = PiecewiseLinear(0.0, 0.0, (seen.coupon_level,), (0.0,), (seen.coupon,))
    return Payment(digital, seen.discount_factor, When.ALIVE, reading)


def _remembered(seen: Observation, reading: Reading, missed: float) -> Remembered:
    if seen.coupon_level is None:
        raise ValueError(f"date {seen.date}: a coupon that is always paid needs no memory")
    return Remembered(Trigger(reading, seen.coupon_level), seen.coupon + missed, seen.discount_factor)
