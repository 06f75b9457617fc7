"""The times at which paths are simulated: every observation date, and steps between them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]

#: Times nearer than this part of the whole are one.
_SAME = 1e-9

#: A last interval of at most this part of the whole needs no shorter ending: measured, bias is no larger without, and
#: a longer last step smooths more.
_ALONE = 0.35


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
    def of(
        cls,
        dates: ArrayLike,
        *,
        steps: int,
        kinks: ArrayLike = (),
        least: int = 2,
        cuts: int = 1,
        ending: float = 1.0,
        every: bool = False,
    ) -> TimeGrid:
        """About ``steps`` steps up to the last date, dealt out to the intervals between dates and kinks.

        ``kinks`` : times at which coefficients jump; those before the last date end a step, too: a scheme that steps
        over a jump loses an order. Each interval gets steps of equal length, at least ``least``, in proportion
        to its share of the root of time: smiles flatten with the root of time, so early
        intervals need shorter steps. Their number is a multiple of ``2**cuts``, so that pairs can be joined as
        often. The last ``2**cuts`` of all are ``ending`` times as long as their neighbours, of which there then are
        as many at least; in a short last interval no shorter than if there were no other, and all of it where it
        is about a third of the whole or less. With ``every``, so are those before each date. Raises ValueError
        unless dates increase from above 0 and ``steps`` is positive.
        """
        days = np.atleast_1d(np.asarray(dates, dtype=float))
        if days.ndim != 1 or not len(days) or not np.all(np.diff(days, prepend=0.0) > 0.0) or not np.isfinite(days[-1]):
            raise ValueError(f"dates must be finite, above 0 and increase; got {days.tolist()}")
        if steps < 1:
            raise ValueError(f"at least one step is needed; got {steps}")
        marks = np.asarray(kinks, dtype=float)
        near = np.min(np.abs(np.subtract.outer(marks, days)), axis=1, initial=np.inf) <= _SAME * days[-1]
        inner = marks[(marks > _SAME * days[-1]) & (marks < days[-1]) & ~near]
        ends = np.unique(np.concatenate([[0.0], inner, days]))
        together = 2**cuts
        shares = np.diff(np.sqrt(ends)) / np.sqrt(ends[-1])
        counts = np.maximum(np.round(steps * shares / together), -(-least // together)).astype(np.int64)
        places = np.searchsorted(ends[1:], days)
        whole = ends[1:]
        intervals = np.diff(ends)
        shortened = places if every else places[-1:]
        if ending != 1.0:
            alone = intervals[shortened] <= _ALONE * whole[shortened]
            counts[shortened] = np.maximum(counts[shortened], np.where(alone, 1, 2))
        lengths = [np.ones(m) for m in counts]
        for place in shortened:
            if counts[place] == 2:  # no shorter than it would be were there no kinks
                share = ending / (1.0 + ending) * max(whole[place] / intervals[place], 1.0)
                lengths[place][-1] = max(min(share / (1.0 - share), 1.0), ending) if share < 1.0 else 1.0
            elif counts[place] > 2:
                lengths[place][-1] = ending
        counts *= together
        lengths = [np.repeat(length, together) for length in lengths]
        parts = [np.cumsum(length) / length.sum() for length in lengths]
        pieces = [a + (b - a) * part for a, b, part in zip(ends[:-1], ends[1:], parts, strict=True)]
        return cls(np.concatenate([[0.0], *pieces]), np.cumsum(counts)[places])

    @classmethod
    def with_ending(cls, years: float, ending: float, *, cuts: int = 1) -> TimeGrid:
        """A last step of ``ending`` years, before it ``cuts`` that double what is left: the rest is one step.

        Where all but the last step is exact at any length: the last two can be joined ``cuts`` times.
        """
        left = ending * 2.0 ** np.arange(cuts, -1, -1)
        return cls(np.concatenate([[0.0], years - left, [years]]), np.array([cuts + 2]))

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
