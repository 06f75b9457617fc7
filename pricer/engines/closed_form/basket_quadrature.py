"""Any weighted sum of three or more levels: exact along one direction, sparse grid across.

Along a direction in which the sum is monotone an option on it is Black's formula term by
term, from the boundary on (Choi 2018). The direction follows the sum's first-order change
at the boundary as nearly as the signs of the weights allow, so that what is left for the
grid changes the result in second order only.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.engines.closed_form import sparse_grid
from pricer.engines.closed_form.conditioning import directions
from pricer.engines.closed_form.family import AggregateLaw, Estimate, Family, Side
from pricer.engines.closed_form.lognormal_sum import LognormalSum
from pricer.engines.problem import EuropeanProblem, ReferenceKind

# Relative to the gross forward plus strike (to 1 for a probability):
_TOLERANCE = 4e-8  # where refinement stops
_ACCEPTED = 1e-6  # up to which the result counts as exact
_HOPELESS = 3e-5  # above which refinement is given up early
_WORK = 400_000  # nodes times terms, and
_RULES = 1_000  # tensor rules: some tens of milliseconds
_LARGEST = 20  # terms; with more, the time runs out long before the error is small


@dataclass(frozen=True, slots=True)
class BasketQuadrature:
    """The law of one sum; options and digitals whose error is too large are not given."""

    total: LognormalSum

    def mean(self) -> Estimate:
        return Estimate(self.total.mean)

    def option(self, strike: float, side: Side) -> Estimate | None:
        return self._expectation(strike, side, False, self.total.gross + abs(strike))

    def digital(self, strike: float, side: Side) -> Estimate | None:
        return self._expectation(strike, side, True, 1.0)

    def _expectation(self, strike: float, side: Side, probability: bool, scale: float) -> Estimate | None:
        from pricer.engines.closed_form.sum_kernels import conditional  # compiled only when needed

        split = split_along(self.total, strike)
        if split is None:
            return None
        loadings, across = split
        signs = np.sign(self.total.coefficients)
        logs = np.log(np.abs(self.total.coefficients)) - 0.5 * np.diag(self.total.covariance)
        excess = strike - self.total.shift

        def f(z: NDArray[np.float64], variables: list[int]) -> NDArray[np.float64]:
            terms = logs + z @ across[:, variables].T
            return np.asarray(conditional(terms, signs, loadings, excess, float(side), probability))

        effort = sparse_grid.Effort(_TOLERANCE * scale, _HOPELESS * scale, _WORK // self.total.n_terms, _RULES)
        found = sparse_grid.expectation(f, across.shape[1], effort)
        if found.error > _ACCEPTED * scale:
            return None
        return Estimate(max(found.value, 0.0), found.error + 1e-13 * scale)


def split_along(total: LognormalSum, strike: float) -> tuple[NDArray[np.float64], NDArray[np.float64]] | None:
    """Loadings (n,) on a direction in which the sum rises, and a factor (n, m) for the rest.

    Together they make up the covariance. The factor's columns are independent standard
    normals in order of their first-order effect on the sum. None where no direction serves.
    """
    found = directions(total, strike)
    if not found:
        return None
    root, signs = total.root(), np.sign(total.coefficients)
    unit = found[-1].unit
    if np.any(signs * found[-1].loadings < 0.0):
        from scipy.optimize import nnls  # slow to import, and seldom needed

        # Nearest direction with signs * (root @ u) >= 0: the projection on a cone, by its dual.
        multipliers, _ = nnls(root.T * signs, -unit)
        unit = unit + (root.T * signs) @ multipliers
        size = float(np.linalg.norm(unit))
        if size < 1e-6:
            return None
        unit = unit / size
    loadings = signs * np.maximum(signs * (root @ unit), 0.0)
    others = np.linalg.svd(unit[None, :])[2][1:]  # an orthonormal basis of what is left
    rest = root @ others.T
    weights = np.abs(found[-1].sensitivities)
    rotation = np.linalg.svd(weights[:, None] * rest, full_matrices=False)[2] if rest.size else np.empty((0, 0))
    return loadings, rest @ rotation.T


def _law(problem: EuropeanProblem) -> AggregateLaw | None:
    as_sum = LognormalSum.of(problem) if problem.payoff.knots else None
    return BasketQuadrature(as_sum) if as_sum is not None and 3 <= as_sum.n_terms <= _LARGEST else None


BASKET_QUADRATURE = Family(
    "exact along one direction, sparse grid across",
    ReferenceKind.EXACT,
    "Choi (2018); Gerstner & Griebel (2003)",
    _law,
)
