"""A weighted sum of lognormal levels in its simplest equal form."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.engines.closed_form.ranks import is_sum
from pricer.engines.problem import EuropeanProblem

_SAME = 1e-15  # logs whose difference has less than this share of their variance are equal up to rounding


@dataclass(frozen=True, slots=True)
class LognormalSum:
    """``shift + sum_i coefficients[i] exp(x_i - covariance[i, i] / 2)`` with ``x`` normal.

    ``coefficients`` (n,) are weight times forward, of either sign and not 0; ``covariance``
    (n, n) has a positive diagonal. Levels without variance are in ``shift``; levels that
    move as one are one term. ``n`` may be 0.
    """

    shift: float
    coefficients: NDArray[np.float64]
    covariance: NDArray[np.float64]

    @classmethod
    def of(cls, problem: EuropeanProblem) -> LognormalSum | None:
        """The problem's aggregate as such a sum; None where it is none."""
        aggregate = problem.aggregate
        if not is_sum(aggregate.kind, aggregate.weights):
            return None
        coefficients = np.array(aggregate.weights) * problem.law.forwards
        variance = np.diag(problem.law.covariance)
        shift = float(coefficients[variance <= 0.0].sum())
        terms: list[int] = []
        sizes = coefficients.copy()
        for i in np.flatnonzero((variance > 0.0) & (coefficients != 0.0)):
            for j in terms:
                gap = variance[i] + variance[j] - 2.0 * problem.law.covariance[i, j]
                if abs(gap) <= _SAME * (variance[i] + variance[j]):
                    sizes[j] += sizes[i]
                    break
            else:
                terms.append(int(i))
        rounding = _SAME * float(np.abs(coefficients).sum())  # what is left of terms that cancel
        chosen = np.array([i for i in terms if abs(sizes[i]) > rounding], dtype=np.intp)
        return cls(shift, sizes[chosen], problem.law.covariance[np.ix_(chosen, chosen)])

    @property
    def n_terms(self) -> int:
        return int(self.coefficients.size)

    @property
    def mean(self) -> float:
        return self.shift + float(self.coefficients.sum())

    @property
    def gross(self) -> float:
        """Sum of the absolute terms: the scale that errors are measured against."""
        return abs(self.shift) + float(np.abs(self.coefficients).sum())

    @property
    def deviations(self) -> NDArray[np.float64]:
        out: NDArray[np.float64] = np.sqrt(np.diag(self.covariance))
        return out

    @property
    def one_signed(self) -> bool:
        """Whether all terms have the same sign."""
        return bool(np.all(self.coefficients > 0.0) or np.all(self.coefficients < 0.0))

    def root(self) -> NDArray[np.float64]:
        """A factor (n, rank) with ``root @ root.T`` equal to the covariance, which may be singular."""
        values, vectors = np.linalg.eigh(self.covariance)
        kept = values > 1e-15 * values[-1]
        return np.asarray(vectors[:, kept] * np.sqrt(values[kept]))
