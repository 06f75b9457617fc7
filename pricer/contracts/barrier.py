"""Knock-in and knock-out barriers."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from datetime import date
from enum import StrEnum

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.feature import Appointment, Ending, Payout, Step
from pricer.contracts.observation import Observation, Payment, in_order
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Trigger

NOTHING = Redemption(capital=0.0)


class BarrierKind(StrEnum):
    """What a hit does to the contract's payout."""

    IN = "knock-in"  # brings it into force
    OUT = "knock-out"  # takes it out of force


@dataclass(frozen=True, slots=True)
class BarrierState:
    """``hit_on`` is the day of the first hit, None while there was none; ``seen`` observations have passed."""

    seen: int = 0
    hit_on: date | None = None


@dataclass(frozen=True, slots=True)
class Barrier:
    """The payout is in force only after (in), or only without (out), a hit of ``trigger`` on the schedule.

    ``levels`` has one barrier per observation. ``instead`` is paid at expiry while the payout is
    not in force: a rebate, or the redemption of a note that was never knocked in. A knock-out
    with a ``rebate_at_hit`` (which may be 0) ends the contract instead and pays it on the hit's own
    payment date. ``continuous`` says that a touch between the observations counts too, which
    fixings cannot show: give it every business day. ``recorded_hit`` and ``clear_until`` are the desk's
    own records: a known hit, on an observation or between two, with its payment date, and the
    day up to which it is known that there was none.
    """

    kind: BarrierKind
    trigger: Trigger
    schedule: tuple[Observation, ...]
    levels: tuple[float, ...]
    instead: Payout = NOTHING
    rebate_at_hit: float | None = None
    continuous: bool = False
    recorded_hit: Observation | None = None
    clear_until: date | None = None

    def __post_init__(self) -> None:
        in_order((observation.day for observation in self.schedule), self.label)
        if not self.schedule or len(self.schedule) != len(self.levels):
            raise ValueError(f"a barrier needs one level per observation; got {len(self.levels)} levels")
        if self.rebate_at_hit is not None and self.kind is BarrierKind.IN:
            raise ValueError("only a knock-out pays a rebate at hit")
        hit = self.recorded_hit
        if hit is not None and not self.schedule[0].day <= hit.day <= self.schedule[-1].day:
            raise ValueError(f"a hit on {hit.day}, when the barrier was not watched")
        if hit is not None and self.clear_until is not None and hit.day <= self.clear_until:
            raise ValueError(f"a barrier hit on {hit.day} was not clear until {self.clear_until}")

    @property
    def label(self) -> str:
        return str(self.kind)

    @property
    def dates(self) -> tuple[date, ...]:
        days = {observation.day for observation in self.schedule}
        return tuple(sorted(days if self.recorded_hit is None else days | {self.recorded_hit.day}))

    def measure(self, levels: NDArray[np.float64]) -> NDArray[np.float64]:
        return self.trigger.measure(levels)

    def start(self) -> BarrierState:
        return BarrierState()

    def needs(self, state: BarrierState, day: date) -> bool:
        if state.hit_on is not None or (self.clear_until is not None and day <= self.clear_until):
            return False
        return self.recorded_hit is None or day < self.recorded_hit.day

    def observe(self, state: BarrierState, day: date, measured: Sequence[float]) -> Step[BarrierState]:
        scheduled = state.seen < len(self.schedule) and self.schedule[state.seen].day == day
        seen = state.seen + scheduled
        if state.hit_on is not None:
            return Step(BarrierState(seen, state.hit_on))
        if self.recorded_hit is not None and day == self.recorded_hit.day:
            paid = self.recorded_hit.payment_date
        elif self.needs(state, day) and self.trigger.met(measured[0], self.levels[state.seen]):
            paid = self.schedule[state.seen].payment_date
        else:
            return Step(BarrierState(seen))
        if self.rebate_at_hit is None:
            return Step(BarrierState(seen, day))
        return Step(BarrierState(seen, day), (Payment(paid, self.rebate_at_hit, "rebate", day),), Ending.KNOCKED_OUT)

    def payout_instead(self, state: BarrierState) -> Payout | None:
        in_force = (state.hit_on is not None) is (self.kind is BarrierKind.IN)
        return None if in_force else self.instead

    def appointments(self, state: BarrierState) -> Iterator[Appointment]:
        if state.hit_on is not None:
            return
        for observation, level in list(zip(self.schedule, self.levels, strict=True))[state.seen :]:
            payment_date = None if self.rebate_at_hit is None else observation.payment_date
            yield Appointment(observation.day, self.label, payment_date, self.rebate_at_hit, self.trigger, level)
