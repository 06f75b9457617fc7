"""Randomised Sobol points as Brownian motions by bridge, in double precision and plain NumPy."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from pricer.simulation import sobol
from pricer.simulation.bridge import Bridge

Array = NDArray[np.float64]

#: A clock that stands still over a step goes on by this part of the whole.
_STILL = 1e-12


class Noise:
    """Independent unit Brownian motions on a clock, ``dims`` of them, for several randomisations of Sobol points."""

    def __init__(self, clock: Array, sizes: Array, stream: np.random.Generator, randomisations: int) -> None:
        """``clock`` (n_steps + 1,) from 0, increasing; ``sizes`` (dims,) how far each motion moves the levels."""
        self.clock = clock
        self.dims = len(sizes)
        self.randomisations = randomisations
        self._bridge = Bridge.over(clock)
        coordinates = self._bridge.coordinates(sizes)
        self._shape = coordinates.shape
        self._directions = sobol.extended_directions(max(coordinates.size, 1))[coordinates.ravel()]
        self._words = sobol.random_words(stream, randomisations, coordinates.size)

    @property
    def cells(self) -> int:
        """Normals per path."""
        return int(self._shape[0] * self._shape[1])

    def walks(self, randomisation: int, first: int, count: int) -> Array:
        """Motions at the clock's times after 0, (n_steps, dims, count), of points from ``first`` on.

        Raises ValueError unless ``count`` is a power of two that divides ``first``.
        """
        if count < 1 or count & (count - 1) or first % count:
            raise ValueError(f"points are made in blocks of a power of two; got {count} from {first} on")
        points = _points(self._directions, self._words[randomisation], first, count)
        normals = ndtri((points + 0.5) / 2.0**32)
        return self._bridge.walk(normals.reshape(*self._shape, count))


def clock_of(lengths: Array) -> Array:
    """A clock (n + 1,) from 0 that ticks by ``lengths`` (n,) >= 0, and never stands still; its whole is about 1."""
    whole = float(lengths.sum())
    shares = lengths / whole if whole > 0.0 else np.full(len(lengths), 1.0 / max(len(lengths), 1))
    return np.concatenate([[0.0], np.cumsum(np.maximum(shares, _STILL))])


def _points(directions: NDArray[np.uint32], words: NDArray[np.uint32], first: int, count: int) -> NDArray[np.uint32]:
    """Points as ``sobol.scrambled_points`` makes them, a block by doubling: (dimensions, count)."""
    bits = max((first + count - 1).bit_length(), 1)
    columns = sobol.scrambled_columns(directions[:, :bits], words)
    out = np.empty((len(directions), count), dtype=np.uint32)
    out[:, 0] = words[:, sobol.BITS]
    for b in range(bits):
        if (first >> b) & 1:
            out[:, 0] ^= columns[:, b]
    size = 1
    for b in range(count.bit_length() - 1):
        np.bitwise_xor(out[:, :size], columns[:, b : b + 1], out=out[:, size : 2 * size])
        size *= 2
    return out
