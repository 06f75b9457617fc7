"""A contract's legs, and what their stops tell of its life."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from pricer.engines.model_value import Chance, Life
from pricer.engines.paths.leg import Leg, Payment, Reading

Array = NDArray[np.float64]


class StoppedLeg(Protocol):
    """Where paths leave a leg: what a sampler hands back, as :class:`pricer.engines.paths.sample.LegSample`."""

    @property
    def dates(self) -> NDArray[np.int64]:
        """Places of the leg's events among the dates, (n_events,)."""

    @property
    def above(self) -> Array:
        """Probabilities of being stopped above at each event, (n_events,)."""

    @property
    def above_errors(self) -> Array: ...

    @property
    def below(self) -> Array: ...

    @property
    def below_errors(self) -> Array: ...

    @property
    def life(self) -> float:
        """Expected years until it is stopped or ends, with its error."""

    @property
    def life_error(self) -> float: ...


@dataclass(frozen=True, slots=True)
class Stop:
    """Paths that leave leg number ``leg`` at date ``date``, ``above`` or below: ``what`` happens to the contract."""

    leg: int
    date: int
    above: bool
    what: str


@dataclass(frozen=True, slots=True)
class NotAsLegs:
    """Legs cannot say what the contract pays, for this reason."""

    reason: str


@dataclass(frozen=True, slots=True)
class ContractLegs:
    """What one unit pays from tonight on, but for amounts already decided, as legs on prices.

    ``legs`` : their dates are places among the dates to come of the terms, readings are on prices over the
    references written in them, discount factors those of the payment days. The contract's own life is that of
    leg 0. ``ends`` : its stops that end the contract. ``hits`` : stops whose chances add up to that of a barrier
    being hit before the contract ends; None where that cannot be told from stops. ``has_barrier`` tells whether
    there is one, ``already_hit`` that one was.
    """

    legs: tuple[Leg, ...]
    ends: tuple[Stop, ...]
    hits: tuple[Stop, ...] | None
    has_barrier: bool
    already_hit: bool

    @property
    def readings(self) -> tuple[Reading, ...]:
        """Every reading of the legs, each once."""
        found = dict.fromkeys(
            reading for leg in self.legs for event in leg.events for reading in _readings(event.payments)
        )
        for leg in self.legs:
            for event in leg.events:
                triggers = [event.above, event.below, event.coupon.trigger if event.coupon else None]
                found.update(dict.fromkeys(trigger.reading for trigger in triggers if trigger is not None))
                if event.fixing is not None:
                    found[event.fixing.reading] = None
        return tuple(found)

    @property
    def has_signed_weights(self) -> bool:
        """Whether a reading has weights below 0, which need another engine than one common factor."""
        return any(min(reading.aggregate.weights) < 0.0 for reading in self.readings)

    def life_of(self, sampled: Sequence[StoppedLeg], dates: Sequence[date]) -> Life:
        """From where paths left each leg."""
        ends = tuple(Chance(dates[stop.date], stop.what, *_chance(sampled, stop)) for stop in self.ends)
        knocked, knocked_error = self._knocked(sampled)
        return Life(sampled[0].life, sampled[0].life_error, ends, knocked, knocked_error)

    def _knocked(self, sampled: Sequence[StoppedLeg]) -> tuple[float | None, float]:
        if self.already_hit:
            return 1.0, 0.0
        if not self.has_barrier:
            return None, 0.0
        if self.hits is None:
            return float("nan"), float("nan")
        chances = [_chance(sampled, stop) for stop in self.hits]
        return sum(chance for chance, _ in chances), self._error_of_hits(sampled)

    def _error_of_hits(self, sampled: Sequence[StoppedLeg]) -> float:
        """Of the sum: as sampled where hits are all the stops of a side, else as if all erred together."""
        assert self.hits is not None
        total = 0.0
        for number, above in {(stop.leg, stop.above) for stop in self.hits}:
            own = [stop for stop in self.hits if (stop.leg, stop.above) == (number, above)]
            events = self.legs[number].events
            whole = sum((event.above if above else event.below) is not None for event in events) == len(own)
            leg = sampled[number]
            known = getattr(leg, "stopped_above_error" if above else "stopped_below_error", np.nan)  # not all tell
            apart = sum(_chance(sampled, stop)[1] for stop in own)
            total += known if whole and not np.isnan(known) else apart
        return total


def _chance(sampled: Sequence[StoppedLeg], stop: Stop) -> tuple[float, float]:
    leg = sampled[stop.leg]
    (place,) = np.nonzero(leg.dates == stop.date)[0]
    if stop.above:
        return float(leg.above[place]), float(leg.above_errors[place])
    return float(leg.below[place]), float(leg.below_errors[place])


def _readings(payments: Sequence[Payment]) -> list[Reading]:
    return [payment.reading for payment in payments if payment.reading is not None]
