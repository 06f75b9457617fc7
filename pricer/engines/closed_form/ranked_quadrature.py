"""Weights on two or three sorted levels, by quadrature over the gaps between them.

For each order of the levels the logarithmic gaps between neighbours are normal and kept
positive. A combination of the logs exists that is independent of all gaps (the one of
least variance); given the gaps, the aggregate is a multiple of its exponential, so that
an option on it is a Black option.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from itertools import permutations

import numpy as np
from numpy.typing import NDArray

from pricer.engines.closed_form.family import AggregateLaw, Estimate, Family, Side, other
from pricer.engines.closed_form.lognormal import Numbers, black, exceedance
from pricer.engines.closed_form.quadrature import ACCEPTED, RANGE, gauss_legendre, integrate, normal_density
from pricer.engines.closed_form.ranks import is_sum
from pricer.engines.problem import EuropeanProblem, ReferenceKind
from pricer.market.joint_lognormal import JointLognormal

_INNER = (24, 36)  # nodes of the inner integral: their difference is its error
_RELATIVE_TOLERANCE = 1e-10

_Formula = Callable[[Numbers, Numbers, Numbers, Side], NDArray[np.float64]]


@dataclass(frozen=True, slots=True)
class RankedLevels:
    """The law of ``sum_k weights[k] * level of rank k + 1`` for two or three levels."""

    law: JointLognormal
    weights: NDArray[np.float64]

    def mean(self) -> Estimate | None:
        def forward(f: Numbers, k: Numbers, s: Numbers, side: Side) -> NDArray[np.float64]:
            return np.asarray(side * np.asarray(f))

        return self._integral(forward, 0.0, 1, self._scale(0.0))

    def option(self, strike: float, side: Side) -> Estimate | None:
        return self._integral(black, strike, side, self._scale(strike))

    def digital(self, strike: float, side: Side) -> Estimate | None:
        return self._integral(exceedance, strike, side, 1.0)

    def _scale(self, strike: float) -> float:
        return float(np.abs(self.weights).sum() * self.law.forwards.max()) + abs(strike)

    def _integral(self, formula: _Formula, strike: float, side: Side, scale: float) -> Estimate | None:
        total = Estimate(0.0)
        for order in permutations(range(self.law.n_assets)):
            cone = _Cone.of(self.law, self.weights, np.array(order))
            if self.law.n_assets == 2:
                part = cone.over_one_gap(formula, strike, side, _RELATIVE_TOLERANCE * scale)
            else:
                part = cone.over_two_gaps(formula, strike, side, _RELATIVE_TOLERANCE * scale)
            total = total + part
        if total.error > ACCEPTED * scale:
            return None
        return Estimate(total.value, total.error + 1e-14 * scale)


@dataclass(frozen=True, slots=True)
class _Cone:
    """One order of the levels: the law of its gaps, and the aggregate given them.

    ``mean`` (n - 1,) and ``covariance`` of the gaps, best first; ``weights`` (n,) by rank;
    ``anchor`` (n,) weights of the independent combination, in this order; ``level`` its
    forward and ``deviation`` its deviation.
    """

    mean: NDArray[np.float64]
    covariance: NDArray[np.float64]
    weights: NDArray[np.float64]
    anchor: NDArray[np.float64]
    level: float
    deviation: float

    @classmethod
    def of(cls, law: JointLognormal, weights: NDArray[np.float64], order: NDArray[np.intp]) -> _Cone:
        covariance = law.covariance[np.ix_(order, order)]
        middle = (np.log(law.forwards) - 0.5 * np.diag(law.covariance))[order]
        gaps = np.eye(order.size)[:-1] - np.eye(order.size)[1:]
        pull = np.asarray(np.linalg.solve(covariance, np.ones(order.size)), dtype=np.float64)
        variance = 1.0 / float(pull.sum())
        anchor = pull * variance
        level = math.exp(float(anchor @ middle) + 0.5 * variance)
        return cls(gaps @ middle, gaps @ covariance @ gaps.T, weights, anchor, level, math.sqrt(variance))

    def given(self, formula: _Formula, gaps: NDArray[np.float64], strike: float, side: Side) -> NDArray[np.float64]:
        """``formula`` for the aggregate given ``gaps`` (m, n - 1): (m,)."""
        above_last = np.zeros((gaps.shape[0], gaps.shape[1] + 1))
        above_last[:, :-1] = np.cumsum(gaps[:, ::-1], axis=1)[:, ::-1]
        shape = np.exp(above_last - (above_last @ self.anchor)[:, None]) @ self.weights
        sign = np.where(shape < 0.0, -1.0, 1.0)
        size = np.maximum(np.abs(shape), 1e-300) * self.level
        same = formula(size, strike * sign, self.deviation, side)
        opposite = formula(size, strike * sign, self.deviation, other(side))
        return np.where(sign > 0.0, same, opposite)

    def over_one_gap(self, formula: _Formula, strike: float, side: Side, tolerance: float) -> Estimate:
        mean, deviation = float(self.mean[0]), math.sqrt(self.covariance[0, 0])

        def density(gap: NDArray[np.float64]) -> NDArray[np.float64]:
            return _density(gap, mean, deviation) * self.given(formula, gap[:, None], strike, side)

        return integrate(density, self._edges(mean, deviation), tolerance)

    def over_two_gaps(self, formula: _Formula, strike: float, side: Side, tolerance: float) -> Estimate:
        mean, deviation = float(self.mean[0]), math.sqrt(self.covariance[0, 0])
        slope = float(self.covariance[0, 1]) / deviation**2
        own = math.sqrt(max(float(self.covariance[1, 1]) - slope * slope * deviation**2, 0.0))

        def inner(first: NDArray[np.float64], nodes: int) -> NDArray[np.float64]:
            x, w = gauss_legendre(nodes)
            middle = float(self.mean[1]) + slope * (first - mean)
            low, high = np.maximum(middle - RANGE * own, 0.0), np.maximum(middle + RANGE * own, 0.0)
            half = 0.5 * (high - low)[:, None]
            second = low[:, None] + half * (1.0 + x)
            gaps = np.stack((np.broadcast_to(first[:, None], second.shape).ravel(), second.ravel()), axis=1)
            values = self.given(formula, gaps, strike, side).reshape(second.shape)
            return np.asarray((half * w * _density(second, middle[:, None], own) * values).sum(axis=1))

        rough = 0.0

        def density(first: NDArray[np.float64]) -> NDArray[np.float64]:
            nonlocal rough
            coarse, fine = (inner(first, nodes) for nodes in _INNER)
            weight = _density(first, mean, deviation)
            rough = max(rough, float((weight * np.abs(fine - coarse)).max()))
            return weight * fine

        edges = self._edges(mean, deviation)
        found = integrate(density, edges, tolerance, 2_000)
        return Estimate(found.value, found.error + rough * float(edges[-1] - edges[0]))

    def _edges(self, mean: float, deviation: float) -> NDArray[np.float64]:
        # A lognormal payment moves the weight of the integrand by at most a few deviations more.
        reach = (RANGE + 2.0 * deviation) * deviation
        return np.linspace(max(mean - reach, 0.0), max(mean + reach, 0.0), 5)


def _density(x: NDArray[np.float64], mean: Numbers, deviation: float) -> NDArray[np.float64]:
    return normal_density((x - mean) / deviation) / deviation


def _law(problem: EuropeanProblem) -> AggregateLaw | None:
    aggregate, law = problem.aggregate, problem.law
    if not aggregate.is_ranked or law.n_assets not in (2, 3) or is_sum(aggregate.kind, aggregate.weights):
        return None
    if sum(weight != 0.0 for weight in aggregate.weights) < 2:
        return None  # one ranked level has closed forms
    if np.linalg.cond(law.covariance) > 1e10:
        return None
    return RankedLevels(law, np.array(aggregate.weights))


RANKED_QUADRATURE = Family(
    "weights on sorted levels, quadrature over their gaps",
    ReferenceKind.EXACT,
    "derived here: conditioning on the gaps between sorted levels",
    _law,
)
