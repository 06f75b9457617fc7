"""Normal probabilities in many dimensions by randomly shifted lattice points.

The variables are separated one after the other (Genz 1992; Genz & Bretz 2002). The shifts
come from a stream of fixed key, so that a probability is always the same number.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr, ndtri

from pricer.core.randomness import Purpose, stream
from pricer.engines.closed_form.family import Estimate

_SHIFTS = 12
_SHIFT_QUANTILE = 4.0  # standard errors; 99.8 % two-sided for Student's law with 11 degrees
_FEWEST, _MOST = 256, 4096  # points for each shift, within
_WORK = 600_000  # points times shifts times dimensions: some tens of milliseconds


def by_lattice(h: NDArray[np.float64], r: NDArray[np.float64]) -> Estimate:
    """``P(X <= h)`` for correlation ``r`` (n, n), which may be singular, and finite ``h`` (n,)."""
    factor, limits = _ordered_cholesky(h, r)
    n = h.size
    points = max(_FEWEST, min(_MOST, _WORK // (_SHIFTS * n)))
    rng = stream(0, "multivariate normal cdf", Purpose.PRICE, 0)
    shifts = rng.random((_SHIFTS, n - 1))
    generator = np.sqrt(_primes(n - 1))  # Richtmyer's irrational lattice
    steps = np.arange(1, points + 1)[:, None] * generator
    u = np.abs(2.0 * ((steps + shifts[:, None, :]) % 1.0) - 1.0).reshape(-1, n - 1)
    y = np.empty((u.shape[0], n))
    probability = np.ones(u.shape[0])
    for i in range(n):
        distance = limits[i] - y[:, :i] @ factor[i, :i]
        reached = ndtr(distance / factor[i, i]) if factor[i, i] > 0.0 else (distance >= 0.0).astype(float)
        probability *= reached
        if i < n - 1:
            y[:, i] = ndtri(np.clip(u[:, i] * reached, 1e-300, 1.0 - 1e-16))
    means = probability.reshape(_SHIFTS, points).mean(axis=1)
    error = _SHIFT_QUANTILE * float(means.std(ddof=1)) / math.sqrt(_SHIFTS)
    return Estimate(float(means.mean()), error + 1e-15)


def _ordered_cholesky(
    h: NDArray[np.float64], r: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Lower factor and limits with the most restrictive variables first (Gibson, Glasbey & Elston 1994)."""
    n = h.size
    r, h = r.copy(), h.copy()
    factor = np.zeros((n, n))
    expected = np.zeros(n)
    for i in range(n):
        spare = np.maximum(np.diag(r)[i:] - (factor[i:, :i] ** 2).sum(axis=1), 0.0)
        shifted = h[i:] - factor[i:, :i] @ expected[:i]
        safe = np.where(spare > 1e-13, np.sqrt(np.where(spare > 1e-13, spare, 1.0)), 1e-7)
        best = i + int(np.argmin(shifted / safe))
        order = np.arange(n)
        order[[i, best]] = order[[best, i]]
        r, h, factor = r[np.ix_(order, order)], h[order], factor[order]
        pivot = spare[best - i]
        if pivot > 1e-13:
            factor[i, i] = math.sqrt(pivot)
            factor[i + 1 :, i] = (r[i + 1 :, i] - factor[i + 1 :, :i] @ factor[i, :i]) / factor[i, i]
            d = (h[i] - factor[i, :i] @ expected[:i]) / factor[i, i]
            # Mean of a standard normal cut off at d, with its limit far in the tail.
            expected[i] = d if d < -30.0 else -math.exp(-0.5 * d * d) / math.sqrt(2.0 * math.pi) / float(ndtr(d))
    return factor, h


def _primes(count: int) -> NDArray[np.float64]:
    found: list[int] = []
    candidate = 2
    while len(found) < count:
        if all(candidate % p for p in found):
            found.append(candidate)
        candidate += 1
    return np.array(found, dtype=float)
