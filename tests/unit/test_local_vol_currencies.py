"""Levels paid in another currency under local volatility: closed forms where surfaces are flat, Euler where not."""

from dataclasses import replace

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear, Profile, ProfileKind
from pricer.engines.local_vol_monte_carlo import LocalVolProblem, LocalVolSettings, sample_local_vol
from pricer.engines.monte_carlo import SamplingSettings, sample
from pricer.engines.problem import EuropeanProblem
from pricer.market.currency_conversion import composite, quanto, with_rates
from tests.unit.local_vol_cases import converted, flat, skewed, smile

CALL = Profile(ProfileKind.CALL, 100.0).payoff()
DIGITAL = Profile(ProfileKind.CASH_DIGITAL_CALL, 100.0, cash_amount=10.0).payoff()
FORWARD = PiecewiseLinear(0.0, 1.0)
CASES = {
    "basket call": (Aggregate.weighted_sum((0.4, 0.3, 0.3)), CALL),
    "spread digital": (Aggregate.weighted_sum((1.0, -0.6, -0.4)), PiecewiseLinear(0.0, 0.0, (0.0,), (1.0,), (5.0,))),
    "geometric digital": (Aggregate.geometric((0.4, 0.3, 0.3)), DIGITAL),
    "worst-of put": (Aggregate.worst_of(3), Profile(ProfileKind.PUT, 90.0).payoff()),
    "second best": (Aggregate.kth_best(2, 3), CALL),
}
BOTH = pytest.mark.parametrize("is_composite", [False, True], ids=["quanto", "composite"])


def fixed(points: int = 4096, steps: int = 8) -> LocalVolSettings:
    return LocalVolSettings(SamplingSettings(initial_points=points, maximum_points=points), steps, steps)


def run(problem, settings=None, **others):
    asked = {"group": "test", "seed": 1, "value_tolerance": 1e-9, "delta_tolerance": 1e-9, **others}
    return sample_local_vol(problem, settings=settings or fixed(), **asked)


def exact_law(problem: LocalVolProblem):
    """From the covariance integrated here, by the closed forms of ``market.currency_conversion``."""
    fine = np.linspace(0.0, problem.years, 30_001)  # the kinks at 0.3, 0.9 and 1.0 of 1.5 years are on it
    total = np.stack([np.interp(fine, problem.variance_times, row) for row in problem.variances])
    rises = np.sqrt(np.diff(total, axis=1))
    factors = [int(np.argmax(row)) if np.any(row) else None for row in problem.exposures]
    covariance = with_rates(problem.correlation * (rises @ rises.T), factors)
    if problem.composite:
        return composite(problem.scales, np.ones(problem.n_assets), covariance)
    return quanto(problem.scales, covariance)


@BOTH
@pytest.mark.parametrize("case", CASES)
def test_flat_surfaces_give_the_closed_forms_law_and_the_lognormal_engines_values(case, is_composite):
    problem = flat(converted(skewed(*CASES[case]), composite=is_composite))
    law = exact_law(problem)
    got = run(problem)
    own = problem.lognormal.law
    assert own.forwards == pytest.approx(law.forwards, rel=1e-10)
    assert own.covariance == pytest.approx(law.covariance, rel=1e-9)
    known = sample(
        EuropeanProblem(law, problem.aggregate, problem.payoff, problem.discount_factor),
        group="other",
        seed=2,
        value_tolerance=1e-9,
        delta_tolerance=1e-9,
        settings=fixed().sampling,
    )
    # t of 30 degrees of freedom: beyond 5 standard errors once in 40,000; single precision
    slack = 1e-6 * np.abs(known.log_deltas).sum()
    assert abs(got.value - known.value) < 5.0 * np.hypot(got.standard_error, known.standard_error) + slack
    error = np.hypot(got.log_delta_errors, known.log_delta_errors)
    assert np.all(np.abs(got.log_deltas - known.log_deltas) < 5.0 * error + 5.0 * slack)
    assert np.all(np.abs(got.level_deltas - known.log_deltas) < 5.0 * error + 5.0 * slack)
    assert abs(got.model_difference) < 5.0 * got.model_difference_error + slack


@BOTH
def test_the_forward_of_a_converted_basket_is_known(is_composite):
    problem = converted(skewed(Aggregate.weighted_sum((0.4, 0.3, 0.3)), FORWARD), composite=is_composite)
    got = run(problem, settings=fixed(16384))
    weights = problem.discount_factor * np.array(problem.aggregate.weights) * problem.scales
    if is_composite:  # whatever the model: an asset converted at the day's rate is an asset of the payment currency
        assert got.value == pytest.approx(weights.sum(), abs=5.0 * got.standard_error)
        assert np.all(np.abs(got.martingale_means - 1.0) < 5.0 * got.martingale_mean_errors + 3e-6)
    else:
        assert np.isfinite(got.martingale_means[1]) and np.all(np.isnan(got.martingale_means[[0, 2]]))
        # with skews the quanto drift is no longer that of the lognormal model, but near it
        lognormal = problem.discount_factor * np.array(problem.aggregate.weights) @ problem.lognormal.law.forwards
        assert got.value == pytest.approx(lognormal, rel=2e-3)
        assert abs(got.model_difference) > 10.0 * got.model_difference_error


