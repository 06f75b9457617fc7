"""Sampling engine for European trades under local volatility.

Each underlying's unit martingale X follows ``d ln X = -sigma(t, ln X)^2 / 2 dt + sigma(t, ln X) dW``
with constantly correlated W; its level at expiry is ``scale X + floor``, the floor being known
cash dividends. Paths are made by a splitting scheme of weak order 2 with exact forwards
(``simulation.kernels.local_vol_tables``), on randomised low-discrepancy points by Brownian bridge
and principal components. The last step is lognormal given the state before it, with the first
two moments of the scheme's own step, and its common factor is integrated exactly, so that
kinks and jumps are smooth in what is sampled. The lognormal payoff on the same noise is the
control variate, which makes the difference of the two models a number with a small error.

Sensitivities hold the local volatility fixed as a function of time and of ``ln X`` over the
*present* forward: the surface stays where it is in strikes when the spot moves.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear
from pricer.core.randomness import Purpose, stream
from pricer.engines.monte_carlo import Sample, SamplingSettings, sample
from pricer.engines.problem import EuropeanProblem
from pricer.market.joint_lognormal import JointLognormal
from pricer.simulation.batch_means import batch_estimate
from pricer.simulation.local_vol_estimates import LocalVolEstimates, LognormalAnswer, local_vol_estimates
from pricer.simulation.local_vol_plan import LocalVolPlan
from pricer.simulation.local_vol_tables import LocalVolatility
from pricer.simulation.time_grid import TimeGrid

Array = NDArray[np.float64]


#: The lognormal last step has the largest error of all, which falls with the square of its length, while
#: what it smooths falls with the root. Measured on baskets, spreads, rankings and digitals: with a quarter
#: of the others' length, 8 steps have less bias than 16 equal ones, at the same sampling error.
_ENDING = 0.25


#: Simulated forwards are exact but for tables and sampling; off by more than this, and sampling, is said.
#: Seen only where volatilities of some hundred per cent a step are within reach of paths.
_FORWARD = 5e-5


@dataclass(frozen=True, slots=True)
class LocalVolProblem:
    """Value of ``discount_factor * E[payoff(aggregate(scales * X + floors))]`` per unit at ``years``.

    ``surfaces`` : (n,) local volatility of each X, a martingale from 1. ``correlation`` : (n, n) of the
    Brownian motions. ``scales`` : (n,) > 0 and ``floors`` : (n,) >= 0, in units of the reference level;
    ``scales + floors`` are the forwards. ``volatilities`` : (n,) annualised, > 0, of the lognormal model to
    compare with, whose forwards are the same; at-the-money ones make the best control variate.
    """

    surfaces: tuple[LocalVolatility, ...]
    correlation: Array
    scales: Array
    floors: Array
    volatilities: Array
    years: float
    aggregate: Aggregate
    payoff: PiecewiseLinear
    discount_factor: float

    def __post_init__(self) -> None:
        n = len(self.surfaces)
        shapes = self.scales.shape, self.floors.shape, self.volatilities.shape, self.correlation.shape
        if shapes != ((n,), (n,), (n,), (n, n)):
            raise ValueError(f"{n} surfaces do not fit scales, floors, volatilities, correlation of shapes {shapes}")
        if not (np.all(self.scales > 0.0) and np.all(self.floors >= 0.0) and np.all(self.volatilities > 0.0)):
            raise ValueError("scales and volatilities must be above 0, floors at least 0")
        if not (np.isfinite(self.years) and self.years > 0.0):
            raise ValueError(f"the time to expiry must be above 0; got {self.years}")

    @property
    def lognormal(self) -> EuropeanProblem:
        """The problem with lognormal levels of the same forwards."""
        forwards = self.scales + self.floors
        law = JointLognormal.from_volatilities(forwards, self.volatilities, self.correlation, self.years)
        return EuropeanProblem(law, self.aggregate, self.payoff, self.discount_factor)


@dataclass(frozen=True, slots=True)
class LocalVolSettings:
    """How much is drawn, and how finely time is cut.

    Steps are doubled from ``initial_steps`` until the bias that halving them reveals is within half
    the value's tolerance, or ``maximum_steps`` are reached.
    """

    sampling: SamplingSettings = field(default_factory=SamplingSettings)
    initial_steps: int = 8  # even
    maximum_steps: int = 64

    def __post_init__(self) -> None:
        if self.initial_steps < 4 or self.initial_steps % 2:
            raise ValueError(f"initial steps must be even and at least 4; got {self.initial_steps}")
        if self.maximum_steps < self.initial_steps:
            raise ValueError(f"{self.initial_steps} initial steps exceed {self.maximum_steps} maximum steps")


@dataclass(frozen=True, slots=True)
class LocalVolSample:
    """A value under local volatility and its sensitivities per unit, discounted, with standard errors.

    ``log_deltas`` : (n,) ``dV / d ln X(0)`` with the local volatility fixed in strikes: without cash
    dividends per logarithm of spot; with them, times spot over spot less the dividends' present value.
    ``step_difference`` : value on these steps less that on half as many, on common draws; the scheme
    being of weak order 2, about three times the bias left. ``model_difference`` : this value less the
    lognormal one. ``martingale_means`` : (n,) of X before the last step, 1 but for sampling.
    NaN stands where a sensitivity cannot be had; ``ending`` says why. Vegas are not computed.
    """

    value: float
    standard_error: float
    log_deltas: Array
    log_delta_errors: Array
    model_difference: float
    model_difference_error: float
    lognormal_value: float
    lognormal_error: float
    steps: int
    step_difference: float
    step_difference_error: float
    martingale_means: Array
    martingale_mean_errors: Array
    paths: int
    randomisations: int
    reached: bool
    ending: str
    degrees_of_freedom: int


_DEFAULT = LocalVolSettings()


def sample_local_vol(
    problem: LocalVolProblem,
    *,
    group: str,
    seed: int,
    value_tolerance: float,
    delta_tolerance: float,
    delta_fraction: float = 0.0,
    settings: LocalVolSettings = _DEFAULT,
) -> LocalVolSample:
    """Sample until the standard errors of the value and of every log-delta are within tolerance.

    Tolerances as in ``monte_carlo.sample``; ``reached`` also asks that the bias of the time steps be within
    half of ``value_tolerance`` as far as can be told. The result depends on the problem, the group's name,
    the seed, the settings and the tolerances only. Safe to call from several threads.
    """
    from pricer.simulation.local_vol_sampler import LocalVolSampler  # compiles the kernels: only when needed
    from pricer.simulation.path_noise import PathNoise

    sampling = settings.sampling
    known = sample(
        problem.lognormal,
        group=group + "/lognormal",
        seed=seed,
        value_tolerance=0.25 * value_tolerance,
        delta_tolerance=0.25 * delta_tolerance,
        delta_fraction=0.25 * delta_fraction,
        settings=sampling,
    )
    df = problem.discount_factor
    answer = _undiscounted(known, df)
    ranked = problem.aggregate.is_ranked
    plan = LocalVolPlan.of(
        problem.lognormal.law,
        problem.surfaces,
        problem.scales / (problem.scales + problem.floors),
        problem.years,
        problem.aggregate,
        problem.payoff,
        triangular=sampling.ordering == "cholesky" or (sampling.ordering == "automatic" and ranked),
    )

    def on(steps: int) -> tuple[LocalVolSampler, LocalVolSampler, TimeGrid]:
        grid = TimeGrid.of(problem.years, steps=steps, ending=_ENDING)
        streams = [stream(seed, group, Purpose.PRICE, r) for r in range(sampling.randomisations)]
        noise = PathNoise(grid, plan.loadings, plan.sizes, streams)
        coarse = LocalVolSampler(plan, grid.halved(), noise, with_ratios=False)
        return LocalVolSampler(plan, grid, noise), coarse, grid

    limit = 0.5 * value_tolerance
    points, steps = sampling.initial_points, settings.initial_steps
    fine, coarse, grid = on(steps)
    while True:
        step, step_error = _step_difference(fine.extend(points) / points, coarse.extend(points) / points, df)
        biased = (abs(step) - 2.0 * step_error) / 3.0 > limit
        if biased and 2 * steps <= settings.maximum_steps:
            steps *= 2
            fine, coarse, grid = on(steps)
        elif biased or 2.0 * step_error / 3.0 <= limit or points >= sampling.maximum_points:
            break
        else:  # cannot tell yet
            points *= 2

    unsmoothed = not plan.smooth and bool(problem.payoff.knots)
    no_deltas = unsmoothed and not problem.payoff.is_continuous
    while True:
        found = local_vol_estimates(plan, fine.extend(points) / points, answer)
        error = df * found.value_error
        delta_error = 0.0 if no_deltas else df * float(np.max(found.log_delta_errors))
        delta_limit = max(delta_tolerance, delta_fraction * df * float(np.sum(np.abs(found.log_deltas))))
        precise = error <= value_tolerance and delta_error <= delta_limit
        if precise or points >= sampling.maximum_points:
            break
        points *= 2

    notes = ["precision reached" if precise else _miss(error, value_tolerance, delta_error, delta_limit)]
    if biased:
        notes.append(f"{grid.n_steps} time steps leave a bias of about {abs(step) / 3.0:.2g} against {limit:.2g}")
    drifted = np.abs(found.means - 1.0) > 5.0 * found.mean_errors + _FORWARD
    if np.any(drifted):
        worst = int(np.argmax(np.abs(found.means - 1.0) * drifted))
        notes.append(f"the forward of asset {worst + 1} comes out {found.means[worst]:.6f} times what it is")
    sound = not biased and not np.any(drifted)
    if no_deltas:
        notes.append("sensitivities not available: the payoff jumps and the correlation leaves no factor to smooth it")
        missing = np.full(len(problem.surfaces), np.nan)
        found = found._replace(log_deltas=missing, log_delta_errors=missing)
    return _result(found, df, answer, grid.n_steps, (step, step_error), points, sampling, precise and sound, notes)


def prepare() -> None:
    """Compile the kernels, or load them from the disk cache, ahead of the first trade."""


def _undiscounted(known: Sample, df: float) -> LognormalAnswer:
    """NaN deltas (a jump that nothing smooths) serve as no control: their errors are not asked for either."""
    deltas, errors = known.log_deltas, known.log_delta_errors
    return LognormalAnswer(
        known.value / df, known.standard_error / df, np.nan_to_num(deltas / df), np.nan_to_num(errors / df)
    )


def _step_difference(fine: Array, coarse: Array, df: float) -> tuple[float, float]:
    """Value on all steps less that on half as many, on common points, and its standard error.

    The lognormal value has no time steps: its difference, of mean 0, is the control variate for the
    unlike smoothing of the two.
    """
    n = (fine.shape[1] - 2) // 3
    difference = df * (fine - coarse)
    control = difference[:, [1 + n]]
    (mean,), (error,) = batch_estimate(difference[:, [0]], control / max(float(np.max(np.abs(control))), 1e-300))
    return float(mean), float(error)


def _miss(error: float, tolerance: float, delta_error: float, delta_tolerance: float) -> str:
    misses = []
    if not error <= tolerance:
        misses.append(f"standard error {error:.2g} against {tolerance:.2g}")
    if not delta_error <= delta_tolerance:
        misses.append(f"standard error of a log-delta {delta_error:.2g} against {delta_tolerance:.2g}")
    return "budget of points spent: " + ", ".join(misses)


def _result(
    found: LocalVolEstimates,
    df: float,
    answer: LognormalAnswer,
    steps: int,
    step_difference: tuple[float, float],
    points: int,
    sampling: SamplingSettings,
    reached: bool,
    notes: list[str],
) -> LocalVolSample:
    return LocalVolSample(
        value=df * found.value,
        standard_error=df * found.value_error,
        log_deltas=df * found.log_deltas,
        log_delta_errors=df * found.log_delta_errors,
        model_difference=df * found.difference,
        model_difference_error=df * found.difference_error,
        lognormal_value=df * answer.value,
        lognormal_error=df * answer.value_error,
        steps=steps,
        step_difference=step_difference[0],
        step_difference_error=step_difference[1],
        martingale_means=found.means,
        martingale_mean_errors=found.mean_errors,
        paths=sampling.randomisations * points,
        randomisations=sampling.randomisations,
        reached=reached,
        ending="; ".join(notes),
        degrees_of_freedom=found.degrees_of_freedom,
    )
