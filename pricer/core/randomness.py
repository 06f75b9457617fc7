"""Random streams that depend on what they are for, not on who asks first.

A stream is keyed by the run's seed, a digest of the pricing group's name, the
purpose and a block number. Reordering a book, pricing one group alone or adding
workers therefore changes no draw.
"""

from __future__ import annotations

import hashlib
from enum import IntEnum

import numpy as np


class Purpose(IntEnum):
    """What a stream is used for; streams of different purposes are independent."""

    PRICE = 1
    FIT = 2
    CERTIFY = 3
    CHECK = 4  # a second sample that shares nothing with the first


def stream(seed: int, group: str, purpose: Purpose, block: int) -> np.random.Generator:
    """A generator for one block of one pricing group.

    ``seed`` is the run's seed (>= 0), ``group`` the trade's or netting set's id,
    ``block`` counts blocks of paths from 0.
    """
    digest = hashlib.sha256(group.encode("utf-8")).digest()
    words = tuple(int.from_bytes(digest[i : i + 4], "little") for i in range(0, 16, 4))
    key = (*words, int(purpose), block)
    return np.random.Generator(np.random.PCG64(np.random.SeedSequence(seed, spawn_key=key)))