@BOTH
@pytest.mark.parametrize("case", ["basket call", "worst-of put"])
def test_values_with_skews_agree_with_a_plain_euler_scheme(case, is_composite):
    aggregate, payoff = CASES[case]
    problem = converted(skewed(aggregate, payoff, cells=64), composite=is_composite)
    got = run(problem, settings=fixed(8192, 16))
    want, error = euler(problem)
    # two independent errors; 0.02 for the bias of 100 Euler steps, of order a hundredth of a 3 to 10 point value
    assert abs(got.value - want) < 4.0 * np.hypot(error, got.standard_error) + 0.02
    other = run(replace(problem, exposures=None, composite=False), settings=fixed(8192, 16))
    assert abs(got.value - other.value) > 20.0 * got.standard_error  # the conversion is seen


CHAINS = np.array([[1.0, -1.0], [0.0, 0.0], [0.0, 1.0]])


@BOTH
def test_a_cross_is_the_chain_of_its_factors_whatever_their_volatilities_do(is_composite):
    # its own correlation with an asset changes as the factors' volatilities do: with flat surfaces both models are one
    for case in ("basket call", "worst-of put"):
        problem = replace(converted(skewed(*CASES[case]), composite=is_composite), exposures=CHAINS)
        wild = problem.variances.copy()
        rises = np.diff(wild[3:], axis=1)
        wild[3:, 1:] = np.cumsum(rises * [[4.0, 0.2, 1.0], [0.2, 4.0, 1.0]], axis=1)
        problem = flat(replace(problem, variances=wild))
        got = run(problem)
        fine = np.linspace(0.0, problem.years, 30_001)
        rises = np.sqrt(np.diff(np.stack([np.interp(fine, problem.variance_times, row) for row in wild]), axis=1))
        total = problem.correlation * (rises @ rises.T)
        with_chains = np.block([[np.eye(3), np.zeros((3, 2))], [np.zeros((3, 3)), CHAINS]])
        both = with_chains @ total @ with_chains.T
        law = composite(problem.scales, np.ones(3), both) if is_composite else quanto(problem.scales, both)
        known = sample(
            EuropeanProblem(law, problem.aggregate, problem.payoff, problem.discount_factor),
            group="other", seed=2, value_tolerance=1e-9, delta_tolerance=1e-9,
            settings=SamplingSettings(initial_points=4096, maximum_points=4096),
        )  # fmt: skip
        assert problem.lognormal.law.covariance == pytest.approx(law.covariance, rel=1e-9)
        error = np.hypot(np.hypot(got.standard_error, got.step_bias), known.standard_error)
        assert abs(got.value - known.value) < 4.0 * error
        other = run(replace(problem, exposures=np.abs(CHAINS)))
        assert abs(got.value - other.value) > 10.0 * error  # the sign is seen


@BOTH
def test_crosses_with_skews_agree_with_a_plain_euler_scheme(is_composite):
    aggregate, payoff = CASES["basket call"]
    problem = replace(converted(skewed(aggregate, payoff, cells=64), composite=is_composite), exposures=CHAINS)
    got = run(problem, settings=fixed(8192, 16))
    want, error = euler(problem)
    assert abs(got.value - want) < 4.0 * np.hypot(error, got.standard_error) + 0.02  # as above


def euler(problem: LocalVolProblem, steps: int = 100, paths: int = 30_000) -> tuple[float, float]:
    """Log-Euler of X and of ln Q in their own currencies, antithetic, weighted to the payment currency's measure.

    Under the level's own measure X has no drift, and the density of the payment currency's measure is 1/Y with
    ``d ln Y = -sigma^2 / 2 dt + sigma dW`` of the *reciprocal* rate: quanto values are E[f(X) 1/Q] over its mean. Here
    the drift is put in directly, step by step, instead: ``-rho sigma_fx sigma_X dt``.
    """
    rng = np.random.default_rng(3)
    n, rows = problem.n_assets, len(problem.variances)
    root = np.linalg.cholesky(problem.correlation)
    times = np.linspace(0.0, problem.years, steps + 1)
    rises = np.diff(np.stack([np.interp(times, problem.variance_times, row) for row in problem.variances[n:]]), axis=1)
    h = problem.years / steps
    sigmas = (np.array([0.15, 0.2, 0.3]), np.array([-0.5, -0.2, -0.4]))
    half = paths // 2
    logs, rates = np.zeros((n, paths)), np.zeros((rows - n, paths))
    for s in range(steps):
        z = root @ rng.standard_normal((rows, half))
        z = np.concatenate([z, -z], axis=1) * np.sqrt(h)
        of_rate = np.sqrt(rises[:, s] / h)
        for i in range(n):
            sigma = smile(sigmas[0][i], sigmas[1][i], 0.2)(times[s] + 0.5 * h, logs[i])
            drift = -(problem.exposures[i] * problem.correlation[i, n:]) @ of_rate
            logs[i] += sigma * (z[i] + drift * h) - 0.5 * sigma**2 * h
        rates += of_rate[:, None] * z[n:] - 0.5 * rises[:, [s]]
    levels = problem.scales[:, None] * np.exp(logs)
    if problem.composite:
        own = problem.exposures @ (rates + 0.5 * rises.sum(axis=1)[:, None])
        spread = problem.exposures @ problem.covariance[n:, n:] @ problem.exposures.T
        levels *= np.exp(own - 0.5 * np.diag(spread)[:, None])
    values = problem.discount_factor * problem.payoff(problem.aggregate(levels.T))
    pairs = 0.5 * (values[:half] + values[half:])
    return float(pairs.mean()), float(pairs.std(ddof=1) / np.sqrt(half))


