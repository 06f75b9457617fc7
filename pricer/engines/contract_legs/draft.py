"""A leg in the making."""

from __future__ import annotations

from dataclasses import dataclass, field, replace

from pricer.engines.contract_legs.readings import Bound, Readings
from pricer.engines.contract_legs.unsayable import UnsayableError
from pricer.engines.paths.leg import Event, Fixing, Leg, Payment, Remembered, Trigger


@dataclass(frozen=True, slots=True)
class Source:
    """Why a leg stops: the feature's place in the contract, what happens, and whether it is a barrier."""

    feature: int
    what: str
    is_barrier: bool


@dataclass(slots=True)
class DraftLeg:
    """Events by date, to which features add one after the other."""

    readings: Readings
    events: dict[int, Event] = field(default_factory=dict)
    sources: dict[tuple[int, bool], tuple[Source, ...]] = field(default_factory=dict)
    sum_so_far: float = 0.0

    def event(self, date: int) -> Event:
        return self.events.setdefault(date, Event(date))

    def pay(self, date: int, payment: Payment) -> None:
        event = self.event(date)
        self.events[date] = replace(event, payments=(*event.payments, payment))

    def fix(self, date: int, fixing: Fixing) -> None:
        self.events[date] = replace(self.event(date), fixing=fixing)

    def remember(self, date: int, coupon: Remembered) -> None:
        self.events[date] = replace(self.event(date), coupon=coupon)

    def stop(self, date: int, found: Bound | bool, source: Source) -> Bound | None:
        """Add a stop; returns where it is, None where it is never met.

        Two that look the same way on one date must compare the same reading: the nearer one stops.
        """
        if found is False:
            return None
        bound = self.readings.always if found is True else found
        event, key = self.event(date), (date, bound.above)
        there = event.above if bound.above else event.below
        nearest = bound.trigger if there is None or found is True else _nearer(there, bound)
        self.events[date] = replace(event, above=nearest) if bound.above else replace(event, below=nearest)
        self.sources[key] = (*self.sources.get(key, ()), source)
        return bound

    def copy_of_stops(self) -> DraftLeg:
        """Another leg that stops where this one does and pays nothing yet."""
        events = {date: Event(date, event.above, event.below) for date, event in self.events.items() if _stops(event)}
        return DraftLeg(self.readings, events, dict(self.sources))

    @property
    def last_stop(self) -> int:
        """The last date on which it may stop, -1 without any."""
        return max((date for date, _ in self.sources), default=-1)

    def leg(self) -> Leg:
        return Leg(tuple(self.events[date] for date in sorted(self.events)), self.sum_so_far)


def _stops(event: Event) -> bool:
    return event.above is not None or event.below is not None


def _nearer(there: Trigger, new: Bound) -> Trigger:
    if there.level == 0.0 and new.above:
        return there  # every path is stopped already
    if there.reading != new.trigger.reading:
        raise UnsayableError("two different levels are watched on the same side on one day")
    level = min(there.level, new.trigger.level) if new.above else max(there.level, new.trigger.level)
    return Trigger(there.reading, level)
