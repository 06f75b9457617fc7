"""Problems and settings that the tests of early exercise share."""

from __future__ import annotations

import numpy as np

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear, Profile, ProfileKind
from pricer.engines.early_exercise.certificate import CertificateSettings
from pricer.engines.early_exercise.engine import EarlyExerciseSettings
from pricer.engines.early_exercise.fitting import FitSettings
from pricer.engines.early_exercise.problem import EarlyExerciseProblem, Right

#: Enough for a few tenths of a per cent on a handful of assets, in well under a second.
QUICK = EarlyExerciseSettings(
    seed=1,
    group="quick",
    gap=1e-2,
    rounds=1,
    fit=FitSettings(blocks=8, points=256, inner=64),
    certificate=CertificateSettings(blocks=16, points=128, inner=64),
)


def call(strike: float) -> PiecewiseLinear:
    return Profile(ProfileKind.CALL, strike).payoff()


def put(strike: float) -> PiecewiseLinear:
    return Profile(ProfileKind.PUT, strike).payoff()


def alike(n: int, correlation: float) -> np.ndarray:
    return correlation + (1.0 - correlation) * np.eye(n)


def best_of_call(
    n: int = 3,
    times: np.ndarray | None = None,
    *,
    spot: float = 100.0,
    correlation: float = 0.0,
    volatilities: np.ndarray | None = None,
    right: Right = Right.HOLDER,
    payoff: PiecewiseLinear | None = None,
    aggregate: Aggregate | None = None,
) -> EarlyExerciseProblem:
    """The Bermudan best-of call of the literature: rate 5 %, yield 10 %, volatility 20 %, dates every four months."""
    return EarlyExerciseProblem.from_constants(
        np.arange(1, 10) / 3.0 if times is None else times,
        np.full(n, spot),
        rate=0.05,
        dividend_yields=np.full(n, 0.1),
        volatilities=np.full(n, 0.2) if volatilities is None else volatilities,
        correlation=alike(n, correlation),
        aggregate=Aggregate.best_of(n) if aggregate is None else aggregate,
        payoff=call(100.0) if payoff is None else payoff,
        right=right,
    )