def test_the_quanto_drift_is_that_of_a_measure_change_by_weights():
    """Own-measure paths weighted with the density of the payment currency's measure give the same value."""
    problem = converted(skewed(Aggregate.weighted_sum((1.0,)), CALL, cells=64), composite=False)
    got = run(problem, settings=fixed(8192, 16))
    rng = np.random.default_rng(4)
    steps, half, rho = 150, 60_000, problem.correlation[0, 1]
    h = problem.years / steps
    times = np.linspace(0.0, problem.years, steps + 1)
    variance = np.diff(np.interp(times, problem.variance_times, problem.variances[1]))
    logs, weights = np.zeros(2 * half), np.zeros(2 * half)
    for s in range(steps):
        z = rng.standard_normal((2, half)) * np.sqrt(h)
        z = np.concatenate([z, -z], axis=1)
        sigma = smile(0.15, -0.5, 0.2)(times[s] + 0.5 * h, logs)
        logs += sigma * z[0] - 0.5 * sigma**2 * h
        # 1/Q is a martingale under the level's measure, with minus the volatility of Q
        of_rate = np.sqrt(variance[s] / h)
        weights += -of_rate * (rho * z[0] + np.sqrt(1.0 - rho**2) * z[1]) - 0.5 * variance[s]
    values = problem.discount_factor * np.exp(weights) * problem.payoff(problem.scales[0] * np.exp(logs))
    pairs = 0.5 * (values[:half] + values[half:])
    error = float(pairs.std(ddof=1) / np.sqrt(half))
    assert got.value == pytest.approx(float(pairs.mean()), abs=4.0 * error + 0.01)
    unshifted = run(replace(problem, exposures=None), settings=fixed(8192, 16))
    assert abs(unshifted.value - got.value) > 5.0 * error + 0.01


@pytest.mark.parametrize("case", ["basket call", "worst-of put"])
def test_level_deltas_of_composites_are_derivatives_to_their_exchange_rates(case):
    problem = converted(skewed(*CASES[case]), composite=True)
    base = run(problem)
    for rate in (0, 1):
        of_rate = problem.exposures[:, rate] == 1.0
        up, down = (run(replace(problem, scales=problem.scales * np.exp(h * of_rate))) for h in (0.01, -0.01))
        slope = (up.value - down.value) / 0.02
        noise = np.hypot(up.standard_error, down.standard_error) / 0.02
        allowed = 4.0 * np.linalg.norm(base.level_delta_errors[of_rate]) + 0.25 * noise + 0.02
        assert base.level_deltas[of_rate].sum() == pytest.approx(slope, abs=allowed)


def test_an_exchange_rate_without_volatility_converts_nothing():
    plain = skewed(*CASES["basket call"])
    problem = converted(plain, composite=True)
    still = problem.variances.copy()
    still[3:] = 0.0
    times = {"variance_times": problem.variance_times, "variances": still}
    for is_composite in (False, True):
        got = run(replace(problem, **times, composite=is_composite))
        want = run(plain)
        assert abs(got.value - want.value) < 5.0 * np.hypot(got.standard_error, want.standard_error)
    assert np.isfinite(got.standard_error)


@BOTH
def test_converted_values_repeat_themselves_to_the_last_bit(is_composite):
    problem = converted(skewed(*CASES["worst-of put"], floors=np.array([0.0, 5.0, 9.0])), composite=is_composite)
    one, two = run(problem), run(problem)
    assert one.value == two.value and np.array_equal(one.level_deltas, two.level_deltas)


def test_places_of_exchange_rates_that_do_not_fit_are_refused():
    problem = converted(skewed(*CASES["basket call"]), composite=False)
    for shape in ((3, 3), (2, 2)):
        with pytest.raises(ValueError, match=r"do not fit 3 assets and 2 rows after them"):
            replace(problem, exposures=np.zeros(shape))
    with pytest.raises(ValueError, match="must start at 0 and not decrease"):
        replace(problem, variances=-problem.variances)
    with pytest.raises(ValueError, match="before the expiry at 9"):
        replace(problem, years=9.0)
