"""Sampling engine for European trades under local volatility.

Each underlying's unit martingale X follows ``d ln X = -sigma(t, ln X)^2 / 2 dt + sigma(t, ln X) dW``
with constantly correlated W; its level at expiry is ``scale X + floor``, the floor being known
cash dividends. Paths are made by a splitting scheme of weak order 2 with exact forwards
(``simulation.kernels.local_vol_tables``), on randomised low-discrepancy points by Brownian bridge
and principal components. The last step is lognormal given the state before it, with the first
two moments of the scheme's own step, and its common factor is integrated exactly, so that
kinks and jumps are smooth in what is sampled. The lognormal payoff on the same noise is the
control variate, which makes the difference of the two models a number with a small error; its known
value is that of the exact law, which also takes away what steps do to both models alike
(``simulation.lognormal_steps``).

Quanto levels have a known drift under the payment currency's measure, composite ones are simulated
together with their exchange rate (``simulation.lognormal_steps``).

A problem without surfaces has lognormal X: where its levels are lognormal too it goes to the lognormal
engine; levels above known amounts that a payoff does not just add up are sampled here, on two
exact steps and a short last one.

Sensitivities hold the local volatility fixed as a function of time and of ``ln X`` over the
*present* forward: the surface stays where it is in strikes when the spot moves.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pricer.engines.local_vol_paths import LocalVolSettings, PathSamplers
from pricer.engines.local_vol_problem import LocalVolProblem
from pricer.engines.local_vol_sample import LocalVolSample, as_lognormal, without_paths
from pricer.engines.monte_carlo import Sample, sample
from pricer.engines.problem import EuropeanProblem
from pricer.simulation.batch_means import batch_estimate
from pricer.simulation.local_vol_estimates import KnownAnswer, LocalVolEstimates, StepEvidence, local_vol_estimates

__all__ = ["LocalVolProblem", "LocalVolSample", "LocalVolSettings", "sample_local_vol"]

Array = NDArray[np.float64]

#: Simulated forwards are exact but for tables and sampling; off by more than this, and sampling, is said.
#: Seen only where volatilities of some hundred per cent a step are within reach of paths.
_FORWARD = 5e-5

#: Relative change of a deviation to differentiate by.
_BUMP = 0.01

#: The lognormal numbers are asked for this much more precisely, to be no burden to the others.
_FINER = 0.25


_DEFAULT = LocalVolSettings()


@dataclass(frozen=True, slots=True)
class _Tolerances:
    value: float
    delta: float
    fraction: float

    @property
    def finer(self) -> _Tolerances:
        return _Tolerances(_FINER * self.value, _FINER * self.delta, _FINER * self.fraction)


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
    half of ``value_tolerance`` as far as can be told, and together with the standard error within all of
    it. The result depends on the problem, the group's name, the seed, the settings and the tolerances only.
    Safe to call from several threads.
    """
    tolerances = _Tolerances(value_tolerance, delta_tolerance, delta_fraction)
    problem = problem.with_floors_in_payoff()
    if problem.is_lognormal and not problem.has_floors:
        return without_paths(_lognormal(problem.lognormal, group, seed, tolerances, settings))
    return _sample_paths(problem, group, seed, tolerances, settings)


def _lognormal(
    problem: EuropeanProblem, group: str, seed: int, tolerances: _Tolerances, settings: LocalVolSettings
) -> Sample:
    return sample(
        problem,
        group=group,
        seed=seed,
        value_tolerance=tolerances.value,
        delta_tolerance=tolerances.delta,
        delta_fraction=tolerances.fraction,
        settings=settings.sampling,
    )


