"""k-th best of a few, by inclusion and exclusion over the extremes of subsets.

The k-th best lies above a level where at least k levels do; that probability is a signed
sum over subsets of the probabilities that *all* of a subset do (Feller 1968, IV.5), so
the law of the k-th best is a signed sum of the laws of the subsets' worst, or of their best.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import combinations
from math import comb

import numpy as np

from pricer.engines.closed_form.extremes import Extreme
from pricer.engines.closed_form.family import AggregateLaw, Estimate, Family, Side
from pricer.engines.closed_form.ranks import SingleRank, scaled
from pricer.engines.problem import EuropeanProblem, ReferenceKind
from pricer.market.joint_lognormal import JointLognormal

_LARGEST = 5  # assets; subsets, and the dimension of their probabilities, grow quickly


@dataclass(frozen=True, slots=True)
class SignedMixture:
    """A law that is a signed sum of laws; the factors add up to 1."""

    parts: tuple[tuple[float, Extreme], ...]

    def mean(self) -> Estimate:
        return _sum([law.mean().times(factor) for factor, law in self.parts])

    def option(self, strike: float, side: Side) -> Estimate:
        return _sum([law.option(strike, side).times(factor) for factor, law in self.parts])

    def digital(self, strike: float, side: Side) -> Estimate:
        return _sum([law.digital(strike, side).times(factor) for factor, law in self.parts])


def kth_best(law: JointLognormal, rank: int) -> SignedMixture:
    """The law of the level of rank ``rank`` (1 is the best), from the fewer of the two kinds of subsets."""
    n = law.n_assets
    best = rank < (n + 1) / 2  # subsets of at least n - rank + 1 levels; otherwise of at least rank
    at_least = n - rank + 1 if best else rank
    parts = []
    for size in range(at_least, n + 1):
        factor = (-1.0) ** (size - at_least) * comb(size - 1, at_least - 1)
        for subset in combinations(range(n), size):
            chosen = np.array(subset)
            part = JointLognormal(law.forwards[chosen], law.covariance[np.ix_(chosen, chosen)])
            parts.append((factor, Extreme(part, best)))
    return SignedMixture(tuple(parts))


def _sum(estimates: list[Estimate]) -> Estimate:
    return sum(estimates, Estimate(0.0))


def _law(problem: EuropeanProblem) -> AggregateLaw | None:
    single = SingleRank.of(problem)
    if single is None or single.is_best or single.is_worst or problem.law.n_assets > _LARGEST:
        return None
    return scaled(kth_best(single.law, single.rank), single.weight)


ORDER_STATISTICS = Family(
    "k-th best, inclusion and exclusion over subsets",
    ReferenceKind.EXACT,
    "Johnson (1987); Feller (1968)",
    _law,
)
