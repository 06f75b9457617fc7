"""Correlation matrices by id: checked once, repaired where needed, trusted afterwards."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from pricer.market.nearest_correlation import nearest_correlation, with_unit_diagonal

#: Differences between mirrored entries, or of a diagonal entry from 1, up to this size are rounding.
ROUNDING = 1e-10

#: Eigenvalues of a repaired matrix are at least this, so that it has a Cholesky factor.
SMALLEST_EIGENVALUE = 1e-10


@dataclass(frozen=True, slots=True, eq=False)
class CorrelationMatrix:
    """Correlations of log-levels: ``matrix`` (n, n) with rows and columns in the order of ``ids``.

    Made by :func:`checked`: symmetric, unit diagonal, no negative eigenvalue beyond rounding.
    """

    ids: tuple[str, ...]
    matrix: NDArray[np.float64]
    _index: dict[str, int] = field(init=False, repr=False)

    def __post_init__(self) -> None:
        n = len(self.ids)
        if len(set(self.ids)) != n or self.matrix.shape != (n, n):
            raise ValueError(f"{len(set(self.ids))} different ids for a matrix of shape {self.matrix.shape}")
        object.__setattr__(self, "_index", {name: i for i, name in enumerate(self.ids)})
        matrix = self.matrix.copy()
        matrix.setflags(write=False)
        object.__setattr__(self, "matrix", matrix)

    def __contains__(self, name: object) -> bool:
        return name in self._index

    def sub(self, ids: Sequence[str]) -> NDArray[np.float64]:
        """Correlations among ``ids``, in their order: (len(ids), len(ids)). Raises KeyError for an unknown id."""
        missing = [name for name in ids if name not in self._index]
        if missing:
            raise KeyError(f"the correlation matrix does not hold {', '.join(missing)}")
        rows = [self._index[name] for name in ids]
        out: NDArray[np.float64] = self.matrix[np.ix_(rows, rows)]
        return out


@dataclass(frozen=True, slots=True)
class Repair:
    """What it took to make a matrix a correlation matrix.

    ``smallest_eigenvalue`` is that of the matrix as given, ``distance`` the Frobenius
    norm of the change, ``largest_change`` the largest of one entry, which is that of
    ``pair`` and went from ``before`` to ``after``.
    """

    smallest_eigenvalue: float
    distance: float
    largest_change: float
    pair: tuple[str, str]
    before: float
    after: float


class CorrelationError(ValueError):
    """The matrix is too far from any correlation matrix to be replaced by one."""

    def __init__(self, repair: Repair, limit: float) -> None:
        super().__init__(repair, limit)
        self.repair = repair
        self.limit = limit

    def __str__(self) -> str:
        r = self.repair
        return (
            f"the correlations contradict each other (smallest eigenvalue {r.smallest_eigenvalue:.4f}): the nearest "
            f"correlation matrix moves {r.pair[0]} / {r.pair[1]} from {r.before:.4f} to {r.after:.4f}, more than the "
            f"limit of {self.limit:g}"
        )


def checked(
    ids: Sequence[str], matrix: NDArray[np.float64], limit: float = 0.10
) -> tuple[CorrelationMatrix, Repair | None]:
    """A matrix that can be trusted, and the repair it took (None for none).

    ``matrix`` : (n, n), finite, symmetric, unit diagonal, entries from -1 to 1; anything
    else is a ValueError that names the pair. A matrix with a negative eigenvalue is
    replaced by the nearest correlation matrix, with eigenvalues of at least
    ``SMALLEST_EIGENVALUE``; if that moves an entry by more than ``limit``,
    :class:`CorrelationError` carries the repair instead.
    """
    names = tuple(ids)
    given = _well_formed(names, np.array(matrix, dtype=float))
    n = len(names)
    smallest = float(np.linalg.eigvalsh(given)[0])
    if smallest >= -1e-14 * n:  # what is left of an eigenvalue 0 in double precision
        return CorrelationMatrix(names, given), None
    repaired = _with_positive_eigenvalues(nearest_correlation(given))
    change = repaired - given
    i, j = np.unravel_index(int(np.argmax(np.abs(np.triu(change, 1)))), (n, n))
    repair = Repair(
        smallest_eigenvalue=smallest,
        distance=float(np.linalg.norm(change)),
        largest_change=float(abs(change[i, j])),
        pair=(names[i], names[j]),
        before=float(given[i, j]),
        after=float(repaired[i, j]),
    )
    if repair.largest_change > limit:
        raise CorrelationError(repair, limit)
    return CorrelationMatrix(names, repaired), repair


def _well_formed(ids: tuple[str, ...], matrix: NDArray[np.float64]) -> NDArray[np.float64]:
    n = len(ids)
    if n == 0 or matrix.shape != (n, n):
        raise ValueError(f"a matrix of shape {matrix.shape} does not hold the correlations of {n} ids")
    for i, a in enumerate(ids):
        for j, b in enumerate(ids[: i + 1]):
            value, mirrored = float(matrix[i, j]), float(matrix[j, i])
            if not (np.isfinite(value) and np.isfinite(mirrored)):
                raise ValueError(f"the correlation of {a} with {b} is not a finite number")
            if i == j and abs(value - 1.0) > ROUNDING:
                raise ValueError(f"the correlation of {a} with itself must be 1; got {value:g}")
            if abs(value - mirrored) > ROUNDING:
                raise ValueError(f"the correlation of {a} with {b} is {value:g}, but that of {b} with {a} {mirrored:g}")
            if abs(value) > 1.0 + ROUNDING:
                raise ValueError(f"the correlation of {a} with {b} must lie between -1 and 1; got {value:g}")
    out: NDArray[np.float64] = np.clip(0.5 * (matrix + matrix.T), -1.0, 1.0)
    np.fill_diagonal(out, 1.0)
    return out


def _with_positive_eigenvalues(matrix: NDArray[np.float64]) -> NDArray[np.float64]:
    values, vectors = np.linalg.eigh(matrix)
    # Twice the floor: bringing the diagonal back to 1 may lower the smallest eigenvalue a little.
    raised = (vectors * np.maximum(values, 2.0 * SMALLEST_EIGENVALUE)) @ vectors.T
    return with_unit_diagonal(raised)
