"""Correlations of which some pairs are not known: numbers that leave the known ones as they are, if any do.

A trade that holds an unknown pair is refused; the pair still needs a number, for a matrix is checked and repaired as a
whole, and a poor one would move correlations that other trades do hold.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from pricer.market.correlation import SMALLEST_EIGENVALUE

#: Eigenvalues that a completion aims for; a matrix that is known in full may have smaller ones.
_AIM = 1e-6
_MAX_STEPS = 2_000


def completed(matrix: NDArray[np.float64]) -> NDArray[np.float64]:
    """``matrix`` (n, n), symmetric with unit diagonal and NaN where unknown, with a number in every place.

    The known entries are never changed. The others come from projecting in turn on the matrices with positive
    eigenvalues and on those with the known entries (von Neumann 1950), which meets where the two do. If they do
    not, the known entries contradict each other, and a repair of the result moves these and not the others.
    """
    known = ~np.isnan(matrix)
    out = np.where(known, matrix, 0.0)
    if known.all():
        return out
    for _ in range(_MAX_STEPS):
        values, vectors = np.linalg.eigh(out)
        if values[0] >= SMALLEST_EIGENVALUE:
            break
        nearest = (vectors * np.maximum(values, _AIM)) @ vectors.T
        nearest = np.clip(0.5 * (nearest + nearest.T), -1.0, 1.0)
        step = np.where(known, matrix, nearest)
        if np.abs(step - out).max() < 1e-12:
            break
        out = step
    return out
