"""Ridge least squares by normal equations summed in chunks, judged on samples held out."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import cho_factor, cho_solve

Array = NDArray[np.float64]
Singles = NDArray[np.float32]

#: Samples per chunk: its design matrix in double precision stays within the second-level cache.
_CHUNK = 2048

#: Ridges tried.
RIDGES = (1e-9, 1e-8, 1e-7, 1e-6, 1e-5, 1e-4, 1e-3)


class NormalEquations:
    """Sums of products of basis values and targets, which only ever grow."""

    def __init__(self, size: int) -> None:
        self.gram = np.zeros((size, size))
        self.moments = np.zeros(size)
        self.squares = 0.0
        self.samples = 0.0

    def add(self, basis: Singles, targets: Array, weights: Array | None = None) -> None:
        """Add samples: ``basis`` (size, n), ``targets`` (n,), ``weights`` (n,) >= 0 of their squared errors."""
        for start in range(0, basis.shape[1], _CHUNK):
            part = basis[:, start : start + _CHUNK].astype(float)
            aim = targets[start : start + _CHUNK]
            if weights is not None:
                root = np.sqrt(weights[start : start + _CHUNK])
                part *= root
                aim = aim * root
            self.gram += part @ part.T
            self.moments += part @ aim
            self.squares += float(aim @ aim)
            self.samples += len(aim) if weights is None else float(root @ root)

    def __add__(self, other: NormalEquations) -> NormalEquations:
        out = NormalEquations(len(self.moments))
        out.gram, out.moments = self.gram + other.gram, self.moments + other.moments
        out.squares, out.samples = self.squares + other.squares, self.samples + other.samples
        return out

    def solve(self, ridge: float) -> Array:
        """Coefficients, ``ridge`` being the penalty on those of basis functions scaled to mean square 1.

        The constant is not penalised. Raises LinAlgError where rounding makes the equations indefinite.
        """
        roots = np.sqrt(np.diag(self.gram))
        scale = np.where(roots > 0.0, 1.0 / np.where(roots > 0.0, roots, 1.0), 0.0)
        penalty = np.full(len(scale), ridge)
        penalty[0] = 0.0
        penalty[scale == 0.0] = 1.0
        scaled = self.gram * np.outer(scale, scale) + np.diag(penalty)
        out: Array = scale * cho_solve(cho_factor(scaled, lower=True), scale * self.moments)
        return out

    def mean_square_error(self, coefficients: Array) -> float:
        """Of the fit with ``coefficients`` on these samples."""
        error = self.squares - 2.0 * coefficients @ self.moments + coefficients @ self.gram @ coefficients
        return max(float(error), 0.0) / self.samples

    def variance(self) -> float:
        """Of the targets, given that the first basis function is 1."""
        return float(max(self.squares / self.samples - (self.moments[0] / self.samples) ** 2, 0.0))


@dataclass(frozen=True, slots=True)
class Fit:
    """Coefficients (n_basis,), the ridge chosen, and how well it did on samples it had not seen.

    ``held_out_error`` is a root mean square; ``held_out_share`` the same over the targets' deviation.
    """

    coefficients: Array
    ridge: float
    held_out_error: float
    held_out_share: float


def fit(seen: NormalEquations, held_out: NormalEquations, ridges: Sequence[float] = RIDGES) -> Fit:
    """The ridge that does best on ``held_out``, then fitted to all samples."""
    scores: list[tuple[float, float]] = []
    for ridge in ridges:
        try:
            scores.append((held_out.mean_square_error(seen.solve(ridge)), ridge))
        except np.linalg.LinAlgError:
            continue  # a smaller ridge than rounding allows
    if not scores:
        raise ValueError("normal equations are singular at every ridge tried")
    error, ridge = min(scores)
    deviation = np.sqrt(held_out.variance())
    root = float(np.sqrt(error))
    return Fit((seen + held_out).solve(ridge), ridge, root, root / deviation if deviation > 0.0 else 0.0)
