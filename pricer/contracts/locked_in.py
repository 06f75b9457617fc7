"""Selections locked in over time: on each date one underlying's level is kept, and the underlying leaves."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.observation import in_order


@dataclass(frozen=True, slots=True)
class Selection:
    """The underlying at ``index`` left with ``level``."""

    index: int
    level: float


@dataclass(frozen=True, slots=True)
class LockedIn:
    """The mean of the levels locked in; on each date the ``rank``-th best of those left, 1 the best.

    Once fewer are left than ``rank``, the worst of them is taken. Equal levels leave in the
    order of the underlyings. Its state are the selections so far. (Levels recorded without
    anybody leaving are an :class:`~pricer.contracts.average.Average` of the aggregate.)
    """

    schedule: tuple[date, ...]
    n_underlyings: int
    rank: int = 1

    def __post_init__(self) -> None:
        if not 1 <= len(in_order(self.schedule, "selection dates")) <= self.n_underlyings:
            raise ValueError(f"{self.n_underlyings} underlyings cannot be selected on {len(self.schedule)} dates")
        if not 1 <= self.rank <= self.n_underlyings:
            raise ValueError(f"rank must lie between 1 and {self.n_underlyings}; got {self.rank}")

    @property
    def label(self) -> str:
        return "locked-in"

    @property
    def dates(self) -> tuple[date, ...]:
        return self.schedule

    def measure(self, levels: NDArray[np.float64]) -> NDArray[np.float64]:
        if levels.shape[-1] != self.n_underlyings:
            raise ValueError(f"{self.n_underlyings} underlyings were announced, {levels.shape[-1]} came")
        return levels

    def start(self) -> tuple[Selection, ...]:
        return ()

    def needs(self, state: tuple[Selection, ...], day: date) -> bool:
        return True

    def observe(self, state: tuple[Selection, ...], day: date, measured: Sequence[float]) -> tuple[Selection, ...]:
        gone = {selection.index for selection in state}
        left = sorted((i for i in range(self.n_underlyings) if i not in gone), key=lambda i: -measured[i])
        chosen = left[min(self.rank, len(left)) - 1]
        return (*state, Selection(chosen, measured[chosen]))

    def value(self, state: tuple[Selection, ...]) -> float:
        if len(state) < len(self.schedule):
            raise ValueError(f"{len(state)} of {len(self.schedule)} selections are made")
        return sum(selection.level for selection in state) / len(state)
