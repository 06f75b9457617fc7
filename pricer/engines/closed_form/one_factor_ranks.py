"""Best, worst and k-th best of any number of levels that share one common factor.

Given the factor the levels are independent, so that the number of them above a level has
a Poisson-binomial law; an option on the k-th best is the integral of the probability
that at least k of them are above (for max and min: Johnson 1987).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

from pricer.engines.closed_form import one_factor
from pricer.engines.closed_form.family import AggregateLaw, Estimate, Family, Side
from pricer.engines.closed_form.quadrature import ACCEPTED, RANGE, edges_between, integrate, normal_density
from pricer.engines.closed_form.ranks import SingleRank, scaled
from pricer.engines.problem import EuropeanProblem, ReferenceKind
from pricer.market.joint_lognormal import JointLognormal

_FALL = 4.0  # deviations on either side of its median in which a level's distribution function rises
_STEP = 0.5  # of the trapezoidal rule, in units of the narrowest transition along the factor
_MOST_NODES = 800
_TOLERANCE = 1e-10


@dataclass(frozen=True, slots=True)
class OneFactorRank:
    """The law of the level of rank ``rank`` (1 is the best), in units of the forward of that rank.

    ``loadings`` (n,) on the factor; ``own`` (n,) > 0 deviations of the logs given it;
    ``nodes`` (2 m,) an equally spaced grid of the factor.
    """

    law: JointLognormal
    rank: int
    loadings: NDArray[np.float64]
    own: NDArray[np.float64]
    nodes: NDArray[np.float64]

    def mean(self) -> Estimate | None:
        return self.option(0.0, 1)

    def option(self, strike: float, side: Side) -> Estimate | None:
        low, high = self._reach()
        y = math.log(strike) if strike > 0.0 else -math.inf
        if side == 1:
            start, end = min(max(y, low), high), high
            certain = math.exp(start) - strike if y < low else 0.0
        else:
            start, end, certain = low, min(max(y, low), high), 0.0
            certain = strike - math.exp(end) if y > high else 0.0
        rough = 0.0

        def density(y: NDArray[np.float64]) -> NDArray[np.float64]:
            nonlocal rough
            probability, gap = self._beyond(y, side)
            rough = max(rough, float((np.exp(y) * gap).max()))
            return np.exp(y) * probability

        edges = edges_between(start, end, 1, *self._transitions())
        found = integrate(density, edges, _TOLERANCE, max(4_000, 48 * edges.size))
        error = found.error + (end - start) * rough + 1e-14
        return Estimate(found.value + certain, error) if error <= ACCEPTED else None

    def digital(self, strike: float, side: Side) -> Estimate | None:
        if strike <= 0.0:
            return Estimate(1.0 if side == 1 else 0.0)
        probability, gap = self._beyond(np.array([math.log(strike)]), side)
        error = float(gap[0]) + 1e-14
        return Estimate(float(probability[0]), error) if error <= ACCEPTED else None

    def _reach(self) -> tuple[float, float]:
        """Log-levels outside of which the ranked level practically never is."""
        deviation = self.law.deviations
        middle = np.log(self.law.forwards) - 0.5 * deviation**2
        low, high = middle - RANGE * deviation, middle + RANGE * deviation + deviation**2
        return float(np.sort(low)[-self.rank]), float(np.sort(high)[-self.rank])

    def _transitions(self) -> tuple[list[float], list[float]]:
        """Where the chance of each log-level's being above ``y`` falls, and the half width of its fall.

        Of levels that fall together, one stands for all; the narrowest come first.
        """
        deviation = self.law.deviations
        middle = np.log(self.law.forwards) - 0.5 * deviation**2
        centres: list[float] = []
        widths: list[float] = []
        for i in np.argsort(deviation, kind="stable"):
            width = _FALL * float(deviation[i])
            if all(abs(middle[i] - c) > 0.5 * width or width > 2.0 * w for c, w in zip(centres, widths, strict=True)):
                centres.append(float(middle[i]))
                widths.append(width)
        return centres, widths

    def _beyond(self, y: NDArray[np.float64], side: Side) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Probability that the ranked level is above (below) ``exp(y)`` (m,), and its quadrature error."""
        middle = np.log(self.law.forwards) - 0.5 * np.diag(self.law.covariance)
        needed = self.rank if side == 1 else self.law.n_assets - self.rank + 1
        at_least = np.zeros((needed + 1, y.size, self.nodes.size))  # 0, 1, ... levels beyond exp(y)
        at_least[0] = 1.0
        for m, b, s in zip(middle, self.loadings, self.own, strict=True):
            p = ndtr(side * ((m + b * self.nodes) - y[:, None]) / s)
            at_least[1:] += p * (at_least[:-1] - at_least[1:])
        weights = normal_density(self.nodes) * (self.nodes[1] - self.nodes[0])
        even, odd = (at_least[needed][:, start::2] @ (2.0 * weights[start::2]) for start in (0, 1))
        # Halving the step at least squares the error of the trapezoidal rule (Trefethen & Weideman 2014).
        return 0.5 * (even + odd), 10.0 * (even - odd) ** 2


def _law(problem: EuropeanProblem) -> AggregateLaw | None:
    single = SingleRank.of(problem)
    if single is None or single.law.n_assets < 3:
        return None
    loadings = one_factor.loadings(single.law.covariance)
    if loadings is None:
        return None
    own = np.sqrt(np.maximum(np.diag(single.law.covariance) - loadings**2, 0.0))
    if np.any(own <= 0.0):
        return None
    steepest = float(np.max(np.abs(loadings) / own))
    # A lognormal payment moves the weight of the integrand by its own loading.
    low, high = min(0.0, float(loadings.min())) - RANGE, max(0.0, float(loadings.max())) + RANGE
    count = math.ceil((high - low) * max(1.0, steepest) / _STEP)
    if count > _MOST_NODES:
        return None
    nodes = np.linspace(low, high, 2 * count)
    unit = float(np.sort(single.law.forwards)[-single.rank])  # levels may be decades apart, and far from 1
    law = JointLognormal(single.law.forwards / unit, single.law.covariance)
    return scaled(OneFactorRank(law, single.rank, loadings, own, nodes), single.weight * unit)


ONE_FACTOR_RANKS = Family(
    "ranked level, one common factor",
    ReferenceKind.EXACT,
    "Johnson (1987) by conditional independence",
    _law,
)
