"""Probabilities of the multivariate normal law, each with a bound on its error."""

from __future__ import annotations

import math
from itertools import product

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

from pricer.contracts.profile import TIE
from pricer.engines.closed_form import one_factor
from pricer.engines.closed_form.family import Estimate
from pricer.engines.closed_form.normal_lattice import by_lattice
from pricer.engines.closed_form.quadrature import LAYER, RANGE, edges_between, integrate, normal_density

RECURSION_LIMIT = 6  # dimensions up to which the recursive quadrature is quick (milliseconds)

_SAME = 4e-15  # correlations this near to +-1 are +-1 up to rounding
_FAR = 38.0  # normal probabilities beyond are below the smallest double


def cdf(limits: NDArray[np.float64], correlation: NDArray[np.float64]) -> Estimate:
    """``P(X_i <= limits[i] for all i)``; limits (n,) may be infinite, ``correlation`` (n, n) singular."""
    h = np.asarray(limits, dtype=float)
    if np.any(h < -_FAR):
        return Estimate(0.0)
    kept = np.flatnonzero(h < _FAR)
    lower, upper, kept = _merge(h, correlation, kept)
    r = np.ascontiguousarray(correlation[np.ix_(kept, kept)], dtype=float)
    if np.any(lower >= upper):
        return Estimate(0.0)
    two_sided = np.flatnonzero(np.isfinite(lower))
    total = Estimate(0.0)
    for corner in product((False, True), repeat=two_sided.size):
        h = upper.copy()
        down = two_sided[list(corner)]
        h[down] = lower[down]
        total = total + _one_sided(h, r).times((-1.0) ** down.size)
    return Estimate(min(1.0, max(0.0, total.value)), total.error)


def within(
    rows: NDArray[np.float64],
    limits: NDArray[np.float64],
    covariance: NDArray[np.float64],
    strict: NDArray[np.bool_],
) -> Estimate:
    """``P(rows @ x <= limits)`` for ``x`` normal with mean 0; rows (m, n), limits (m,), strict (m,).

    A row without variance is certain: it holds where its limit is above 0, or is 0 up to a
    relative ``TIE`` of the levels (whose logs the rows compare) and the row is not ``strict``.
    """
    between = rows @ covariance @ rows.T
    variance = np.diag(between)
    gross = np.abs(rows) @ np.sqrt(np.diag(covariance))
    certain = variance <= 1e-15 * gross * gross
    if np.any(certain & (limits <= np.where(strict, TIE, -TIE))):
        return Estimate(0.0)
    uncertain = ~certain
    deviation = np.sqrt(variance[uncertain])
    r = between[np.ix_(uncertain, uncertain)] / np.outer(deviation, deviation)
    return cdf(limits[uncertain] / deviation, r)


def _merge(
    h: NDArray[np.float64], correlation: NDArray[np.float64], kept: NDArray[np.intp]
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.intp]]:
    """Fold variables that are equal, or each other's negative, into intervals of one of them."""
    lower: list[float] = []
    upper: list[float] = []
    chosen: list[int] = []
    for i in kept:
        for position, j in enumerate(chosen):
            if correlation[i, j] >= 1.0 - _SAME:
                upper[position] = min(upper[position], float(h[i]))
                break
            if correlation[i, j] <= -1.0 + _SAME:
                lower[position] = max(lower[position], -float(h[i]))
                break
        else:
            chosen.append(int(i))
            lower.append(-math.inf)
            upper.append(float(h[i]))
    return np.array(lower), np.array(upper), np.array(chosen, dtype=np.intp)


def _one_sided(h: NDArray[np.float64], r: NDArray[np.float64]) -> Estimate:
    n = h.size
    if n == 0:
        return Estimate(1.0)
    if n == 1:
        return Estimate(float(ndtr(h[0])), 1e-16)
    if n > 2 and (common := one_factor.loadings(r)) is not None:
        return _by_common_factor(h, common)
    if n <= RECURSION_LIMIT:
        from pricer.engines.closed_form import normal_kernels  # numba is needed only from here on

        value, error = normal_kernels.multivariate(h, r, 1e-10 if n < 5 else 1e-9, 40)
        # The kernel's estimate supposes smooth integrands; nearly singular ones have a kink.
        kinked = n > 2 and float(np.linalg.eigvalsh(r)[0]) < 1e-6
        return Estimate(float(value), (10.0 if kinked else 2.0) * float(error))
    return by_lattice(h, r)


def _by_common_factor(h: NDArray[np.float64], loading: NDArray[np.float64]) -> Estimate:
    """One integral over the common factor (Dunnett & Sobel 1955; Curnow & Dunnett 1962)."""
    own = np.sqrt(np.maximum(1.0 - loading**2, 0.0))
    tied = own < 1e-7
    start, end = -RANGE, RANGE
    for limit, b in zip(h[tied], loading[tied], strict=True):
        if b > 0.0:
            end = min(end, limit / b)
        else:
            start = max(start, limit / b)
    if end <= start:
        return Estimate(0.0)
    slope, level = loading[~tied] / own[~tied], h[~tied] / own[~tied]

    def density(z: NDArray[np.float64]) -> NDArray[np.float64]:
        given = np.prod(ndtr(level - slope * z[:, None]), axis=1)
        return np.asarray(normal_density(z) * given)

    # A loading near 1 makes a step, which needs edges of its own.
    steep = np.abs(slope) > 20.0
    edges = edges_between(start, end, 8, level[steep] / slope[steep], LAYER / np.abs(slope[steep]))
    found = integrate(density, edges, 1e-14)
    return Estimate(found.value, found.error + 1e-15)