def _sample_paths(
    problem: LocalVolProblem, group: str, seed: int, tolerances: _Tolerances, settings: LocalVolSettings
) -> LocalVolSample:
    sampling, df = settings.sampling, problem.discount_factor
    paths = PathSamplers(problem, group, seed, settings)
    limit = 0.5 * tolerances.value
    points = sampling.initial_points
    while True:
        found_steps = StepEvidence.of(*paths.halvings(points))
        biased = df * found_steps.bias > limit
        told = found_steps.least_bias > 0.0 if biased else df * found_steps.noise <= limit
        if biased and told and paths.can_be_cut:
            paths.cut(paths.level + 1)
        elif told or points >= sampling.maximum_points:
            break
        else:
            points *= 2
    bias = df * found_steps.bias

    known = _lognormal(paths.control, group + "/lognormal", seed, tolerances.finer, settings)
    answer = _undiscounted(known, df)
    unsmoothed = not paths.plan.smooth and bool(problem.payoff.knots)
    no_deltas = unsmoothed and not problem.payoff.is_continuous
    left = min(bias, limit)  # error and bias together are to meet the tolerance
    asked = float(np.sqrt(tolerances.value**2 - left**2))
    while True:
        means = paths.fine.extend(points) / points
        means[:, :2] += found_steps.correction
        found = local_vol_estimates(paths.plan, means, points, answer)
        error = df * found.value_error
        delta_error = 0.0 if no_deltas else df * float(np.max(found.log_delta_errors))
        delta_limit = max(tolerances.delta, tolerances.fraction * df * float(np.sum(np.abs(found.log_deltas))))
        precise = error <= asked and delta_error <= delta_limit
        if precise or points >= sampling.maximum_points:
            break
        points *= 2

    notes = ["precision reached" if precise else _miss(error, asked, delta_error, delta_limit)]
    if biased:
        steps = f"{paths.grid.n_steps} time steps" if not problem.is_lognormal else "the last time step's length"
        notes.append(f"{steps} leave{'s' if problem.is_lognormal else ''} a bias of about {bias:.2g} "
                     f"against {limit:.2g}")  # fmt: skip
    n_paths = sampling.randomisations * points
    if found.few_decide:
        notes.append(f"few of {n_paths} paths came past a kink: errors include what all may have missed")
    means = found.means
    if not problem.composite:
        means = np.where(problem.is_converted, np.nan, means)
    drifted = np.abs(means - 1.0) > 5.0 * found.mean_errors + _FORWARD
    if np.any(drifted):
        worst = int(np.nanargmax(np.abs(means - 1.0) * drifted))
        notes.append(f"the forward of asset {worst + 1} comes out {means[worst]:.6f} times what it is")
    notes += [f"assets {i + 1} and {j + 1} are tied: only their sensitivities' sum counts" for i, j in problem.ties]
    if no_deltas:
        notes.append("sensitivities not available: the payoff jumps and the correlation leaves no factor to smooth it")
        found = _without_deltas(found)
    result = LocalVolSample(
        value=df * found.value,
        standard_error=error,
        log_deltas=df * found.log_deltas,
        log_delta_errors=df * found.log_delta_errors,
        level_deltas=df * found.level_deltas,
        level_delta_errors=df * found.level_delta_errors,
        model_difference=0.0,
        model_difference_error=0.0,
        lognormal=known,
        steps=paths.grid.n_steps,
        step_difference=df * found_steps.difference,
        step_difference_error=df * found_steps.difference_error,
        step_bias=bias,
        martingale_means=means,
        martingale_mean_errors=found.mean_errors,
        paths=n_paths,
        randomisations=sampling.randomisations,
        reached=precise and not biased and not bool(np.any(drifted)),
        ending="; ".join(notes),
        degrees_of_freedom=found.degrees_of_freedom,
    )
    if problem.is_lognormal:
        vegas, vega_errors = _vegas(paths, known, result.log_deltas)
        return replace(result, lognormal=as_lognormal(result, vegas, vega_errors))
    if problem.has_floors:
        lognormal = sample_local_vol(
            replace(problem, surfaces=()),
            group=group + "/known amounts",
            seed=seed,
            value_tolerance=tolerances.finer.value,
            delta_tolerance=tolerances.finer.delta,
            delta_fraction=tolerances.finer.fraction,
            settings=settings,
        ).lognormal
        return replace(
            result,
            lognormal=lognormal,
            model_difference=result.value - lognormal.value,
            model_difference_error=float(np.hypot(error, lognormal.standard_error)),
        )
    own = (found.control_slope - 1.0) * known.standard_error
    without = np.sqrt(max(error**2 - (found.control_slope * known.standard_error) ** 2, 0.0))
    return replace(
        result, model_difference=result.value - known.value, model_difference_error=float(np.hypot(without, own))
    )


def _vegas(paths: PathSamplers, known: Sample, log_deltas: Array) -> tuple[Array, Array]:
    """Of lognormal X above known amounts, to the deviations of ln X at fixed forwards: vegas and errors (n,).

    Those of the control are known; the difference of the two is smooth, and small, and is differentiated
    on common draws. A quanto's forward moves with the deviation: that part is taken off again, as
    the lognormal engine's vegas do not have it. ``log_deltas`` : (n,) discounted. NaN for composites, whose
    correlations would move too.
    """
    problem = paths.problem
    n, points, shares = problem.n_assets, paths.fine.points, paths.shares
    vegas, errors = (np.full(n, np.nan) for _ in range(2))
    if paths.converts or not np.all(np.isfinite(log_deltas)):
        return vegas, errors
    covariance = problem.covariance
    for asset, exposures in enumerate(problem.rate_exposures):
        deviation = np.sqrt(covariance[asset, asset])
        if deviation == 0.0:
            continue
        up, down = (
            paths.with_lognormal_deviation(asset, factor).fine.extend(points)[:, :2] / points
            for factor in (1.0 + _BUMP, 1.0 - _BUMP)
        )
        moves = problem.discount_factor * (up - down) / (2.0 * _BUMP * deviation)
        (move,), (move_error,) = batch_estimate(moves[:, [0]] - moves[:, [1]])
        drift = covariance[asset, n:] @ exposures / deviation
        of_control = known.deviation_vegas[asset] - drift * known.log_deltas[asset]
        vegas[asset] = shares[asset] * of_control + move + drift * log_deltas[asset]
        errors[asset] = np.hypot(shares[asset] * known.deviation_vega_errors[asset], move_error)
    return vegas, errors


def _undiscounted(known: Sample, df: float) -> KnownAnswer:
    """NaN deltas (a jump that nothing smooths) serve as no control: their errors are not asked for either."""
    deltas, errors = known.log_deltas, known.log_delta_errors
    return KnownAnswer(
        known.value / df, known.standard_error / df, np.nan_to_num(deltas / df), np.nan_to_num(errors / df)
    )


def _miss(error: float, tolerance: float, delta_error: float, delta_tolerance: float) -> str:
    misses = []
    if not error <= tolerance:
        misses.append(f"standard error {error:.2g} against {tolerance:.2g}")
    if not delta_error <= delta_tolerance:
        misses.append(f"standard error of a log-delta {delta_error:.2g} against {delta_tolerance:.2g}")
    return "budget of points spent: " + ", ".join(misses)


def _without_deltas(found: LocalVolEstimates) -> LocalVolEstimates:
    missing = np.full(len(found.log_deltas), np.nan)
    return found._replace(
        log_deltas=missing, log_delta_errors=missing, level_deltas=missing, level_delta_errors=missing
    )
