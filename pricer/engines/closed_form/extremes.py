"""Best and worst of several: multivariate normal probabilities under changed numeraires.

Each level's share of the payoff is its forward times the probability, with that level as
numeraire, of its being the extreme one and in the money (Stulz 1982 for two assets;
Johnson 1987 and Ouwehand & West 2006 for any number).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from pricer.engines.closed_form.family import AggregateLaw, Estimate, Family, Side
from pricer.engines.closed_form.multivariate_normal import RECURSION_LIMIT, within
from pricer.engines.closed_form.ranks import SingleRank, scaled
from pricer.engines.problem import EuropeanProblem, ReferenceKind
from pricer.market.joint_lognormal import JointLognormal


@dataclass(frozen=True, slots=True)
class Extreme:
    """The law of the best (``best`` True) or the worst of the levels."""

    law: JointLognormal
    best: bool

    def mean(self) -> Estimate:
        return self._shares(None, 1)

    def option(self, strike: float, side: Side) -> Estimate:
        if strike <= 0.0:
            return self.mean() + Estimate(-strike) if side == 1 else Estimate(0.0)
        held = self._shares(strike, side)
        paid = self.digital(strike, side).times(-strike)
        value = (held + paid).times(side)
        return Estimate(max(value.value, 0.0), value.error)

    def digital(self, strike: float, side: Side) -> Estimate:
        if strike <= 0.0:
            return Estimate(1.0 if side == 1 else 0.0)
        # The best is at or below the strike if all are; the worst is above it if all are.
        n, sign = self.law.n_assets, 1.0 if self.best else -1.0
        limits = sign * (np.log(strike / self.law.forwards) + 0.5 * np.diag(self.law.covariance))
        strict = np.full(n, not self.best)
        all_of_them = within(sign * np.eye(n), limits, self.law.covariance, strict)
        if self.best == (side == -1):
            return all_of_them
        return Estimate(1.0 - all_of_them.value, all_of_them.error + 1e-16)

    def _shares(self, strike: float | None, side: Side) -> Estimate:
        """``E[A 1{side (A - strike) > 0}]``; without a strike, ``E[A]``."""
        total = Estimate(0.0)
        for i, forward in enumerate(self.law.forwards):
            total = total + self._probability(i, strike, side).times(float(forward))
        return total

    def _probability(self, i: int, strike: float | None, side: Side) -> Estimate:
        """That level ``i`` is the extreme one and in the money, with level ``i`` as numeraire."""
        n, forwards, covariance = self.law.n_assets, self.law.forwards, self.law.covariance
        sign = 1.0 if self.best else -1.0
        others = np.array([j for j in range(n) if j != i])
        rows = sign * (np.eye(n)[others] - np.eye(n)[i])
        drift = np.log(forwards) - 0.5 * np.diag(covariance) + covariance[:, i]
        limits = sign * (drift[i] - drift[others])
        strict = others < i  # of equal levels the first one counts
        if strike is not None:
            rows = np.vstack((rows, -side * np.eye(n)[i]))
            limits = np.append(limits, side * (drift[i] - np.log(strike)))
            strict = np.append(strict, side == 1)
        return within(rows, limits, covariance, strict)


def _two(problem: EuropeanProblem) -> AggregateLaw | None:
    return _law(problem) if problem.law.n_assets == 2 else None


def _several(problem: EuropeanProblem) -> AggregateLaw | None:
    return _law(problem) if problem.law.n_assets > 2 else None


def _law(problem: EuropeanProblem) -> AggregateLaw | None:
    single = SingleRank.of(problem)
    if single is None or not (single.is_best or single.is_worst):
        return None
    only_digital = not any(problem.payoff.bends) and problem.payoff.slope == 0.0
    if problem.law.n_assets > RECURSION_LIMIT and not only_digital:
        return None  # a probability for each level, by lattice points, is no better than sampling the payoff
    return scaled(Extreme(single.law, single.is_best), single.weight)


TWO_ASSET_EXTREMES = Family("best or worst of two, bivariate normal", ReferenceKind.EXACT, "Stulz (1982)", _two)
EXTREMES = Family(
    "best or worst of several, multivariate normal",
    ReferenceKind.EXACT,
    "Johnson (1987); Ouwehand & West (2006)",
    _several,
)
