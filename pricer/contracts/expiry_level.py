"""The plainest statistic: the aggregate on one day."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import Aggregate


@dataclass(frozen=True, slots=True)
class ExpiryLevel:
    """The aggregate of the levels on ``day``; its state is that number, None before."""

    day: date
    aggregate: Aggregate

    @property
    def label(self) -> str:
        return ""

    @property
    def dates(self) -> tuple[date, ...]:
        return (self.day,)

    def measure(self, levels: NDArray[np.float64]) -> NDArray[np.float64]:
        return self.aggregate(levels)[..., np.newaxis]

    def start(self) -> float | None:
        return None

    def needs(self, state: float | None, day: date) -> bool:
        return True

    def observe(self, state: float | None, day: date, measured: Sequence[float]) -> float | None:
        return measured[0]

    def value(self, state: float | None) -> float:
        if state is None:
            raise ValueError(f"the level of {self.day} is not known yet")
        return state
