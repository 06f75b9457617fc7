"""Any weighted sum of two levels by one quadrature (Pearson 1995).

Given the second level the first is lognormal, so that a call on the sum is a Black call
at the strike that the second level leaves; that strike may be negative.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.engines.closed_form.family import AggregateLaw, Estimate, Family, Side, other
from pricer.engines.closed_form.lognormal import Numbers, black, exceedance
from pricer.engines.closed_form.lognormal_sum import LognormalSum
from pricer.engines.closed_form.one_factor_sum import OneFactorSum
from pricer.engines.closed_form.quadrature import LAYER, RANGE, edges_between, integrate, normal_density
from pricer.engines.problem import EuropeanProblem, ReferenceKind

_RELATIVE_TOLERANCE = 1e-14

_Formula = Callable[[Numbers, Numbers, Numbers, Side], NDArray[np.float64]]


@dataclass(frozen=True, slots=True)
class TwoAssetSum:
    """``shift + first X + second Y``; ``first`` and ``second`` of either sign."""

    total: LognormalSum

    def mean(self) -> Estimate:
        return Estimate(self.total.mean)

    def option(self, strike: float, side: Side) -> Estimate:
        return self._integral(black, strike, side, self.total.gross + abs(strike))

    def digital(self, strike: float, side: Side) -> Estimate:
        return self._integral(exceedance, strike, side, 1.0)

    def _integral(self, formula: _Formula, strike: float, side: Side, scale: float) -> Estimate:
        (first, second), v = self.total.coefficients, self.total.covariance
        deviation = math.sqrt(v[1, 1])
        loading = v[0, 1] / deviation
        own = math.sqrt(max(v[0, 0] - loading * loading, 0.0))
        mirrored = side if first > 0.0 else other(side)

        def density(z: NDArray[np.float64]) -> NDArray[np.float64]:
            forward = abs(first) * np.exp(loading * z - 0.5 * loading * loading)
            left = strike - self.total.shift - second * np.exp(deviation * z - 0.5 * deviation * deviation)
            return normal_density(z) * formula(forward, left * np.sign(first), own, mirrored)

        # A lognormal payment moves the weight of the integrand by its own loading.
        low, high = min(0.0, loading) - RANGE, max(deviation, loading) + RANGE
        edges = edges_between(low, high, 8, *self._layers(strike, loading, deviation, own))
        found = integrate(density, edges, _RELATIVE_TOLERANCE * scale)
        return Estimate(max(found.value, 0.0), found.error + 1e-15 * scale)

    def _layers(self, strike: float, loading: float, deviation: float, own: float) -> tuple[list[float], list[float]]:
        """Where the conditional option is at the money, and the half width of the layer around each."""
        second, excess = float(self.total.coefficients[1]), strike - self.total.shift
        given = OneFactorSum(0.0, self.total.coefficients, np.array([loading, deviation]))
        roots, widths = given.roots(excess), []
        for root in roots:
            moving = second * math.exp(deviation * root - 0.5 * deviation * deviation)
            slope = abs(loading + deviation * moving / (excess - moving)) if excess != moving else 0.0
            widths.append(LAYER * own / slope if slope > 0.0 else math.inf)
        return roots, widths


def _law(problem: EuropeanProblem) -> AggregateLaw | None:
    as_sum = LognormalSum.of(problem) if problem.payoff.knots else None
    return TwoAssetSum(as_sum) if as_sum is not None and as_sum.n_terms == 2 else None


TWO_ASSET_SUM = Family("two-asset sum, one-dimensional quadrature", ReferenceKind.EXACT, "Pearson (1995)", _law)
