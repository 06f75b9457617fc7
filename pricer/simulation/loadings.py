"""Splitting a covariance: a common factor to integrate exactly, and loadings for the rest."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

#: Directions with less than this part of the variance before splitting are left out.
_NEGLIGIBLE = 1e-11

#: A common factor with less than this part of the largest deviation is not worth splitting
#: off: densities over it would be so narrow that a first sample may miss them altogether.
_NARROW = 3e-3

#: Principal components kept in front of a triangular remainder.
_LEADING = 16


def common_deviations(covariance: NDArray[np.float64], groups: NDArray[np.bool_]) -> NDArray[np.float64]:
    """For each group the largest c for which ``covariance - c^2 1 1'`` stays positive semi-definite, or 0.

    ``groups`` (m, n): ``1`` has ones at a group's members and zeros elsewhere, c (m,) is the
    deviation of a factor that moves all members' log-levels equally and no other. c^2 = 1 /
    (1' covariance^-1 1) where 1 lies in the range of ``covariance`` (the matrix determinant
    lemma), else 0. 0 too where c is too small to be of use, or a group has no members.
    """
    deviations = np.sqrt(np.diag(covariance))
    out = np.zeros(len(groups))
    live = deviations > 0.0
    possible = np.any(groups, axis=1) & ~np.any(groups & ~live, axis=1)
    if not np.any(possible):
        return out
    s = deviations[live]
    targets = np.where(groups[possible][:, live], 1.0 / s, 0.0)  # (m, n)
    values, vectors = np.linalg.eigh(covariance[np.ix_(live, live)] / np.outer(s, s))
    inside = values > len(s) * 1e-13
    parts = targets @ vectors
    outside = np.linalg.norm(parts[:, ~inside], axis=1)
    lost = outside > 1e-6 * np.linalg.norm(targets, axis=1)
    inverse = np.where(lost, np.inf, np.sum(parts[:, inside] ** 2 / values[inside], axis=1))
    c = 1.0 / np.sqrt(inverse)
    out[possible] = np.where(c > _NARROW * float(np.max(s)), c, 0.0)
    return out


def common_to_all(covariances: NDArray[np.float64]) -> NDArray[np.float64]:
    """:func:`common_deviations` for everyone together, of many covariances (m, n, n) at once: (m,)."""
    deviations = np.sqrt(np.diagonal(covariances, axis1=1, axis2=2))
    out = np.zeros(len(covariances))
    live = np.all(deviations > 0.0, axis=1)
    s = deviations[live]
    values, vectors = np.linalg.eigh(covariances[live] / (s[:, :, None] * s[:, None, :]))
    inside = values > s.shape[1] * 1e-13
    targets = 1.0 / s
    squares = np.einsum("ti,tij->tj", targets, vectors) ** 2
    outside = np.sqrt(np.where(inside, 0.0, squares).sum(axis=1))
    lost = outside > 1e-6 * np.linalg.norm(targets, axis=1)
    inverse = np.where(inside, squares / np.where(inside, values, 1.0), 0.0).sum(axis=1)
    c = 1.0 / np.sqrt(np.where(lost, np.inf, inverse))
    out[live] = np.where(c > _NARROW * s.max(axis=1), c, 0.0)
    return out


def principal_components(
    covariance: NDArray[np.float64], importance: NDArray[np.float64], variances: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Loadings (n, rank) with ``loadings @ loadings.T = covariance``, most important first.

    ``variances`` (n,) are those before a common factor was split off; what is negligible
    beside them gets no direction.

    The components are those of the log-levels times ``importance`` (n,) > 0 (each asset's
    share of the aggregate), which serves an aggregate better than the bare covariance. After
    the first 16 the rest is triangular: low-discrepancy points gain nothing
    from its rotation, and a triangle costs half.
    """
    scaled = covariance * np.outer(importance, importance)
    values, vectors = np.linalg.eigh(scaled)
    values, vectors = values[::-1], vectors[:, ::-1]
    kept = values > _NEGLIGIBLE * float(np.max(variances * importance**2))
    if not np.any(kept):
        return np.zeros((covariance.shape[0], 0))
    full = vectors[:, kept] * np.sqrt(values[kept])
    # the sign of an eigenvector is arbitrary: fix it
    full *= np.where(full[np.argmax(np.abs(full), axis=0), np.arange(full.shape[1])] < 0.0, -1.0, 1.0)
    if full.shape[1] > _LEADING + 8:
        front = full[:, :_LEADING]
        rest = full[:, _LEADING:]
        full = np.hstack([front, cholesky(rest @ rest.T, variances * importance**2)])
    out: NDArray[np.float64] = full / importance[:, None]
    return out


def cholesky(covariance: NDArray[np.float64], variances: NDArray[np.float64]) -> NDArray[np.float64]:
    """Lower triangular loadings (n, rank) of a positive semi-definite covariance.

    Assets that are combinations of earlier ones get no direction of their own. ``variances``
    as in ``principal_components``.
    """
    left = covariance.copy()
    floor = _NEGLIGIBLE * float(np.max(variances))
    columns = []
    for i in range(left.shape[0]):
        if left[i, i] <= floor:
            continue
        column = np.zeros(left.shape[0])
        column[i:] = left[i:, i] / np.sqrt(left[i, i])
        columns.append(column)
        left[i:, i:] -= np.outer(column[i:], column[i:])
    if not columns:
        return np.zeros((covariance.shape[0], 0))
    return np.stack(columns, axis=1)
