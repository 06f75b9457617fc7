"""A sum of lognormals driven by one normal variable: exact at any strike and for any signs.

The sum crosses the strike at the real roots of a sum of exponentials; between two roots
the expectation is Black's formula term by term. With all weights positive there is one
root (Jamshidian 1989); with signed weights there are at most as many as changes of sign,
when the terms are sorted by exponent (Descartes' rule, in Laguerre's form of 1883).
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

from pricer.engines.closed_form.family import AggregateLaw, Estimate, Family, Side
from pricer.engines.closed_form.lognormal_sum import LognormalSum
from pricer.engines.problem import EuropeanProblem, ReferenceKind

_FAR = 40.0  # normal probabilities beyond are below the smallest double


@dataclass(frozen=True, slots=True)
class OneFactorSum:
    """``shift + sum_i coefficients[i] exp(loadings[i] w - loadings[i]^2 / 2)``, ``w`` standard normal."""

    shift: float
    coefficients: NDArray[np.float64]
    loadings: NDArray[np.float64]

    def mean(self) -> Estimate:
        return Estimate(self.shift + float(self.coefficients.sum()))

    def option(self, strike: float, side: Side) -> Estimate:
        k = strike - self.shift
        value = 0.0
        for lo, hi in self._where(k, side):
            terms = self.coefficients @ _between(lo - self.loadings, hi - self.loadings)
            value += side * float(terms - k * _between(np.array(lo), np.array(hi)))
        return Estimate(max(value, 0.0), self._rounding(k))

    def digital(self, strike: float, side: Side) -> Estimate:
        k = strike - self.shift
        return Estimate(sum(float(_between(np.array(lo), np.array(hi))) for lo, hi in self._where(k, side)), 1e-13)

    def roots(self, strike: float) -> list[float]:
        """Where the sum crosses ``strike``, in rising order."""
        amounts = np.append(self.coefficients * np.exp(-0.5 * self.loadings**2), self.shift - strike)
        exponents = np.append(self.loadings, 0.0)
        distinct, where = np.unique(exponents, return_inverse=True)
        merged = np.zeros(distinct.size)
        np.add.at(merged, where.ravel(), amounts)
        reach = _FAR + float(np.abs(self.loadings).max(initial=0.0))
        return exponential_roots(merged, distinct, -reach, reach)

    def _where(self, k: float, side: Side) -> list[tuple[float, float]]:
        """Intervals of ``w`` on which ``side (sum - strike)`` is positive."""
        edges = [-np.inf, *self.roots(k + self.shift), np.inf]
        found = []
        for lo, hi in pairwise(edges):
            inside = min(max(0.0, lo + 1.0), hi - 1.0) if hi - lo > 2.0 else 0.5 * (lo + hi)
            level = float(self.coefficients @ np.exp(self.loadings * (inside - 0.5 * self.loadings)))
            if (level > k) == (side == 1):
                found.append((lo, hi))
        return found

    def _rounding(self, k: float) -> float:
        return 1e-15 * (float(np.abs(self.coefficients).sum()) + abs(k))


def exponential_roots(
    amounts: NDArray[np.float64], exponents: NDArray[np.float64], low: float, high: float
) -> list[float]:
    """All sign changes of ``sum_i amounts[i] exp(exponents[i] w)`` on (low, high); exponents rise.

    Multiplying by ``exp(-p w)``, with p between two exponents where the amounts change
    sign, and differentiating removes that change of sign; the roots of the derivative
    separate those of the sum, so that each is bracketed and none is missed.
    """
    kept = amounts != 0.0
    a, p = amounts[kept], exponents[kept]
    changes = np.flatnonzero(np.sign(a[1:]) != np.sign(a[:-1]))
    if changes.size == 0:
        return []
    pivot = 0.5 * (p[changes[0]] + p[changes[0] + 1])
    turning = exponential_roots(a * (p - pivot), p, low, high) if changes.size > 1 else []
    edges = [low, *turning, high]
    signs = [_sign(a, p, w) for w in edges]
    roots = []
    for (lo, hi), (below, above) in zip(pairwise(edges), pairwise(signs), strict=True):
        if below * above < 0.0:
            roots.append(_bracketed(a, p, lo, hi, above))
    return roots


def _sign(a: NDArray[np.float64], p: NDArray[np.float64], w: float) -> float:
    size = np.log(np.abs(a)) + p * w
    return float(np.sign(np.sign(a) @ np.exp(size - size.max())))


def _bracketed(a: NDArray[np.float64], p: NDArray[np.float64], low: float, high: float, above: float) -> float:
    """The root between ``low`` and ``high``, by Newton steps on the log of positive over negative terms."""
    logs, plus = np.log(np.abs(a)), a > 0.0
    w = min(max(0.0, low), high)
    for _ in range(200):
        size = logs + p * w
        terms = np.exp(size - size.max())
        up, down = terms[plus], terms[~plus]
        upper, lower = up.sum(), down.sum()
        if upper <= 0.0 or lower <= 0.0:
            gap, slope = (1.0 if upper > 0.0 else -1.0), 0.0
        else:
            gap = float(np.log(upper / lower))
            slope = float(up @ p[plus] / upper - down @ p[~plus] / lower)
        if gap * above > 0.0:
            high = w
        else:
            low = w
        new = w - gap / slope if slope * above > 0.0 else np.inf
        if not low <= new <= high:
            new = 0.5 * (low + high)
        step, w = abs(new - w), new
        if step < 1e-13 * (1.0 + abs(w)):
            break
    return float(w)


def _between(lo: NDArray[np.float64], hi: NDArray[np.float64]) -> NDArray[np.float64]:
    """Normal probability of (lo, hi), from the nearer tail."""
    right = lo > 0.0
    return np.asarray(np.where(right, ndtr(-lo) - ndtr(-hi), ndtr(hi) - ndtr(lo)))


def _law(problem: EuropeanProblem) -> AggregateLaw | None:
    as_sum = LognormalSum.of(problem) if problem.payoff.knots else None
    if as_sum is None or as_sum.n_terms < 2:
        return None
    deviations = as_sum.deviations
    correlation = as_sum.covariance / np.outer(deviations, deviations)
    if np.any(np.abs(correlation) < 1.0 - 4e-15):
        return None
    return OneFactorSum(as_sum.shift, as_sum.coefficients, deviations * np.sign(correlation[0]))


ONE_FACTOR_SUM = Family("perfectly correlated sum", ReferenceKind.EXACT, "Jamshidian (1989), with all roots", _law)
