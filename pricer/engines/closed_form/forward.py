"""A linear payoff on a weighted sum of several levels: only their forwards count."""

from __future__ import annotations

from dataclasses import dataclass

from pricer.engines.closed_form.family import AggregateLaw, Estimate, Family, Side
from pricer.engines.closed_form.lognormal_sum import LognormalSum
from pricer.engines.problem import EuropeanProblem, ReferenceKind


@dataclass(frozen=True, slots=True)
class OnlyMean:
    """A law of which nothing but the mean is asked."""

    level: float

    def mean(self) -> Estimate:
        return Estimate(self.level)

    def option(self, strike: float, side: Side) -> None:
        return None

    def digital(self, strike: float, side: Side) -> None:
        return None


def _law(problem: EuropeanProblem) -> AggregateLaw | None:
    as_sum = LognormalSum.of(problem) if not problem.payoff.knots else None
    return OnlyMean(as_sum.mean) if as_sum is not None and as_sum.n_terms >= 2 else None


FORWARD = Family("forward", ReferenceKind.EXACT, "linearity of the expectation", _law)
