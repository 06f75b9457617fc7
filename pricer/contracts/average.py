"""Averaging-out: the mean over several days."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date
from enum import StrEnum

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.observation import in_order


class AverageOf(StrEnum):
    """What is averaged; the same for a weighted sum."""

    UNDERLYINGS = "underlyings"  # each underlying's levels: the aggregate of the means
    AGGREGATE = "aggregate"  # each day's aggregate: the mean of the aggregates


@dataclass(frozen=True, slots=True)
class AverageState:
    """Sums of the ``count`` days seen, of what is averaged."""

    sums: tuple[float, ...]
    count: int = 0


@dataclass(frozen=True, slots=True)
class Average:
    """The equally weighted mean over ``dates``."""

    schedule: tuple[date, ...]
    aggregate: Aggregate
    of: AverageOf = AverageOf.UNDERLYINGS

    def __post_init__(self) -> None:
        if not in_order(self.schedule, "averaging dates"):
            raise ValueError("an average needs at least one date")

    @property
    def label(self) -> str:
        return "average"

    @property
    def dates(self) -> tuple[date, ...]:
        return self.schedule

    def measure(self, levels: NDArray[np.float64]) -> NDArray[np.float64]:
        return levels if self.of is AverageOf.UNDERLYINGS else self.aggregate(levels)[..., np.newaxis]

    def start(self) -> AverageState:
        return AverageState((0.0,) * (len(self.aggregate.weights) if self.of is AverageOf.UNDERLYINGS else 1))

    def needs(self, state: AverageState, day: date) -> bool:
        return True

    def observe(self, state: AverageState, day: date, measured: Sequence[float]) -> AverageState:
        return AverageState(tuple(s + m for s, m in zip(state.sums, measured, strict=True)), state.count + 1)

    def value(self, state: AverageState) -> float:
        if state.count < len(self.schedule):
            raise ValueError(f"{state.count} of {len(self.schedule)} averaging dates are known")
        means = np.array(state.sums) / state.count
        return float(self.aggregate(means)) if self.of is AverageOf.UNDERLYINGS else float(means[0])

    def running_mean(self, state: AverageState) -> tuple[float, ...]:
        """The mean of the days seen, of each underlying or of the aggregate; empty before the first."""
        return tuple(s / state.count for s in state.sums) if state.count else ()
