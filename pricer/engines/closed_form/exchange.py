"""Option to exchange one level for another (Margrabe 1978)."""

from __future__ import annotations

import math
from dataclasses import dataclass

from pricer.engines.closed_form.family import AggregateLaw, Estimate, Family, Side
from pricer.engines.closed_form.lognormal import ROUNDING, black, exceedance
from pricer.engines.closed_form.spread import Spread
from pricer.engines.problem import EuropeanProblem, ReferenceKind


@dataclass(frozen=True, slots=True)
class Exchange:
    """The law of a spread, known only where the strike asks which of the two is worth more."""

    spread: Spread

    def mean(self) -> Estimate:
        return Estimate(self.spread.mean)

    def option(self, strike: float, side: Side) -> Estimate | None:
        s = self.spread
        if strike != s.shift:
            return None
        value = black(s.long, s.short, math.sqrt(self._variance), side)
        return Estimate(float(value), ROUNDING * (s.long + s.short))

    def digital(self, strike: float, side: Side) -> Estimate | None:
        s = self.spread
        if strike != s.shift:
            return None
        # The ratio's forward under the payment measure, not with a level as numeraire.
        ratio_forward = s.long / s.short * math.exp(s.short_variance - s.covariance)
        return Estimate(float(exceedance(ratio_forward, 1.0, math.sqrt(self._variance), side)), ROUNDING)

    @property
    def _variance(self) -> float:
        s = self.spread
        return max(s.long_variance + s.short_variance - 2.0 * s.covariance, 0.0)


def _law(problem: EuropeanProblem) -> AggregateLaw | None:
    spread = Spread.of(problem) if problem.payoff.knots else None
    return None if spread is None else Exchange(spread)


EXCHANGE = Family("exchange option", ReferenceKind.EXACT, "Margrabe (1978)", _law)
