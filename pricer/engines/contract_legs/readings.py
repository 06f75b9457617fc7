"""Aggregates of levels as readings of prices, and triggers as stops."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date

import numpy as np

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.contract import Contract
from pricer.contracts.trigger import Direction
from pricer.contracts.trigger import Trigger as ContractTrigger
from pricer.engines.contract_legs.unsayable import UnsayableError
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.paths.leg import Reading, Trigger


@dataclass(frozen=True, slots=True)
class Bound:
    """A trigger that stops a leg: above its level, or below it."""

    above: bool
    trigger: Trigger


@dataclass(frozen=True, slots=True)
class Readings:
    """Levels are prices over ``references``, times those of the date ``since`` if given; dates by their places."""

    places: dict[date, int]
    references: tuple[float, ...]
    since: int | None

    @classmethod
    def of(cls, terms: ContractTerms, contract: Contract) -> Readings:
        """``contract`` : what is left of that of ``terms``. Raises UnsayableError if several dates set references."""
        places = {day: place for place, day in enumerate(terms.dates)}
        if contract.levels.references is not None:
            return cls(places, contract.levels.references, None)
        setting = contract.levels.setting_dates
        if len(setting) > 1:
            raise UnsayableError("references are the mean of several prices, some of them still to come")
        return cls(places, (1.0,) * len(contract.underlyings), places[setting[0]])

    def is_setting(self, day: date) -> bool:
        """Whether references are set on that very day, so that all levels are 1."""
        return self.since is not None and self.places[day] == self.since

    def reading(self, aggregate: Aggregate, scales: tuple[float, ...] | None = None) -> Reading:
        """Of the levels over ``scales``; the aggregate's cash left out."""
        plain = Aggregate(aggregate.kind, aggregate.weights)
        return Reading(plain, _product(self.references, scales), self.since)

    def performance(self, aggregate: Aggregate, since: date | None, starts: tuple[float, ...] | None) -> Reading:
        """Of prices over those of the day ``since``, or over known levels ``starts``."""
        plain = Aggregate(aggregate.kind, aggregate.weights)
        if starts is not None:
            return Reading(plain, _product(self.references, starts))
        assert since is not None
        return Reading(plain, (1.0,) * len(self.references), self.places[since])

    def bound(
        self, trigger: ContractTrigger, day: date, level: float, scales: tuple[float, ...] | None = None
    ) -> Bound | bool:
        """Where ``trigger`` is met on ``day``; True or False where that is certain.

        ``scales`` divide the levels besides the trigger's own.
        """
        cash, up = trigger.aggregate.cash, trigger.direction is Direction.UP
        if self.is_setting(day):
            (measured,) = trigger.measure(np.ones(len(self.references)))
            return trigger.met(float(measured), level)
        if cash is not None:
            # The best of levels and cash is beyond a level up where either is, and down where both are.
            either = (trigger.aggregate.kind is AggregateKind.BEST_OF) is up
            if trigger.met(cash, level) is either:
                return either
        if level <= 0.0 and min(trigger.aggregate.weights) >= 0.0:
            return up
        reading = self.reading(trigger.aggregate, _product(trigger.scales or (1.0,) * len(self.references), scales))
        return Bound(up, Trigger(reading, level))

    @property
    def always(self) -> Bound:
        """A stop that every path meets."""
        n = len(self.references)
        return Bound(True, Trigger(Reading(Aggregate.best_of(n), (1.0,) * n), 0.0))


def _product(first: tuple[float, ...], second: tuple[float, ...] | None) -> tuple[float, ...]:
    return first if second is None else tuple(a * b for a, b in zip(first, second, strict=True))
