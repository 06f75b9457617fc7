"""An aggregate that is known already: no level that counts has any variance left."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from pricer.contracts.profile import is_above
from pricer.engines.closed_form.family import AggregateLaw, Estimate, Family, Side
from pricer.engines.closed_form.lognormal_sum import LognormalSum
from pricer.engines.problem import EuropeanProblem, ReferenceKind


@dataclass(frozen=True, slots=True)
class KnownLevel:
    """The law of a constant; ``gross`` is the sum of the absolute terms it was computed from."""

    level: float
    gross: float

    def mean(self) -> Estimate:
        return Estimate(self.level)

    def option(self, strike: float, side: Side) -> Estimate:
        return Estimate(max(side * (self.level - strike), 0.0))

    def digital(self, strike: float, side: Side) -> Estimate:
        return Estimate(1.0 if bool(is_above(self.level, strike, self.gross)) == (side == 1) else 0.0)


def _law(problem: EuropeanProblem) -> AggregateLaw | None:
    as_sum = LognormalSum.of(problem)
    if as_sum is not None:
        gross = float(np.abs(np.array(problem.aggregate.weights)) @ problem.law.forwards)
        return KnownLevel(as_sum.shift, gross) if as_sum.n_terms == 0 else None
    if np.any(np.diag(problem.law.covariance) > 0.0):
        return None
    level = float(problem.aggregate(problem.law.forwards))
    return KnownLevel(level, abs(level))


KNOWN_LEVEL = Family("known level", ReferenceKind.EXACT, "nothing left to chance", _law)
