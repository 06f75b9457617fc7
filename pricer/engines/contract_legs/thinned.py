"""Legs on few of their dates, whose small difference to the whole of them takes few paths.

A barrier seen on hundreds of dates costs as much per date as a coupon. Seen on some of them only, and moved by what
Broadie, Glasserman & Kou (1997) say that the dates left out do, it gives nearly the same value on most
paths. So the value is that of the few dates, drawn often and cheaply, and the mean of the difference between the two,
drawn on the same paths (two levels of Giles 2008). No error is left by the approximation: the
difference is sampled, not neglected.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from pricer.engines.closed_form.barrier import OVERSHOOT
from pricer.engines.paths.algebra import times
from pricer.engines.paths.law import PathLaw
from pricer.engines.paths.leg import Event, Fixing, Leg, Payment, Reading, Remembered, Trigger
from pricer.engines.paths.plan import PathProblem

#: Dates of which a leg stops and does nothing else are thinned where there are more of them than this.
_MANY = 60
#: About so many of them are left.
_LEFT = 36


@dataclass(frozen=True, slots=True)
class TwoLevels:
    """``coarse`` on the ``kept`` dates, and ``difference`` on all, whose first legs are the whole ones.

    ``is_same`` : whether a leg of the few dates is the whole one.
    """

    coarse: PathProblem
    difference: PathProblem
    kept: tuple[int, ...]
    is_same: tuple[bool, ...]


def two_levels(problem: PathProblem) -> TwoLevels | None:
    """None where there are few dates on which nothing happens but a stop."""
    law = problem.law
    busy = _busy_dates(problem.legs)
    idle = [date for date in range(len(law.times)) if date not in busy]
    if len(idle) < _MANY:
        return None
    step = math.ceil(len(idle) / _LEFT)
    kept = sorted(busy | set(idle[step - 1 :: step]))
    legs = tuple(_thinned(leg, law, kept) for leg in problem.legs)
    places = {date: place for place, date in enumerate(kept)}
    moved = tuple(_on_dates(leg, places) for leg in legs)
    like = problem.drawn_like
    coarse = PathProblem(_law_of(law, kept), moved, None if like is None else _law_of(like, kept))
    whole = (*problem.legs, *(times(-1.0, _with_negative_coupons(leg)) for leg in legs))
    is_same = tuple(len(leg.events) == len(thinned.events) for leg, thinned in zip(problem.legs, legs, strict=True))
    return TwoLevels(coarse, PathProblem(law, whole, like), tuple(kept), is_same)


def _busy_dates(legs: Sequence[Leg]) -> set[int]:
    """Dates on which something is paid, fixed or remembered, or that others refer to."""
    found: set[int] = set()
    for leg in legs:
        found.add(leg.events[-1].date)
        for event in leg.events:
            if event.payments or event.fixing is not None or event.coupon is not None:
                found.add(event.date)
            found |= {reading.since for reading in _readings(event) if reading.since is not None}
    return found


def _readings(event: Event) -> list[Reading]:
    triggers = [event.above, event.below, event.coupon.trigger if event.coupon else None]
    found = [trigger.reading for trigger in triggers if trigger is not None]
    return found + [payment.reading for payment in event.payments if payment.reading is not None]


def _thinned(leg: Leg, law: PathLaw, kept: Sequence[int]) -> Leg:
    """The leg on ``kept`` dates, stops moved towards tonight's level for those between that are left out."""
    own = {event.date: event for event in leg.events}
    deviations = np.sqrt(np.diagonal(law.covariances, axis1=1, axis2=2)).mean(axis=1)
    events, last = [], -1
    for date in kept:
        left_out = [own[d] for d in range(last + 1, date) if d in own]
        step = float(np.sqrt((deviations[last + 1 : date + 1] ** 2).sum()))
        last = date
        if date not in own:
            continue
        event, apart = own[date], step - float(deviations[date])
        events.append(
            replace(
                event,
                above=_moved(event.above, -apart) if any(e.above for e in left_out) else event.above,
                below=_moved(event.below, apart) if any(e.below for e in left_out) else event.below,
            )
        )
    return replace(leg, events=tuple(events))


def _moved(trigger: Trigger | None, deviation: float) -> Trigger | None:
    return None if trigger is None else replace(trigger, level=trigger.level * math.exp(OVERSHOOT * deviation))


def _law_of(law: PathLaw, kept: Sequence[int]) -> PathLaw:
    total = np.cumsum(law.covariances, axis=0)[list(kept)]
    steps = np.diff(total, axis=0, prepend=np.zeros((1, law.n_assets, law.n_assets)))
    return PathLaw(law.times[list(kept)], law.forwards[list(kept)], steps)


def _with_negative_coupons(leg: Leg) -> Leg:
    """Coupons in memory with the other sign, which ``times`` leaves as they are."""
    events = (
        event if event.coupon is None else replace(event, coupon=replace(event.coupon, amount=-event.coupon.amount))
        for event in leg.events
    )
    return replace(leg, events=tuple(events))


def _on_dates(leg: Leg, places: dict[int, int]) -> Leg:
    """The same events, their dates counted among fewer."""

    def reading(old: Reading) -> Reading:
        return old if old.since is None else replace(old, since=places[old.since])

    def trigger(old: Trigger | None) -> Trigger | None:
        return None if old is None else replace(old, reading=reading(old.reading))

    def payment(old: Payment) -> Payment:
        return old if old.reading is None else replace(old, reading=reading(old.reading))

    def fixing(old: Fixing | None) -> Fixing | None:
        return None if old is None else replace(old, reading=reading(old.reading))

    def coupon(old: Remembered | None) -> Remembered | None:
        return None if old is None else replace(old, trigger=Trigger(reading(old.trigger.reading), old.trigger.level))

    events = tuple(
        Event(
            places[event.date],
            trigger(event.above),
            trigger(event.below),
            tuple(map(payment, event.payments)),
            fixing(event.fixing),
            coupon(event.coupon),
        )
        for event in leg.events
    )
    return replace(leg, events=events)
