"""Upper bound on an option on a sum of lognormals, given one normal variable.

Given that variable, the option is at most (a) that on the sum of the terms' conditional
laws moving together (Kaas, Dhaene & Goovaerts 2000), and at most (b) what the conditional
mean and variance allow (Scarf 1958; Lo 1987). The lower of the two counts, value by value
of the variable: (b) is the tighter one almost everywhere, (a) far in the tails.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.engines.closed_form.conditioning import directions
from pricer.engines.closed_form.family import AggregateLaw, Estimate, Family, Side
from pricer.engines.closed_form.lognormal_sum import LognormalSum
from pricer.engines.closed_form.one_factor_sum import OneFactorSum
from pricer.engines.closed_form.quadrature import LAYER, RANGE, edges_between, integrate, normal_density
from pricer.engines.problem import EuropeanProblem, ReferenceKind

_RELATIVE_TOLERANCE = 1e-10
_EVALUATIONS = 3_000


@dataclass(frozen=True, slots=True)
class ConditionalBound:
    """The bound for one sum; the variable is the best of :func:`directions`."""

    total: LognormalSum

    def mean(self) -> Estimate:
        return Estimate(self.total.mean)

    def option(self, strike: float, side: Side) -> Estimate | None:
        found = directions(self.total, strike)
        if not found:
            return None
        loadings = found[-1].loadings

        def density(w: NDArray[np.float64]) -> NDArray[np.float64]:
            tighter = np.minimum(
                comonotonic(self.total, loadings, w, strike, side),
                mean_variance(self.total, loadings, w, strike, side),
            )
            return normal_density(w) * tighter

        low, high = min(0.0, float(loadings.min())), max(0.0, float(loadings.max()))
        scale = self.total.gross + abs(strike)
        edges = edges_between(low - RANGE, high + RANGE, 6, *self._layers(loadings, strike))
        bound = integrate(density, edges, _RELATIVE_TOLERANCE * scale, _EVALUATIONS)
        return Estimate(bound.value, bound.error + 1e-15 * scale)

    def _layers(self, loadings: NDArray[np.float64], strike: float) -> tuple[list[float], list[float]]:
        """Where the conditional mean crosses the strike, and the half width of the layer around each.

        With little variance left given the variable, the bound all but has a kink there.
        """
        roots = OneFactorSum(self.total.shift, self.total.coefficients, loadings).roots(strike)
        terms, variance = conditional_moments(self.total, loadings, np.array(roots))
        slope = np.abs(terms @ loadings)
        widths = np.sqrt(variance) / np.where(slope > 0.0, slope, np.inf)
        return roots, [LAYER * float(width) for width in widths]

    def digital(self, strike: float, side: Side) -> None:
        return None


def comonotonic(
    total: LognormalSum, loadings: NDArray[np.float64], w: NDArray[np.float64], strike: float, side: Side
) -> NDArray[np.float64]:
    """Bound (a) given each of ``w`` (m,), whose covariances with the logs are ``loadings`` (n,): (m,)."""
    from pricer.engines.closed_form.sum_kernels import conditional  # compiled only when needed

    variance, sign = np.diag(total.covariance), np.sign(total.coefficients)
    together = sign * np.sqrt(np.maximum(variance - loadings**2, 0.0))
    logs = np.log(np.abs(total.coefficients)) - 0.5 * variance + np.multiply.outer(w, loadings)
    return np.asarray(conditional(logs, sign, together, strike - total.shift, float(side), False))


def mean_variance(
    total: LognormalSum, loadings: NDArray[np.float64], w: NDArray[np.float64], strike: float, side: Side
) -> NDArray[np.float64]:
    """Bound (b); arguments as for :func:`comonotonic`."""
    terms, variance = conditional_moments(total, loadings, w)
    excess = side * (terms.sum(axis=1) + total.shift - strike)
    return np.asarray(0.5 * (np.sqrt(variance + excess * excess) + excess))


def conditional_moments(
    total: LognormalSum, loadings: NDArray[np.float64], w: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Given each of ``w`` (m,): the terms' means (m, n) and the variance of their sum (m,)."""
    terms = total.coefficients * np.exp(np.multiply.outer(w, loadings) - 0.5 * loadings**2)
    left = np.expm1(total.covariance - np.outer(loadings, loadings))
    return terms, np.maximum(((terms @ left) * terms).sum(axis=1), 0.0)


def _law(problem: EuropeanProblem) -> AggregateLaw | None:
    as_sum = LognormalSum.of(problem)
    return ConditionalBound(as_sum) if as_sum is not None and as_sum.n_terms >= 2 else None


UPPER_BOUND = Family(
    "conditional upper bound",
    ReferenceKind.UPPER_BOUND,
    "Scarf (1958); Lo (1987); Kaas, Dhaene & Goovaerts (2000)",
    _law,
)
