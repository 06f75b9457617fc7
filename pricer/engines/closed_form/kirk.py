"""Spread option as an exchange option on one leg against the other plus strike (Kirk 1995)."""

from __future__ import annotations

import math
from dataclasses import dataclass

from pricer.engines.closed_form.family import AggregateLaw, Estimate, Family, Side, other
from pricer.engines.closed_form.lognormal import black
from pricer.engines.closed_form.spread import Spread
from pricer.engines.problem import EuropeanProblem, ReferenceKind


@dataclass(frozen=True, slots=True)
class Kirk:
    """Short leg plus strike taken as lognormal, its volatility diluted by the strike."""

    spread: Spread

    def mean(self) -> Estimate:
        return Estimate(self.spread.mean)

    def option(self, strike: float, side: Side) -> Estimate:
        s, excess = self.spread, strike - self.spread.shift
        if excess < 0.0:  # a call on the spread is a put on its mirror image
            return Kirk(s.mirrored()).option(-strike, other(side))
        share = s.short / (s.short + excess)
        variance = s.long_variance - 2.0 * share * s.covariance + share * share * s.short_variance
        return Estimate(float(black(s.long, s.short + excess, math.sqrt(max(variance, 0.0)), side)))

    def digital(self, strike: float, side: Side) -> None:
        return None


def _law(problem: EuropeanProblem) -> AggregateLaw | None:
    spread = Spread.of(problem)
    return None if spread is None else Kirk(spread)


KIRK = Family("Kirk", ReferenceKind.APPROXIMATION, "Kirk (1995)", _law)
