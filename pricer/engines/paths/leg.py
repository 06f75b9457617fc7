"""Legs: what is observed, what stops a leg, and what is paid, date by date.

A path-dependent product is a sum of legs. An autocallable is one leg that the call trigger
stops; a put knocked in daily is a put less one that the knock-in level stops; memory coupons
are part of a leg's events.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear


class When(StrEnum):
    """On which paths a payment is made."""

    ALIVE = "alive before the date's stop"
    SURVIVING = "alive after it"
    STOPPED_ABOVE = "stopped above at this date"
    STOPPED_BELOW = "stopped below at this date"


@dataclass(frozen=True, slots=True)
class Reading:
    """An aggregate of levels over ``references`` (n,), times the levels at the date ``since`` where one is given.

    Weights may have any sign here; an engine whose common factor must scale all of a reading takes one sign only.
    """

    aggregate: Aggregate
    references: tuple[float, ...]
    since: int | None = None

    def __post_init__(self) -> None:
        weights = self.aggregate.weights
        if self.aggregate.cash is not None:
            raise ValueError("fold the cash level into the payoff first")
        if len(self.references) != len(weights) or min(self.references) <= 0.0:
            raise ValueError(f"{len(weights)} references above 0 are needed; got {self.references}")
        if not any(weights):
            raise ValueError(f"a reading needs a weight other than 0; got {weights}")


@dataclass(frozen=True, slots=True)
class Trigger:
    """The level of a reading that stops a leg; 0 or less is always below."""

    reading: Reading
    level: float


@dataclass(frozen=True, slots=True)
class Payment:
    """``payoff`` of a reading, in the payment currency at the payment date, for all paths in ``when``.

    ``reading`` None: the payoff's intercept. ``averaged``: the payoff is one of the leg's running sum, this
    date's fixing included.
    """

    payoff: PiecewiseLinear
    discount_factor: float
    when: When
    reading: Reading | None = None
    averaged: bool = False

    @classmethod
    def fixed(cls, amount: float, discount_factor: float, when: When) -> Payment:
        return cls(PiecewiseLinear(amount, 0.0), discount_factor, when)


@dataclass(frozen=True, slots=True)
class Fixing:
    """``share`` times a reading is added to the leg's running sum."""

    reading: Reading
    share: float


@dataclass(frozen=True, slots=True)
class Remembered:
    """A coupon that is paid, with all that its leg has missed, to whoever is alive where a reading is above a level.

    ``amount`` is what the period adds; ``discount_factor`` that of the payment on this date.
    """

    trigger: Trigger
    amount: float
    discount_factor: float


@dataclass(frozen=True, slots=True)
class Event:
    """One date of a leg, by its place among the dates of the law.

    Where both stops are crossed the one above counts.
    """

    date: int
    above: Trigger | None = None
    below: Trigger | None = None
    payments: tuple[Payment, ...] = ()
    fixing: Fixing | None = None
    coupon: Remembered | None = None


@dataclass(frozen=True, slots=True)
class Branch:
    """A leg that follows leg number ``leg`` up to ``date``, and goes its own way from that date's event on."""

    leg: int
    date: int


@dataclass(frozen=True, slots=True)
class Leg:
    """Events in order of their dates. ``sum_so_far``: fixings of the past, their shares included."""

    events: tuple[Event, ...]
    sum_so_far: float = 0.0
    branch: Branch | None = None

    def __post_init__(self) -> None:
        dates = [event.date for event in self.events]
        if not dates or dates != sorted(set(dates)) or dates[0] < 0:
            raise ValueError(f"a leg needs events on increasing dates; got {dates}")
        if self.branch is not None and self.branch.date > dates[0]:
            raise ValueError(f"a branch at date {self.branch.date} has an event at date {dates[0]} already")
        for event in self.events:
            for payment in event.payments:
                if payment.averaged and (event.fixing is None or payment.reading != event.fixing.reading):
                    raise ValueError(f"date {event.date}: a payment on the running sum needs a fixing of its reading")
