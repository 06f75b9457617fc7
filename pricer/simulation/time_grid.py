"""The times at which paths are simulated: every observation date, and steps between them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class TimeGrid:
    """Steps from 0 to the last date; every date ends a step.

    ``times`` : (n_steps + 1,) years, from 0, increasing. ``dates`` : (n_dates,) number of steps
    done at each date; the last is ``n_steps``.
    """

    times: Array
    dates: NDArray[np.int64]

    @property
    def n_steps(self) -> int:
        return len(self.times) - 1

    @property
    def lengths(self) -> Array:
        """Length of each step, (n_steps,)."""
        return np.diff(self.times)

    @classmethod
    def of(cls, dates: ArrayLike, *, steps: int, least: int = 2, ending: float = 1.0, every: bool = False) -> TimeGrid:
        """About ``steps`` steps up to the last date, dealt out to the intervals between dates.

        Each interval gets an even number of steps of equal length, at least ``least``, in proportion
        to its share of the root of time: smiles flatten with the root of time, so early
        intervals need shorter steps. The last two steps of all are ``ending`` times as long as their
        neighbours, where there are any; with ``every``, those before each date. Raises ValueError
        unless dates increase from above 0 and ``steps`` is positive.
        """
        ends = np.concatenate([[0.0], np.atleast_1d(np.asarray(dates, dtype=float))])
        if ends.ndim != 1 or len(ends) < 2 or not np.all(np.diff(ends) > 0.0) or not np.isfinite(ends[-1]):
            raise ValueError(f"dates must be finite, above 0 and increase; got {ends[1:].tolist()}")
        if steps < 1:
            raise ValueError(f"at least one step is needed; got {steps}")
        shares = np.diff(np.sqrt(ends)) / np.sqrt(ends[-1])
        counts = 2 * np.maximum(np.round(0.5 * steps * shares), max(least // 2, 1)).astype(np.int64)
        lengths = [np.ones(m) for m in counts]
        for length in lengths if every else lengths[-1:]:
            length[-2:] = ending
        parts = [np.cumsum(length) / length.sum() for length in lengths]
        pieces = [a + (b - a) * part for a, b, part in zip(ends[:-1], ends[1:], parts, strict=True)]
        return cls(np.concatenate([[0.0], *pieces]), np.cumsum(counts))

    @classmethod
    def with_ending(cls, years: float, ending: float) -> TimeGrid:
        """Three steps, the last two of ``ending`` years each: where all but the last step is exact at any length."""
        return cls(np.array([0.0, years - 2.0 * ending, years - ending, years]), np.array([3]))

    def without_last_cut(self) -> TimeGrid:
        """The last two steps joined. Raises ValueError where a date would be lost."""
        if self.n_steps - 1 in self.dates:
            raise ValueError("a date ends the last step but one")
        times = np.delete(self.times, -2)
        return TimeGrid(times, np.minimum(self.dates, len(times) - 1))

    def halved(self) -> TimeGrid:
        """Every second time: pairs of steps joined. Raises ValueError where a date would be lost."""
        if np.any(self.dates % 2):
            raise ValueError("a date ends an odd step: steps cannot be joined in pairs")
        return TimeGrid(self.times[::2], self.dates // 2)
