"""Intervals after a run has stopped by itself, at and far from the money, against quadrature."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.special import ndtr
from scipy.stats import t as student

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear, Profile, ProfileKind
from pricer.engines.monte_carlo import sample
from pricer.engines.problem import EuropeanProblem
from pricer.market.joint_lognormal import JointLognormal

BP = 1e-4  # the default precision, for a notional of 1


def call(forward: float, deviation: float, strike: float) -> float:
    """Black (1976); a strike at or below 0 leaves the forward."""
    if strike <= 0.0:
        return forward - strike
    d = np.log(forward / strike) / deviation + 0.5 * deviation
    return float(forward * ndtr(d) - strike * ndtr(d - deviation))


@dataclass(frozen=True)
class Case:
    """Two assets at ``forwards``; ``given`` values what is left once the first level is known."""

    forwards: tuple[float, float]
    deviations: tuple[float, float]
    correlation: float
    aggregate: Aggregate
    payoff: PiecewiseLinear
    given: Callable[[float, float, float], float]  # (first level, forward and deviation of the second)

    def problem(self) -> EuropeanProblem:
        c = np.array([[1.0, self.correlation], [self.correlation, 1.0]])
        return EuropeanProblem(
            JointLognormal(np.array(self.forwards), np.outer(self.deviations, self.deviations) * c),
            self.aggregate,
            self.payoff,
            1.0,
        )

    def value(self) -> float:
        """By adaptive quadrature over the first asset's normal, in pieces against kinks."""
        (f1, f2), (s1, s2), rho = self.forwards, self.deviations, self.correlation

        def integrand(z: float) -> float:
            first = f1 * np.exp(s1 * z - 0.5 * s1 * s1)
            second = f2 * np.exp(rho * s2 * z - 0.5 * (rho * s2) ** 2)
            return self.given(first, second, s2 * np.sqrt(1 - rho * rho)) * np.exp(-0.5 * z * z) / np.sqrt(2 * np.pi)

        return sum(quad(integrand, a, a + 0.5, epsabs=1e-14, epsrel=1e-11)[0] for a in np.arange(-12.0, 12.0, 0.5))


def of(kind: ProfileKind, strike: float) -> PiecewiseLinear:
    return Profile(kind, strike).payoff()


def above_both(strike: float) -> Callable[[float, float, float], float]:
    return lambda x, f, s: float(ndtr(np.log(f / strike) / s - 0.5 * s)) if x > strike else 0.0


CASES = {
    "spread at the money": Case(
        (1.0, 1.0),
        (0.2, 0.3),
        0.5,
        Aggregate.weighted_sum((-1.0, 1.0)),
        of(ProfileKind.CALL, 0.0),
        lambda x, f, s: call(f, s, x),
    ),
    "spread far out of the money": Case(
        (1.0, 1.0),
        (0.3, 0.3),
        -0.5,
        Aggregate.weighted_sum((-1.0, 1.0)),
        of(ProfileKind.CALL, 1.0),
        lambda x, f, s: call(f, s, 1.0 + x),
    ),
    "basket out of the money": Case(
        (1.0, 1.0),
        (0.2, 0.3),
        0.5,
        Aggregate.weighted_sum((0.5, 0.5)),
        of(ProfileKind.CALL, 1.3),
        lambda x, f, s: 0.5 * call(f, s, 2.6 - x),
    ),
    "best of two out of the money": Case(
        (1.0, 1.0),
        (0.7, 0.7),
        -0.9,
        Aggregate.best_of(2),
        of(ProfileKind.CALL, 3.0),
        lambda x, f, s: max(x, 3.0) - 3.0 + call(f, s, max(x, 3.0)),
    ),
    "digital on the worst of two": Case(
        (1.0, 1.0),
        (0.1, 0.15),
        0.3,
        Aggregate.worst_of(2),
        of(ProfileKind.CASH_DIGITAL_CALL, 1.2),
        above_both(1.2),
    ),
}


def distances(case: Case, seeds: int, group: str = "coverage") -> tuple[np.ndarray, int]:
    """Errors of the value in stated standard errors, over seeds, and degrees of freedom."""
    problem, want, out = case.problem(), case.value(), []
    for seed in range(seeds):
        got = sample(problem, group=group, seed=seed, value_tolerance=BP, delta_tolerance=BP, delta_fraction=BP)
        assert got.reached
        out.append((got.value - want) / got.standard_error)
    return np.abs(out), got.degrees_of_freedom


def test_intervals_after_adaptive_stopping_cover_what_they_claim():
    """1,000 runs: 10 misses of 99 % intervals expected, 13 allowed (one deviation more), and none at 6.

    With 16 randomisations and the usual error, unwidened for skewness, 14 were missed and the
    furthest lay 8 standard errors away.
    """
    missed, furthest = 0, 0.0
    for case in CASES.values():
        z, freedom = distances(case, 200)
        missed += int(np.sum(z > student.ppf(0.995, freedom)))
        furthest = max(furthest, float(z.max()))
    assert missed <= 13
    assert furthest < 6.0


@pytest.mark.long
@pytest.mark.parametrize("name", CASES)
def test_intervals_cover_case_by_case(name):
    z, freedom = distances(CASES[name], 4000, group="coverage, long")
    # 1.5 % at the money and 2 % away from it
    assert np.mean(z > student.ppf(0.995, freedom)) < (0.015 if "at the money" in name else 0.02)
    # 5 is passed by Student's t with 14 degrees of freedom, the least in use, by 2 in 10,000
    assert np.sum(z > 5.0) <= 4
