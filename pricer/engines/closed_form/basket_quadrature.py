"""Any weighted sum of three or more levels: exact along one direction, quadrature across.

Along a direction in which the sum is monotone an option on it is Black's formula term by
term, from the boundary on (Choi 2018). The direction follows the sum's first-order change
at the boundary as nearly as the signs of the weights allow. What is left of that change is
the first variable of the quadrature; the others change the result in second order only.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.engines.closed_form import normal_trapezoid, sparse_grid
from pricer.engines.closed_form.conditioning import directions
from pricer.engines.closed_form.family import AggregateLaw, Estimate, Family, Side
from pricer.engines.closed_form.lognormal_sum import LognormalSum
from pricer.engines.closed_form.quadrature import ACCEPTED
from pricer.engines.problem import EuropeanProblem, ReferenceKind

# Relative to the gross forward plus strike (to 1 for a probability):
_TOLERANCE = 1.6e-7  # where refinement stops
_WORK = 400_000  # nodes times terms, and
_RULES = 1_000  # tensor rules: some tens of milliseconds
_LARGEST = 20  # terms; with more, the time runs out long before the error is small
_TRAPEZOID = 2  # variables across, up to which all of them get a fine rule
_RISE = 0.1  # of a term along the direction, in its deviation, times the cosine to the best direction
_ALIGNED = 1e-6  # share of the first-order effect across that counts as none
_WIDEST = 1.5  # deviation of a log across, beyond which a sparse grid's changes are no guide to its error


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

        found = self._across(f, across, scale, probability)
        if found is None or found.error > ACCEPTED * scale:
            return None
        return Estimate(max(found.value, 0.0), found.error + 1e-13 * scale)

    def _across(
        self, f: sparse_grid.Integrand, across: NDArray[np.float64], scale: float, bounded: bool
    ) -> Estimate | None:
        """Expectation of ``f`` over the variables across; ``bounded`` says that f has an upper bound."""
        dimension, work = across.shape[1], _WORK // self.total.n_terms
        widest = float(np.sqrt((across**2).sum(axis=1).max()))
        if dimension == 0:
            return Estimate(float(f(np.empty((1, 0)), [])[0]))
        if dimension <= _TRAPEZOID:
            reach = 0.0 if bounded else widest  # a lognormal payment moves the weight by its deviation
            return normal_trapezoid.expectation(f, dimension, reach, _TOLERANCE * scale, 2 * work)
        if widest > _WIDEST:
            return None
        effort = sparse_grid.Effort(_TOLERANCE * scale, ACCEPTED * scale, work, _RULES)
        return sparse_grid.expectation(f, dimension, effort)


def split_along(total: LognormalSum, strike: float) -> tuple[NDArray[np.float64], NDArray[np.float64]] | None:
    """Loadings (n,) on a direction in which the sum rises, and a factor (n, m) for the rest.

    Together they make up the covariance. The factor's columns are independent standard
    normals: the first has all that is left of the first-order effect on the sum, if any is;
    the others are in order of their effect on its terms. None where no direction serves.
    """
    found = directions(total, strike)
    if not found:
        return None
    root, signs = total.root(), np.sign(total.coefficients)
    unit = _rising(found[-1].unit, signs[:, None] * root, total.deviations)
    if unit is None:
        return None
    loadings = signs * np.maximum(signs * (root @ unit), 0.0)
    others = np.linalg.svd(unit[None, :])[2][1:]  # an orthonormal basis of what is left
    rest = root @ others.T
    return loadings, rest @ _axes(rest, found[-1].sensitivities)


def _rising(
    unit: NDArray[np.float64], rows: NDArray[np.float64], deviations: NDArray[np.float64]
) -> NDArray[np.float64] | None:
    """The direction nearest to ``unit`` (rank,) along which no term falls, ``rows @ u >= 0``; rows (n, rank).

    If there is one along which every term rises by a part of its deviation it is better: on
    the edge of the cone a term that stands still makes the conditional value bend sharply.
    """
    if np.all(rows @ unit >= 0.0):
        return unit
    from scipy.optimize import nnls  # slow to import, and seldom needed

    for part, shortest in ((_RISE, 0.05), (0.0, 1e-6)):
        cone = rows - part * np.outer(deviations, unit)
        multipliers, _ = nnls(cone.T, -unit)  # the projection on a cone, by its dual
        nearest = unit + multipliers @ cone
        size = float(np.linalg.norm(nearest))
        if size >= shortest:
            return np.asarray(nearest / size)
    return None


def _axes(rest: NDArray[np.float64], sensitivities: NDArray[np.float64]) -> NDArray[np.float64]:
    """Orthonormal axes (m, m), as columns, for the factor ``rest`` (n, m) in the order said above."""
    m = rest.shape[1]
    if m == 0:
        return np.empty((0, 0))
    weighted = np.abs(sensitivities)[:, None] * rest
    pull = sensitivities @ rest
    size = float(np.linalg.norm(pull))
    if size <= _ALIGNED * float(np.linalg.norm(weighted)):
        return np.asarray(np.linalg.svd(weighted, full_matrices=False)[2].T)
    leading = pull / size
    left = np.linalg.svd(leading[None, :])[2][1:].T  # an orthonormal basis of the others, (m, m - 1)
    rotation = np.linalg.svd(weighted @ left, full_matrices=False)[2].T if m > 1 else np.empty((0, 0))
    return np.column_stack((leading, left @ rotation))


def _law(problem: EuropeanProblem) -> AggregateLaw | None:
    as_sum = LognormalSum.of(problem) if problem.payoff.knots else None
    return BasketQuadrature(as_sum) if as_sum is not None and 3 <= as_sum.n_terms <= _LARGEST else None


BASKET_QUADRATURE = Family(
    "exact along one direction, sparse grid across",
    ReferenceKind.EXACT,
    "Choi (2018); Gerstner & Griebel (2003)",
    _law,
)
