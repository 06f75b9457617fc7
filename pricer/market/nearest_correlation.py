"""The correlation matrix nearest to a symmetric matrix."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

#: Largest deviation of the diagonal from 1, relative to the matrix's size, at which the iteration stops.
TOLERANCE = 1e-12

_MAX_STEPS = 200
_SUFFICIENT_DECREASE = 1e-4


def nearest_correlation(matrix: NDArray[np.float64]) -> NDArray[np.float64]:
    """The correlation matrix with the least Frobenius distance from ``matrix``: (n, n) to (n, n).

    ``matrix`` is symmetric; its diagonal and the size of its entries are free. The result
    has a unit diagonal exactly, and eigenvalues that are not negative except for rounding
    (most often several are 0).

    The problem is that of Higham (2002); it is solved by the regularised Newton method of
    Qi & Sun (2006) on its dual, ``min over y of |(A + diag y)+|^2 / 2 - sum(y)``, whose
    gradient ``diag (A + diag y)+ - 1`` vanishes at the solution ``(A + diag y)+``.

    Raises ValueError for a matrix that is not square, symmetric and finite, and
    ArithmeticError if the iteration does not converge.
    """
    a = np.array(matrix, dtype=float)
    n = a.shape[0]
    if a.shape != (n, n) or not np.all(np.isfinite(a)) or not np.allclose(a, a.T, rtol=0.0, atol=1e-10):
        raise ValueError("the nearest correlation matrix exists for square, symmetric, finite matrices")
    a = 0.5 * (a + a.T)
    scale = max(1.0, float(np.abs(a).max()))
    point = _Dual(a, 1.0 - np.diag(a))
    for _ in range(_MAX_STEPS):
        if point.error <= TOLERANCE * scale:
            return with_unit_diagonal(point.positive_part())
        point = _step(a, point)
    raise ArithmeticError(
        f"no nearest correlation matrix found in {_MAX_STEPS} steps: the diagonal is still off by {point.error:.1e}"
    )


class _Dual:
    """The dual function at one point ``y`` (n,): value, gradient (n,) and the spectrum they come from."""

    def __init__(self, a: NDArray[np.float64], y: NDArray[np.float64]) -> None:
        self.y = y
        self.eigenvalues, self.vectors = np.linalg.eigh(a + np.diag(y))
        self.positive = np.maximum(self.eigenvalues, 0.0)
        self.value = 0.5 * float(self.positive @ self.positive) - float(y.sum())
        self.gradient: NDArray[np.float64] = (self.vectors**2) @ self.positive - 1.0
        self.error = float(np.abs(self.gradient).max())

    def positive_part(self) -> NDArray[np.float64]:
        out: NDArray[np.float64] = (self.vectors * self.positive) @ self.vectors.T
        return out


def _step(a: NDArray[np.float64], point: _Dual) -> _Dual:
    direction = _newton_direction(point)
    slope = float(point.gradient @ direction)
    length = 1.0
    while length > 1e-12:
        new = _Dual(a, point.y + length * direction)
        # Near the solution the value no longer changes in the last digit, but the gradient still does.
        if new.value <= point.value + _SUFFICIENT_DECREASE * length * slope or new.error <= 0.5 * point.error:
            return new
        length *= 0.5
    raise ArithmeticError(
        f"no descent towards the nearest correlation matrix: the diagonal is off by {point.error:.1e}"
    )


def _newton_direction(point: _Dual) -> NDArray[np.float64]:
    """Solves the generalised Hessian's system by preconditioned conjugate gradients (Qi & Sun 2006, sections 3, 5)."""
    vectors, weights = point.vectors, _hessian_weights(point.eigenvalues)
    ridge = min(1e-3, 0.1 * point.error)
    squares = vectors**2
    diagonal = np.maximum(np.einsum("ik,kl,il->i", squares, weights, squares, optimize=True), 1e-8) + ridge

    def hessian(h: NDArray[np.float64]) -> NDArray[np.float64]:
        inner = weights * (vectors.T @ (h[:, None] * vectors))
        out: NDArray[np.float64] = np.einsum("ik,kl,il->i", vectors, inner, vectors, optimize=True) + ridge * h
        return out

    direction = np.zeros_like(point.gradient)
    residual = -point.gradient
    target = min(1e-2, point.error) * float(np.linalg.norm(residual))
    conditioned = residual / diagonal
    search = conditioned.copy()
    product = float(residual @ conditioned)
    for _ in range(2 * len(residual) + 20):
        image = hessian(search)
        length = product / float(search @ image)
        direction += length * search
        residual = residual - length * image
        if float(np.linalg.norm(residual)) <= target:
            break
        conditioned = residual / diagonal
        product, previous = float(residual @ conditioned), product
        search = conditioned + (product / previous) * search
    return direction


def _hessian_weights(eigenvalues: NDArray[np.float64]) -> NDArray[np.float64]:
    """Divided differences of ``max(x, 0)`` at the eigenvalues: 1, 0, or in between for mixed signs: (n, n)."""
    positive = np.maximum(eigenvalues, 0.0)
    kept = eigenvalues > 0.0
    gap = eigenvalues[:, None] - eigenvalues[None, :]
    mixed = kept[:, None] != kept[None, :]
    ratio = np.divide(positive[:, None] - positive[None, :], gap, out=np.zeros_like(gap), where=mixed)
    out: NDArray[np.float64] = np.where(mixed, ratio, np.where(kept[:, None] & kept[None, :], 1.0, 0.0))
    return out


def with_unit_diagonal(matrix: NDArray[np.float64]) -> NDArray[np.float64]:
    """A covariance matrix scaled to the correlation matrix it implies: (n, n) to (n, n)."""
    scale = np.sqrt(np.diag(matrix))
    out: NDArray[np.float64] = matrix / np.outer(scale, scale)
    out = 0.5 * (out + out.T)
    np.fill_diagonal(out, 1.0)
    return out
