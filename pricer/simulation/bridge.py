"""Brownian bridge: the first normals of a path decide where it ends, the last ones the detail.

Low-discrepancy points are best in their first coordinates, so these go to what moves a
path most: (Moskowitz & Caflisch 1996) the end point first, then midpoints of ever shorter
pieces. With several factors a normal's importance is the deviation it adds in time times
the size of its factor; coordinates are dealt out in that order.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Bridge:
    """Moves, in the order they are made: ``W[at] = before W[left] + after W[right] + deviation z``.

    ``at``, ``left``, ``right`` : (n_steps,) places in the times after 0; -1 stands for time 0 in
    ``left``, and for "none" in ``right`` (the end point). ``before``, ``after``, ``deviation`` : (n_steps,).
    """

    at: NDArray[np.int64]
    left: NDArray[np.int64]
    right: NDArray[np.int64]
    before: Array
    after: Array
    deviation: Array

    @classmethod
    def over(cls, times: Array) -> Bridge:
        """Of Brownian motion at ``times`` (n_steps + 1,), from 0, increasing."""
        return cls.through(times, np.array([len(times) - 1]))

    @classmethod
    def through(cls, times: Array, dates: NDArray[np.int64]) -> Bridge:
        """The same, all ``dates`` (places in ``times``, increasing, the last one last) before what lies between."""
        stops = [0, *(int(date) for date in dates)]
        ending = float(np.sqrt(times[stops[-1]]))
        moves = [(stops[-1], 0, -1, 0.0, 0.0, ending)]
        gaps = [(0, len(stops) - 1)]
        for lo, hi in gaps:  # grows while it is read: breadth first
            if hi - lo > 1:
                mid = (lo + hi) // 2
                moves.append(_move(times, stops[lo], stops[mid], stops[hi]))
                gaps += [(lo, mid), (mid, hi)]
        gaps = list(pairwise(stops))
        for lo, hi in gaps:
            if hi - lo > 1:
                mid = (lo + hi) // 2
                moves.append(_move(times, lo, mid, hi))
                gaps += [(lo, mid), (mid, hi)]
        at, left_at, right_at = (np.array([move[k] for move in moves], dtype=np.int64) for k in range(3))
        before, after, deviation = (np.array([move[k] for move in moves]) for k in range(3, 6))
        return cls(at - 1, left_at - 1, np.where(right_at < 0, -1, right_at - 1), before, after, deviation)

    def coordinates(self, sizes: Array, weights: Array | None = None) -> NDArray[np.int64]:
        """Which coordinate drives each time and factor, (n_steps, n_factors), most important first.

        ``sizes`` : (n_factors,) >= 0, how far each factor moves the aggregate. ``weights`` : (n_steps,) what a
        move of each time counts; None for the same everywhere.
        """
        importance = np.zeros((len(self.at), len(sizes)))
        importance[self.at] = self.deviation[:, None] * sizes
        if weights is not None:
            importance *= weights[:, None]
        turn = np.zeros(importance.shape, dtype=np.int64)  # ties go to the earlier move, not the earlier time
        turn[self.at] = np.arange(turn.size).reshape(turn.shape)
        order = np.lexsort((turn.ravel(), -importance.ravel().round(12)))
        out = np.empty(order.size, dtype=np.int64)
        out[order] = np.arange(order.size)
        return out.reshape(importance.shape)

    def walk(self, normals: Array) -> Array:
        """Brownian motion at the times after 0 from ``normals``, both (n_steps, ...): row t drives time t."""
        out = np.array(normals, dtype=float)
        for at, left, right, before, after, deviation in zip(
            self.at, self.left, self.right, self.before, self.after, self.deviation, strict=True
        ):
            out[at] *= deviation
            if left >= 0:
                out[at] += before * out[left]
            if right >= 0:
                out[at] += after * out[right]
        return out


def _move(times: Array, lo: int, mid: int, hi: int) -> tuple[int, int, int, float, float, float]:
    """The law of Brownian motion at ``mid`` given those at ``lo`` and ``hi``."""
    span, done, left = times[hi] - times[lo], times[mid] - times[lo], times[hi] - times[mid]
    return mid, lo, hi, left / span, done / span, float(np.sqrt(done * left / span))
