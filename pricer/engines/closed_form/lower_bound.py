"""Lower bound on an option on a sum of lognormals: the option on its conditional mean."""

from __future__ import annotations

from dataclasses import dataclass

from pricer.engines.closed_form.conditioning import directions
from pricer.engines.closed_form.family import AggregateLaw, Estimate, Family, Side
from pricer.engines.closed_form.lognormal_sum import LognormalSum
from pricer.engines.closed_form.one_factor_sum import OneFactorSum
from pricer.engines.problem import EuropeanProblem, ReferenceKind


@dataclass(frozen=True, slots=True)
class ConditionalMean:
    """Jensen's inequality, given one normal variable; the best of a few such variables counts."""

    total: LognormalSum

    def mean(self) -> Estimate:
        return Estimate(self.total.mean)

    def option(self, strike: float, side: Side) -> Estimate:
        intrinsic = Estimate(max(side * (self.total.mean - strike), 0.0))
        bounds = [
            OneFactorSum(self.total.shift, self.total.coefficients, direction.loadings).option(strike, side)
            for direction in directions(self.total, strike)
        ]
        return max((intrinsic, *bounds), key=lambda bound: bound.value)

    def digital(self, strike: float, side: Side) -> None:
        return None


def _law(problem: EuropeanProblem) -> AggregateLaw | None:
    as_sum = LognormalSum.of(problem)
    return ConditionalMean(as_sum) if as_sum is not None and as_sum.n_terms >= 2 else None


LOWER_BOUND = Family(
    "conditional mean",
    ReferenceKind.LOWER_BOUND,
    "Rogers & Shi (1995); Curran (1994); Carmona & Durrleman (2005)",
    _law,
)
