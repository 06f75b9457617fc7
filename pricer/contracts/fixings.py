"""Fixings: the official levels of past observation days, and why one is missing."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from datetime import date

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True, slots=True)
class Fixing:
    """The official level of an underlying, or of a currency pair such as "USDEUR", on a day.

    ``level`` is None where there is none; ``reason`` then says why ("market disruption").
    """

    underlying: str
    day: date
    level: float | None
    reason: str = ""

    def __post_init__(self) -> None:
        if self.level is not None and not (math.isfinite(self.level) and self.level > 0.0):
            raise ValueError(
                f"the fixing of {self.underlying} on {self.day} must be a number above 0; got {self.level}"
            )


@dataclass(frozen=True, slots=True)
class Fixings:
    """All fixings, by underlying and day; the order in which they came does not matter."""

    levels: Mapping[str, Mapping[date, float]] = field(default_factory=dict)
    reasons: Mapping[tuple[str, date], str] = field(default_factory=dict)

    @classmethod
    def from_rows(cls, rows: Iterable[Fixing]) -> Fixings:
        """From the rows of a table; raises ValueError where two rows give a day different levels."""
        levels: dict[str, dict[date, float]] = {}
        reasons: dict[tuple[str, date], str] = {}
        for row in rows:
            if row.level is None:
                reasons[row.underlying, row.day] = row.reason
                continue
            earlier = levels.setdefault(row.underlying, {}).setdefault(row.day, row.level)
            if earlier != row.level:
                low, high = sorted((earlier, row.level))
                raise ValueError(f"the fixing of {row.underlying} on {row.day} is given as {low} and as {high}")
        return cls(levels, {key: reason for key, reason in reasons.items() if key[1] not in levels.get(key[0], {})})

    def level(self, name: str, day: date) -> float | None:
        """The level of an underlying, or of a currency pair that is fixed either way round; None if missing."""
        found = self.levels.get(name, {}).get(day)
        if found is None and name not in self.levels and len(name) == 6:
            inverse = self.levels.get(name[3:] + name[:3], {}).get(day)
            return None if inverse is None else 1.0 / inverse
        return found

    def matrix(self, names: Iterable[str], days: Iterable[date]) -> NDArray[np.float64]:
        """Levels (n_days, n_names); NaN where there is none."""
        days = tuple(days)
        columns = [[self.level(name, day) for day in days] for name in names]
        return np.array(columns, dtype=float).reshape(len(columns), len(days)).T

    def reason(self, name: str, day: date) -> str:
        """Why the level is missing, if anybody said so; else empty."""
        return self.reasons.get((name, day), "")
