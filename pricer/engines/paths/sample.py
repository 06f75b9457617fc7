"""Value, deltas and stop probabilities of a path-dependent product, from one pass.

Independent scrambles of one Sobol sequence are doubled until the standard errors asked for hold,
as in ``engines.monte_carlo``. Sensitivities are exact derivatives of what is sampled, through
survival probabilities and conditional draws.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from pricer.core.randomness import Purpose, stream
from pricer.engines.paths.law import PathLaw
from pricer.engines.paths.plan import PathProblem, Tables
from pricer.simulation.batch_means import batch_estimate

if TYPE_CHECKING:
    from pricer.simulation.path_sampler import PathSampler

Array = NDArray[np.float64]

#: Log-levels in single precision are off by this much, relatively; errors never claim to be smaller.
_ROUNDING = 2.0**-23


@dataclass(frozen=True, slots=True)
class PathSettings:
    """How much is drawn, points being per randomisation and powers of two.

    ``maximum_steps`` limits paths times dates times levels: so many cost some seconds.
    """

    randomisations: int = 32
    initial_points: int = 256
    maximum_points: int = 2**16
    maximum_steps: int = 2**28
    with_ratios: bool = True

    def __post_init__(self) -> None:
        if self.randomisations < 4:
            raise ValueError(f"at least 4 randomisations are needed for an error; got {self.randomisations}")
        for name, points in (("initial", self.initial_points), ("maximum", self.maximum_points)):
            if points < 1 or points & (points - 1) or points > 2**24:
                raise ValueError(f"{name} points must be a power of two up to 2^24; got {points}")
        if self.maximum_points < self.initial_points:
            raise ValueError(f"{self.initial_points} initial points exceed {self.maximum_points} maximum points")

    def most_points(self, law: PathLaw) -> int:
        """The largest number of points per randomisation within the limits, not below the initial one."""
        within = max(self.maximum_steps // (self.randomisations * law.forwards.size), 1)
        return int(max(min(self.maximum_points, 2 ** (within.bit_length() - 1)), self.initial_points))


@dataclass(frozen=True, slots=True)
class LegSample:
    """One leg: its value, and where paths leave it.

    ``dates`` : (n_events,) places among the law's dates; ``above``, ``below`` : (n_events,) probabilities of
    being stopped there, with errors; ``life`` : expected years until it is stopped or ends. Probabilities of a
    leg that branches off count from the branch on. ``stopped_above_error``, ``stopped_below_error`` : of their sums.
    """

    value: float
    value_error: float
    dates: NDArray[np.int64]
    above: Array
    above_errors: Array
    below: Array
    below_errors: Array
    life: float
    life_error: float
    stopped_above_error: float = np.nan
    stopped_below_error: float = np.nan

    @property
    def stopped_above(self) -> float:
        """Probability of being stopped above at any date."""
        return float(self.above.sum())

    @property
    def stopped_below(self) -> float:
        return float(self.below.sum())


@dataclass(frozen=True, slots=True)
class PathSample:
    """Per unit, discounted. ``log_deltas`` : (n,) ``dV / d ln S``, all forwards of an asset moving together;
    ``forward_deltas`` : (n_dates, n) ``dV / d ln F`` date by date. NaN where jumps are not smoothed."""

    value: float
    standard_error: float
    log_deltas: Array
    log_delta_errors: Array
    forward_deltas: Array
    legs: tuple[LegSample, ...]
    paths: int
    randomisations: int
    reached: bool
    ending: str


_DEFAULT = PathSettings()


def sample_paths(
    problem: PathProblem,
    *,
    group: str,
    seed: int,
    value_tolerance: float,
    delta_tolerance: float = np.inf,
    delta_fraction: float = 0.0,
    settings: PathSettings = _DEFAULT,
) -> PathSample:
    """Sample until the standard errors of the value and of every log-delta are within tolerance.

    For log-deltas that is ``delta_tolerance`` or ``delta_fraction`` of their gross sum, whichever is larger.
    """
    tables = Tables(problem)
    sampler = _sampler(tables, group, seed, settings)
    points, most = settings.initial_points, settings.most_points(problem.law)
    while True:
        out = _result(tables, problem, sampler.extend(points) / points, points, settings.with_ratios)
        delta_error, delta_limit = 0.0, delta_tolerance
        if settings.with_ratios and tables.is_smoothed:
            delta_error = float(np.max(out.log_delta_errors))
            delta_limit = max(delta_tolerance, delta_fraction * float(np.sum(np.abs(out.log_deltas))))
        reached = out.standard_error <= value_tolerance and delta_error <= delta_limit
        if reached or points >= most:
            break
        points *= 2
    notes = ["precision reached" if reached else "budget of points spent"]
    if not tables.is_smoothed:
        notes.append("sensitivities not available: between two dates the covariance leaves no factor to smooth jumps")
    return replace(out, reached=reached, ending="; ".join(notes))


def batch_values(
    problem: PathProblem, *, group: str, seed: int, points: int, settings: PathSettings = _DEFAULT
) -> Array:
    """The value by randomisation, (randomisations,), from the same points as :func:`sample_paths` draws."""
    tables = Tables(problem)
    sampler = _sampler(tables, group, seed, replace(settings, with_ratios=False))
    out: Array = sampler.extend(points)[:, : len(problem.legs)].sum(axis=1) / points
    return out


def _sampler(tables: Tables, group: str, seed: int, settings: PathSettings) -> PathSampler:
    from pricer.simulation.path_sampler import Method, PathSampler  # compiles: only when needed

    method = Method.SMOOTH_WITH_RATIOS if settings.with_ratios else Method.SMOOTH
    random = stream(seed, group, Purpose.PRICE, 0)
    return PathSampler(tables.plan(), random, settings.randomisations, method=method)


def _result(tables: Tables, problem: PathProblem, means: Array, points: int, with_ratios: bool) -> PathSample:
    n_legs, n_events = len(problem.legs), (sum(len(rows) for rows in tables.rows))
    n = problem.law.n_assets
    leg_means = means[:, :n_legs]
    above, below = means[:, n_legs : n_legs + n_events], means[:, n_legs + n_events : n_legs + 2 * n_events]
    values, value_errors = batch_estimate(leg_means)
    (value,), (error,) = batch_estimate(leg_means.sum(axis=1, keepdims=True))
    by_reading = means[:, n_legs + 2 * n_events :].reshape(len(means), -1, n)
    by_date = tables.forward_deltas(by_reading)
    deltas, delta_errors = batch_estimate(by_date.sum(axis=1))
    if not with_ratios or not tables.is_smoothed:
        deltas = delta_errors = np.full(n, np.nan)
        by_date = np.full_like(by_date, np.nan)
    rounding = _ROUNDING * (abs(float(value)) + float(np.abs(by_date).sum(axis=(1, 2)).mean()))
    up, up_errors = batch_estimate(above)
    down, down_errors = batch_estimate(below)
    legs = []
    for number, rows in enumerate(tables.rows):
        dates, places = np.array(list(rows)), np.array(list(rows.values()))
        years = problem.law.times[dates]
        saved = (above[:, places] + below[:, places]) @ (years[-1] - years)  # on top of paths that are never stopped
        (life,), (life_error,) = batch_estimate((years[-1] - saved)[:, None])
        legs.append(
            LegSample(
                float(values[number]),
                float(value_errors[number]),
                dates,
                up[places],
                up_errors[places],
                down[places],
                down_errors[places],
                float(life),
                float(life_error),
                *(float(batch_estimate(side[:, places].sum(axis=1)[:, None])[1][0]) for side in (above, below)),
            )
        )
    return PathSample(
        float(value),
        float(np.hypot(error, 0.0 if np.isnan(rounding) else rounding)),
        deltas,
        delta_errors,
        by_date.mean(axis=0),
        tuple(legs),
        points * len(means),
        len(means),
        False,
        "",
    )
