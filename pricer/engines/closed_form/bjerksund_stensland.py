"""Spread option exercised by a feasible, almost optimal rule (Bjerksund & Stensland 2006)."""

from __future__ import annotations

import math
from dataclasses import dataclass

from scipy.special import ndtr

from pricer.engines.closed_form.family import AggregateLaw, Estimate, Family, Side, other
from pricer.engines.closed_form.spread import Spread
from pricer.engines.problem import EuropeanProblem, ReferenceKind


@dataclass(frozen=True, slots=True)
class BjerksundStensland:
    """Exercised when the long leg exceeds a power of the short leg.

    The rule is feasible, so a call's (and by parity a put's) value is never above the true one.
    """

    spread: Spread

    def mean(self) -> Estimate:
        return Estimate(self.spread.mean)

    def option(self, strike: float, side: Side) -> Estimate:
        s, excess = self.spread, strike - self.spread.shift
        if excess < 0.0:
            return BjerksundStensland(s.mirrored()).option(-strike, other(side))
        power = s.short / (s.short + excess)
        covariance, half_square = power * s.covariance, 0.5 * power * power * s.short_variance
        variance = s.long_variance - 2.0 * covariance + 2.0 * half_square
        if variance <= 0.0:
            return Estimate(max(side * (s.long - s.short - excess), 0.0))
        deviation = math.sqrt(variance)
        moneyness = math.log(s.long / (s.short + excess))
        d1 = (moneyness + 0.5 * s.long_variance - covariance + half_square) / deviation
        d2 = (moneyness - 0.5 * s.long_variance + s.covariance + half_square - power * s.short_variance) / deviation
        d3 = (moneyness - 0.5 * s.long_variance + half_square) / deviation
        legs = s.long * ndtr(side * d1) - s.short * ndtr(side * d2) - excess * ndtr(side * d3)
        return Estimate(side * float(legs))

    def digital(self, strike: float, side: Side) -> None:
        return None


def _law(problem: EuropeanProblem) -> AggregateLaw | None:
    spread = Spread.of(problem)
    return None if spread is None else BjerksundStensland(spread)


BJERKSUND_STENSLAND = Family("Bjerksund & Stensland", ReferenceKind.APPROXIMATION, "Bjerksund & Stensland (2006)", _law)
