"""Sampling engine for European trades: randomised low-discrepancy points, one factor integrated exactly.

Independent scrambles of one Sobol sequence are doubled until the standard errors asked for
hold. Sums run in block order and nothing is thrown away, so a result depends only on
the problem, the group's name, the seed, the settings and the tolerances, never on who else
is being priced. See ``simulation.design`` for the method and ``simulation.estimates`` for
what is estimated.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import AggregateKind
from pricer.contracts.profile import is_above
from pricer.core.randomness import Purpose, stream
from pricer.engines.problem import EuropeanProblem
from pricer.simulation.design import Design
from pricer.simulation.estimates import Estimates, estimates
from pricer.simulation.plain import path_sums

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class SamplingSettings:
    """How much is drawn, and what the first points of a sequence, the best ones, drive.

    ``ordering``: "principal components", "cholesky", or "automatic", which takes principal
    components for sums and Cholesky for ranked aggregates: measured, it serves these better
    and at half the cost. Geometric aggregates leave nothing to order.
    """

    randomisations: int = 32
    initial_points: int = 1024  # per randomisation, a power of two
    maximum_points: int = 2**19  # per randomisation, a power of two
    ordering: Literal["automatic", "principal components", "cholesky"] = "automatic"

    def __post_init__(self) -> None:
        if self.randomisations < 4:
            raise ValueError(f"at least 4 randomisations are needed for an error; got {self.randomisations}")
        for name, points in (("initial", self.initial_points), ("maximum", self.maximum_points)):
            if points < 1 or points & (points - 1) or points > 2**24:
                raise ValueError(f"{name} points must be a power of two up to 2^24; got {points}")
        if self.maximum_points < self.initial_points:
            raise ValueError(f"{self.initial_points} initial points exceed {self.maximum_points} maximum points")


@dataclass(frozen=True, slots=True)
class Sample:
    """A sampled value and its sensitivities per unit, discounted, each with its standard error.

    Sensitivities are to the logarithms of the forwards, ``dV/d ln F`` and ``F^2 d2V/dF2``,
    and to the deviations of the log-levels at fixed correlation, ``dV/ds``; all (n,).
    ``log_gammas`` is None for ranked aggregates, whose second derivative sits where the
    ranking switches. NaN stands where a sensitivity cannot be had; ``ending`` says why.
    Errors have ``degrees_of_freedom``: take Student's t for intervals.
    """

    value: float
    standard_error: float
    log_deltas: Array
    log_delta_errors: Array
    log_gammas: Array | None
    log_gamma_errors: Array | None
    deviation_vegas: Array
    deviation_vega_errors: Array
    paths: int
    randomisations: int
    reached: bool
    ending: str
    degrees_of_freedom: int


_DEFAULT = SamplingSettings()


def sample(
    problem: EuropeanProblem,
    *,
    group: str,
    seed: int,
    value_tolerance: float,
    delta_tolerance: float,
    delta_fraction: float = 0.0,
    settings: SamplingSettings = _DEFAULT,
) -> Sample:
    """Sample until the standard errors of the value and of every log-delta are within tolerance.

    Tolerances are per unit, discounted. For log-deltas the tolerance is ``delta_tolerance`` or
    ``delta_fraction`` of their gross sum, whichever is larger: a digital near its strike moves
    by many times the amount it pays. Raises ValueError where log-levels are too wide for
    single precision (a deviation above 13 over the whole time). Safe to call from several
    threads. Bits also depend on the processor, and for some 100 assets or more on the number
    of threads the linear algebra library may use: hold it to one.
    """
    ranked = problem.aggregate.is_ranked
    triangular = settings.ordering == "cholesky" or (settings.ordering == "automatic" and ranked)
    design = Design.of(problem.law, problem.aggregate, problem.payoff, triangular=triangular)
    if design.dimensions == 0:
        return _exact(problem, design)

    from pricer.simulation.sampler import Sampler  # compiles the kernels: only when they are needed

    sampler = Sampler(design, stream(seed, group, Purpose.PRICE, 0), settings.randomisations)
    df = problem.discount_factor
    unsmoothed = not design.is_smoothed and bool(design.payoff.knots)
    no_deltas = unsmoothed and not design.payoff.is_continuous
    points = settings.initial_points
    while True:
        found = estimates(design, sampler.extend(points) / points, points)
        error = df * found.value_error
        delta_error = 0.0 if no_deltas else df * float(np.max(found.log_delta_errors))
        delta_limit = max(delta_tolerance, delta_fraction * df * float(np.sum(np.abs(found.log_deltas))))
        reached = error <= value_tolerance and delta_error <= delta_limit
        if reached or points >= settings.maximum_points:
            break
        points *= 2

    paths = settings.randomisations * points
    notes = ["precision reached"] if reached else [_miss(error, value_tolerance, delta_error, delta_limit)]
    if found.few_decide:
        notes.append(f"few of {paths} paths came past a kink: errors include what all may have missed")
    if no_deltas:
        notes.append("sensitivities not available: the payoff jumps and the covariance leaves no factor to smooth it")
    elif unsmoothed and not ranked:
        notes.append("gammas not available: the covariance leaves no factor to smooth the payoff's kinks")
    if unsmoothed:
        found = _without(found, first_order=no_deltas)
    return _result(problem, found, paths, settings.randomisations, reached, "; ".join(notes))


def prepare() -> None:
    """Compile the kernels, or load them from the disk cache, ahead of the first trade."""
    import pricer.simulation.sampler  # noqa: F401


def _miss(error: float, tolerance: float, delta_error: float, delta_tolerance: float) -> str:
    misses = []
    if not error <= tolerance:
        misses.append(f"standard error {error:.2g} against {tolerance:.2g}")
    if not delta_error <= delta_tolerance:
        misses.append(f"standard error of a log-delta {delta_error:.2g} against {delta_tolerance:.2g}")
    return "budget of points spent: " + ", ".join(misses)


def _exact(problem: EuropeanProblem, design: Design) -> Sample:
    """One path, where the common factor is all there is to integrate or nothing moves at all."""
    means = np.tile(path_sums(design, np.zeros((0, 1))), (4, 1))
    found = estimates(design, means, 1)
    ending = "exact: nothing is left to sample"
    zero = np.zeros(design.n_assets)
    found = found._replace(value_error=0.0, log_delta_errors=zero, log_gamma_errors=zero, vega_errors=zero)
    if not design.is_smoothed and _on_an_edge(design):
        found = _without(found, first_order=True)
        ending += "; sensitivities not available: the aggregate stands on a kink, a jump or a tie"
    return _result(problem, found, 1, 1, True, ending)


def _on_an_edge(design: Design) -> bool:
    """Does an aggregate that cannot move stand where its payoff, or its ranking, has a corner?"""
    head = path_sums(design, np.zeros((0, 1)))
    level, knots = head[1] + head[2], np.array(design.payoff.knots)
    best_first = -np.sort(-design.forwards)
    summed = design.kind is AggregateKind.WEIGHTED_SUM
    gross = float(np.abs(design.weights) @ design.forwards if summed else np.abs(design.rank_weights) @ best_first)
    if np.any(~is_above(level, knots, gross) & ~is_above(knots, level, gross)):
        return True
    tied = ~is_above(best_first[:-1], best_first[1:])
    return bool(np.any(tied & (np.diff(design.rank_weights) != 0.0)))


def _without(found: Estimates, *, first_order: bool) -> Estimates:
    """Gammas, and with ``first_order`` all sensitivities, marked as missing."""
    missing = np.full(len(found.log_deltas), np.nan)
    found = found._replace(log_gammas=missing, log_gamma_errors=missing)
    if first_order:
        found = found._replace(log_deltas=missing, log_delta_errors=missing, vegas=missing, vega_errors=missing)
    return found


def _result(
    problem: EuropeanProblem, found: Estimates, paths: int, randomisations: int, reached: bool, ending: str
) -> Sample:
    df = problem.discount_factor
    ranked = problem.aggregate.is_ranked
    return Sample(
        value=df * found.value,
        standard_error=df * found.value_error,
        log_deltas=df * found.log_deltas,
        log_delta_errors=df * found.log_delta_errors,
        log_gammas=None if ranked else df * found.log_gammas,
        log_gamma_errors=None if ranked else df * found.log_gamma_errors,
        deviation_vegas=df * found.vegas,
        deviation_vega_errors=df * found.vega_errors,
        paths=paths,
        randomisations=randomisations,
        reached=reached,
        ending=ending,
        degrees_of_freedom=found.degrees_of_freedom,
    )
