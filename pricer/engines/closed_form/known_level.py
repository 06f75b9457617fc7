"""An aggregate that is known already: no level that counts has any variance left."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from pricer.engines.closed_form.family import AggregateLaw, Estimate, Family, Side
from pricer.engines.closed_form.lognormal_sum import LognormalSum
from pricer.engines.problem import EuropeanProblem, ReferenceKind


@dataclass(frozen=True, slots=True)
class KnownLevel:
    """The law of a constant."""

    level: float

    def mean(self) -> Estimate:
        return Estimate(self.level)

    def option(self, strike: float, side: Side) -> Estimate:
        return Estimate(max(side * (self.level - strike), 0.0))

    def digital(self, strike: float, side: Side) -> Estimate:
        return Estimate(1.0 if (self.level > strike) == (side == 1) else 0.0)


def _law(problem: EuropeanProblem) -> AggregateLaw | None:
    as_sum = LognormalSum.of(problem)
    if as_sum is not None:
        return KnownLevel(as_sum.shift) if as_sum.n_terms == 0 else None
    if np.any(np.diag(problem.law.covariance) > 0.0):
        return None
    return KnownLevel(float(problem.aggregate(problem.law.forwards)))


KNOWN_LEVEL = Family("known level", ReferenceKind.EXACT, "nothing left to chance", _law)
