"""Statistics and features that have no code for many paths at once: their own rules, path by path; right, and slow."""

from __future__ import annotations

from datetime import date
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.feature import Ending, Feature, Statistic
from pricer.contracts.known_level import paid_at
from pricer.engines.contract_walk.ledger import Ledger

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


class AnyStatistic:
    """A statistic, asked for every path."""

    def __init__(self, statistic: Statistic[Any], state: Any) -> None:
        self._statistic, self._first = statistic, state
        self._states: list[Any] = []

    def observe(self, day: date, levels: Array) -> None:
        measured = self._statistic.measure(levels.T).tolist()
        states = self._states or [self._first] * len(measured)
        pairs = zip(states, measured, strict=True)
        self._states = [self._statistic.observe(state, day, numbers) for state, numbers in pairs]

    def value(self, paths: int) -> Array:
        states = self._states or [self._first] * paths
        return np.array([self._statistic.value(state) for state in states])


class AnyFeature:
    """A feature, asked for every path."""

    def __init__(self, feature: Feature[Any], state: Any, paths: int) -> None:
        self._feature, self._states = feature, [state] * paths
        self.ending = Ending.EXPIRED

    def observe(self, day: date, place: int, levels: Array, alive: Mask, ledger: Ledger) -> Mask | None:
        measured = self._feature.measure(levels.T).tolist()
        amounts: dict[date, Array] = {}
        ended = np.zeros(len(alive), dtype=bool)
        for path in np.flatnonzero(alive).tolist():
            step = self._feature.observe(self._states[path], day, measured[path])
            self._states[path] = step.state
            for payment in step.payments:
                amounts.setdefault(payment.payment_date, np.zeros(len(alive)))[path] += payment.amount
            if step.ending is not None:
                ended[path], self.ending = True, step.ending
        for payment_date, amount in amounts.items():
            ledger.pay(day, payment_date, amount, alive)
        return ended

    def replaced(self, payoff: Array, level: Array) -> Array:
        out = payoff.copy()
        for path, state in enumerate(self._states):
            instead = self._feature.payout_instead(state)
            if instead is not None:
                out[path] = paid_at(instead, float(level[path]))
        return out

    def hit(self) -> Mask | None:
        return None
