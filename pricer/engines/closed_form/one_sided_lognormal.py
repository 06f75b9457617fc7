"""One lognormal level on one side of a second normal variable: two-dimensional normal probabilities.

The same few integrals price an option whose writer may default (Johnson & Stulz 1987; Klein 1996)
and an option whose barrier lies on another level (Heynen & Kat 1994).
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from scipy.special import ndtr

from pricer.contracts.profile import PiecewiseLinear, is_above
from pricer.engines.closed_form.family import AggregateLaw, Estimate, Side, expectation
from pricer.engines.closed_form.multivariate_normal import cdf


@dataclass(frozen=True, slots=True)
class OneSidedLognormal:
    """``forward X`` where ``where (w - limit) > 0``, and nothing elsewhere.

    ``X`` is lognormal of mean 1, ``deviation`` >= 0 that of its log; ``w`` is standard normal and has
    ``correlation`` with that log. ``forward`` > 0; ``limit`` may be infinite. Expectations are those of the
    product with the indicator: a fixed amount counts :meth:`mass`, not 1.
    """

    forward: float
    deviation: float
    correlation: float
    limit: float
    where: Side

    def mass(self) -> Estimate:
        """Probability of being on that side."""
        return Estimate(float(ndtr(-self.where * self.limit)), 1e-16)

    def mean(self) -> Estimate:
        moved = self.where * (self.correlation * self.deviation - self.limit)
        return Estimate(float(ndtr(moved)), 1e-16).times(self.forward)

    def option(self, strike: float, side: Side) -> Estimate:
        held = self._probability(strike, side, self.deviation).times(self.forward)
        paid = self._probability(strike, side, 0.0).times(strike)
        value = (held + paid.times(-1.0)).times(side)
        return Estimate(max(value.value, 0.0), value.error)

    def digital(self, strike: float, side: Side) -> Estimate:
        return self._probability(strike, side, 0.0)

    def _probability(self, strike: float, side: Side, tilt: float) -> Estimate:
        """Of both conditions, under the measure that moves the level's normal variable by ``tilt``."""
        if strike <= 0.0:
            moneyness = math.inf
        elif self.deviation == 0.0:
            moneyness = math.inf if bool(is_above(self.forward, strike)) else -math.inf
        else:
            moneyness = math.log(self.forward / strike) / self.deviation - 0.5 * self.deviation + tilt
        rho = side * self.where * self.correlation
        limits = np.array([side * moneyness, self.where * (self.correlation * tilt - self.limit)])
        return cdf(limits, np.array([[1.0, rho], [rho, 1.0]]))


def weighted_expectation(payoff: PiecewiseLinear, law: AggregateLaw, mass: Estimate) -> Estimate | None:
    """``E[weight payoff(A)]`` from a law of weighted expectations, in which a fixed amount counts ``mass``."""
    intercepts, slopes = payoff.pieces()
    anchor = next((j for j, slope in enumerate(slopes) if slope == 0.0), 0)
    fixed = float(intercepts[anchor])
    rest = expectation(replace(payoff, intercept=payoff.intercept - fixed), law)
    return None if rest is None else rest + mass.times(fixed)
