"""Triggers: what is compared with a barrier, a call or a coupon level, and when it is met."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import TIE


class Direction(StrEnum):
    """On which side of its level a trigger is met."""

    UP = "up"
    DOWN = "down"


@dataclass(frozen=True, slots=True)
class Trigger:
    """Met when the aggregate of a day's levels is beyond a level, on the side of ``direction``.

    A condition on *any* or on *every* underlying is one on the best or the worst of them (see
    the constructors), so that engines meet nothing but aggregates. ``scales`` divides each level
    first: barrier prices that differ by underlying, compared with the level 1.
    ``at_level_counts`` says whether a level exactly met counts (up: "at or above").
    """

    direction: Direction
    aggregate: Aggregate
    scales: tuple[float, ...] | None = None
    at_level_counts: bool = True

    def __post_init__(self) -> None:
        if self.scales is not None and (len(self.scales) != len(self.aggregate.weights) or min(self.scales) <= 0.0):
            raise ValueError(f"a trigger needs one scale above 0 per underlying; got {self.scales}")

    @classmethod
    def any_underlying(cls, direction: Direction, n: int, scales: tuple[float, ...] | None = None) -> Trigger:
        """Met as soon as one of ``n`` underlyings is beyond."""
        best = direction is Direction.UP
        return cls(direction, Aggregate.best_of(n) if best else Aggregate.worst_of(n), scales)

    @classmethod
    def every_underlying(cls, direction: Direction, n: int, scales: tuple[float, ...] | None = None) -> Trigger:
        """Met when all ``n`` underlyings are beyond."""
        best = direction is Direction.DOWN
        return cls(direction, Aggregate.best_of(n) if best else Aggregate.worst_of(n), scales)

    def measure(self, levels: NDArray[np.float64]) -> NDArray[np.float64]:
        """What is compared, of levels (..., n_assets): an array (..., 1)."""
        scaled = levels if self.scales is None else levels / np.array(self.scales)
        return self.aggregate(scaled)[..., np.newaxis]

    def met(self, measured: float, level: float) -> bool:
        """Whether a known measured number meets ``level``; apart by rounding only, it is at the level."""
        gap = measured - level if self.direction is Direction.UP else level - measured
        tolerance = TIE * max(abs(measured), abs(level))
        return gap >= -tolerance if self.at_level_counts else gap > tolerance
