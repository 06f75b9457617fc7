"""The answer: an interval, how sure its ends are, and how it came about."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


class Ending(StrEnum):
    """How the search for a narrow interval ended."""

    REACHED = "reached"
    GAP_TOO_WIDE = "the gap stayed wider than asked when the rounds ran out: allow more rounds"
    TOO_NOISY = "standard errors stayed larger than the gap asked when the rounds ran out: allow more rounds"
    KNOWN = "nothing to sample: exercise at once"


@dataclass(frozen=True, slots=True)
class Effort:
    """What the last round used: paths fitted to, fresh paths certified on, inner successors of each a date, basis."""

    rounds: int
    fit_paths: int
    fit_inner: int
    fresh_paths: int
    fresh_inner: int
    degree: int
    basis: int


@dataclass(frozen=True, slots=True)
class DateDiagnostics:
    """One exercise date. Errors are root mean squares of the continuation value in time-0 money; 0 at the last.

    ``held_out_error`` is on paths kept from the fit, where deeply exercised states count less; ``fresh_error`` on the
    certifying paths, all alike, what the rule earns less the martingale as its target. ``probability_error`` is
    the standard error of the exercise probability.
    """

    time: float
    exercise_probability: float
    held_out_error: float
    fresh_error: float
    probability_error: float = 0.0


@dataclass(frozen=True, slots=True)
class EarlyExerciseValue:
    """Per unit, in time-0 money. ``lower`` and ``upper`` bound the value on the exercise dates given.

    Each bound has the standard error of its estimate, from independent randomisations; ``gap_error`` is that of
    ``upper - lower``, far smaller, as both come from the same paths. ``value`` is the middle.
    ``expected_life`` : years under the fitted rule until exercise or the last date. ``gain`` : what the rule earns
    for who decides over the same with the rights of some dates alone, 0 where the problem marks none.
    """

    lower: float
    upper: float
    lower_error: float
    upper_error: float
    gap_error: float
    ending: Ending
    effort: Effort | None
    dates: tuple[DateDiagnostics, ...]
    expected_life: float = 0.0
    expected_life_error: float = 0.0
    gain: float = 0.0
    gain_error: float = 0.0

    @property
    def value(self) -> float:
        return 0.5 * (self.lower + self.upper)

    @property
    def gap(self) -> float:
        return self.upper - self.lower

    @property
    def relative_gap(self) -> float:
        """Gap over the size of the value; inf for a gap around 0."""
        if self.gap == 0.0:
            return 0.0
        return self.gap / abs(self.value) if self.value else float("inf")

    @property
    def reached(self) -> bool:
        return self.ending in (Ending.REACHED, Ending.KNOWN)

    def interval(self, deviations: float) -> tuple[float, float]:
        """Both ends moved outwards by so many of their standard errors."""
        return self.lower - deviations * self.lower_error, self.upper + deviations * self.upper_error
