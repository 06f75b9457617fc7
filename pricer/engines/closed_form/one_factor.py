"""Covariances that come from a single common factor."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

_TOLERANCE = 1e-12


def loadings(covariance: NDArray[np.float64]) -> NDArray[np.float64] | None:
    """Loadings ``b`` (n,) with ``covariance[i, j] = b[i] b[j]`` for i != j, or None.

    ``covariance`` (n, n) may be a correlation matrix. None also where the loadings would
    need more variance than an item has (equal correlations below 0, for one).
    """
    n = covariance.shape[0]
    variance = np.diag(covariance)
    links = covariance - np.diag(variance)
    scale = float(variance.max(initial=0.0))
    strongest = np.abs(links).max(initial=0.0)
    if strongest <= _TOLERANCE * scale:
        return np.zeros(n)
    b = np.zeros(n)
    i = int(np.argmax(np.abs(links).sum(axis=1)))
    others = links.copy()
    others[i, :] = others[:, i] = 0.0
    j, k = divmod(int(np.argmax(np.abs(others) * np.abs(np.outer(links[i], links[i])))), n)
    if others[j, k] == 0.0 or links[i, j] * links[i, k] == 0.0:
        # At most one pair is linked: any split of its covariance will do.
        j = int(np.argmax(np.abs(links[i])))
        rho = links[i, j] / np.sqrt(variance[i] * variance[j])
        b[i] = np.sqrt(variance[i] * abs(rho))
        b[j] = np.sign(rho) * np.sqrt(variance[j] * abs(rho))
    else:
        square = links[i, j] * links[i, k] / others[j, k]
        if not 0.0 < square <= variance[i] * (1.0 + _TOLERANCE):
            return None
        b = links[i] / np.sqrt(square)
        b[i] = np.sqrt(square)
    misfit = np.abs(np.outer(b, b) - np.diag(b * b) - links).max()
    if misfit > _TOLERANCE * scale or np.any(b * b > variance * (1.0 + _TOLERANCE)):
        return None
    return np.asarray(b)
