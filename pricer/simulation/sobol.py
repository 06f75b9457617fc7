"""Scrambled Sobol points: direction numbers, random words, and a plain NumPy twin of the kernel.

Scrambling is Matousek's (1998) random linear scramble with a digital shift, which keeps the
net's equidistribution and has the variance of Owen's full scrambling (Owen 2003).
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

#: Direction numbers per dimension: sequences may have up to 2^24 points.
BITS = 24

#: Random words drawn per dimension: the scrambling matrix's columns that direction numbers meet,
#: and one digital shift.
WORDS = BITS + 1

_SIZES = (32, 128, 512, 1799)  # QuantLib fills further dimensions at random


def directions(dimensions: int) -> NDArray[np.uint32]:
    """Direction numbers of Joe & Kuo (2008, criterion D(6)), (dimensions, BITS), highest bit first.

    Read out of QuantLib's generator through its points: in Gray-code order, points
    2^b - 1 and 2^b differ by direction number b.
    """
    for size in _SIZES:
        if dimensions <= size:
            return _directions(size)[:dimensions].copy()
    raise ValueError(f"{dimensions} dimensions; at most {_SIZES[-1]} can be sampled")


def extended_directions(dimensions: int) -> NDArray[np.uint32]:
    """As ``directions``, for any number of dimensions.

    Beyond the table they are drawn at random, once and for all: every coordinate is then as
    evenly spread as in the table, and pairs of coordinates are no better than independent
    points. The last coordinates of a path matter little.
    """
    table = directions(min(dimensions, _SIZES[-1]))
    missing = dimensions - len(table)
    if missing <= 0:
        return table
    draws = np.random.Generator(np.random.PCG64(_SIZES[-1])).integers(0, 2**32, (missing, BITS), dtype=np.uint32)
    lowest = np.uint32(1) << np.arange(31, 31 - BITS, -1, dtype=np.uint32)
    return np.vstack([table, (draws & ~(lowest - np.uint32(1))) | lowest])


@lru_cache(maxsize=len(_SIZES))
def _directions(dimensions: int) -> NDArray[np.uint32]:
    import QuantLib as ql  # noqa: N813 - slow to import, needed once

    sobol = ql.SobolRsg(dimensions, 0, ql.SobolRsg.JoeKuoD6)
    out = np.empty((dimensions, BITS), dtype=np.uint32)
    out[:, 0] = sobol.nextInt32Sequence()  # QuantLib leaves out point 0
    before = out[:, 0]
    for b in range(1, BITS):
        if b > 1:
            sobol.skipTo(2**b - 3)
            before = np.array(sobol.nextInt32Sequence(), dtype=np.uint32)
        after = np.array(sobol.nextInt32Sequence(), dtype=np.uint32)
        out[:, b] = before ^ after
    lowest = np.uint32(1) << np.arange(31, 31 - BITS, -1, dtype=np.uint32)
    if not np.all(out & (2 * lowest - np.uint32(1)) == lowest):
        raise RuntimeError("QuantLib numbers its Sobol points differently from what this version expects")
    out.flags.writeable = False
    return out


def random_words(stream: np.random.Generator, randomisations: int, dimensions: int) -> NDArray[np.uint32]:
    """The scrambles of all randomisations, (randomisations, dimensions, WORDS)."""
    return stream.integers(0, 2**32, size=(randomisations, dimensions, WORDS), dtype=np.uint32)


def scrambled_columns(direction_numbers: NDArray[np.uint32], words: NDArray[np.uint32]) -> NDArray[np.uint32]:
    """Direction numbers (dimensions, BITS) times each dimension's random lower triangular matrix.

    ``words`` (dimensions, WORDS): word c holds column c below its unit diagonal.
    """
    out = np.zeros_like(direction_numbers)
    for c in range(BITS):
        top = np.uint32(1 << (31 - c))
        column = (words[:, c] & (top - np.uint32(1))) | top
        bit = (direction_numbers >> np.uint32(31 - c)) & np.uint32(1)
        out ^= bit * column[:, None]
    return out


def scrambled_points(
    direction_numbers: NDArray[np.uint32], words: NDArray[np.uint32], first: int, last: int
) -> NDArray[np.uint32]:
    """Points ``first`` to ``last`` in natural order as 32-bit fractions, (dimensions, last - first)."""
    columns = scrambled_columns(direction_numbers, words)
    index = np.arange(first, last, dtype=np.uint64)
    out = np.repeat(words[:, BITS : BITS + 1], last - first, axis=1)
    for b in range(columns.shape[1]):
        bit = ((index >> np.uint64(b)) & np.uint64(1)).astype(np.uint32)
        out ^= bit[None, :] * columns[:, b : b + 1]
    return out
