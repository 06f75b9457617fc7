"""Cliquets: a sum of periods' performances, each limited on its own."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.feature import Payout
from pricer.contracts.known_level import paid_at
from pricer.contracts.observation import in_order


@dataclass(frozen=True, slots=True)
class PerformanceState:
    """Levels at the period's start (None before the first date) and the sum of the periods that ended."""

    period_start: tuple[float, ...] | None = None
    total: float = 0.0
    periods: int = 0


@dataclass(frozen=True, slots=True)
class PerformanceSum:
    """The sum of ``local`` over the periods between ``schedule``'s dates.

    ``local`` is paid on the aggregate of the underlyings' performances *within the period*
    (1.0 = unchanged): a forward with strike 1, a floor and a cap for the usual cliquet.
    """

    schedule: tuple[date, ...]
    aggregate: Aggregate
    local: Payout

    def __post_init__(self) -> None:
        if len(in_order(self.schedule, "reset dates")) < 2:
            raise ValueError("a sum of performances needs at least two dates")

    @property
    def label(self) -> str:
        return "cliquet"

    @property
    def dates(self) -> tuple[date, ...]:
        return self.schedule

    def measure(self, levels: NDArray[np.float64]) -> NDArray[np.float64]:
        return levels

    def start(self) -> PerformanceState:
        return PerformanceState()

    def needs(self, state: PerformanceState, day: date) -> bool:
        return True

    def observe(self, state: PerformanceState, day: date, measured: Sequence[float]) -> PerformanceState:
        now = tuple(measured)
        if state.period_start is None:
            return PerformanceState(now)
        performance = float(self.aggregate(np.array(now) / np.array(state.period_start)))
        return PerformanceState(now, state.total + paid_at(self.local, performance), state.periods + 1)

    def value(self, state: PerformanceState) -> float:
        if state.periods < len(self.schedule) - 1:
            raise ValueError(f"{state.periods} of {len(self.schedule) - 1} periods have ended")
        return state.total
