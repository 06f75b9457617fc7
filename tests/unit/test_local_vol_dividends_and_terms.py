"""Known dividends on top of lognormal or local-volatility levels, and variances that bend in time."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.special import ndtr

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import Profile, ProfileKind
from pricer.engines.local_vol_monte_carlo import LocalVolSettings, sample_local_vol
from pricer.engines.monte_carlo import SamplingSettings, sample
from pricer.engines.problem import EuropeanProblem
from pricer.market.joint_lognormal import JointLognormal
from tests.unit.local_vol_cases import constant, converted, flat, skewed, smile, tabulated

CALL = Profile(ProfileKind.CALL, 100.0).payoff()
DIGITAL = Profile(ProfileKind.CASH_DIGITAL_CALL, 100.0, cash_amount=10.0).payoff()
FLOORS = np.array([12.0, 4.0, 20.0])
SUMS = {
    "basket call": (Aggregate.weighted_sum((0.4, 0.3, 0.3)), CALL),
    "spread put": (Aggregate.weighted_sum((1.0, -0.6, -0.4)), Profile(ProfileKind.PUT, 2.0).payoff()),
    "basket digital": (Aggregate.weighted_sum((0.4, 0.3, 0.3)), DIGITAL),
}
OTHERS = {
    "geometric call": (Aggregate.geometric((0.4, 0.3, 0.3)), CALL),
    "best-of call": (Aggregate.best_of(3), CALL),
    "worst-of put": (Aggregate.worst_of(3), Profile(ProfileKind.PUT, 90.0).payoff()),
    "second best": (Aggregate.kth_best(2, 3), CALL),
    "rank weighted": (Aggregate.rank_weighted((0.5, 0.3, 0.2)), CALL),
    "worst-of digital": (
        Aggregate.worst_of(3),
        Profile(ProfileKind.CASH_DIGITAL_CALL, 90.0, cash_amount=10.0).payoff(),
    ),
}


def fixed(points: int = 4096, steps: int = 8) -> LocalVolSettings:
    return LocalVolSettings(SamplingSettings(initial_points=points, maximum_points=points), steps, steps)


def run(problem, settings=None, **others):
    asked = {"group": "test", "seed": 1, "value_tolerance": 1e-9, "delta_tolerance": 1e-9, **others}
    return sample_local_vol(problem, settings=settings or fixed(), **asked)


def plain_value(problem, points: int = 2**17) -> tuple[float, float]:
    """Lognormal X drawn at expiry in NumPy, antithetic."""
    rng = np.random.default_rng(11)
    n = problem.n_assets
    deviations = np.sqrt(problem.variances[:n, -1])
    z = np.linalg.cholesky(problem.correlation[:n, :n]) @ rng.standard_normal((n, points))
    values = []
    for sign in (1.0, -1.0):
        x = np.exp(sign * deviations[:, None] * z - 0.5 * deviations[:, None] ** 2)
        levels = problem.scales[:, None] * x + problem.floors[:, None]
        values.append(problem.payoff(problem.aggregate(levels.T)))
    pairs = problem.discount_factor * 0.5 * (values[0] + values[1])
    return float(pairs.mean()), float(pairs.std(ddof=1) / np.sqrt(points))


@pytest.mark.parametrize("case", [*SUMS, *OTHERS])
def test_lognormal_levels_above_known_amounts_have_the_value_of_a_plain_sample(case):
    problem = replace(skewed(*{**SUMS, **OTHERS}[case], floors=FLOORS), surfaces=())
    got = run(problem)
    want, error = plain_value(problem)
    # two independent errors, the second of 131,000 pairs
    assert abs(got.value - want) < 4.5 * np.hypot(error, got.standard_error)
    # sums need no path at all; rankings and products two exact steps and a short last one
    assert got.steps == (0 if case in SUMS else 4)
    assert got.model_difference == 0.0 and got.lognormal.value == got.value


@pytest.mark.parametrize("case", OTHERS)
def test_the_short_last_step_of_lognormal_levels_hardly_matters(case):
    problem = replace(skewed(*OTHERS[case], floors=FLOORS), surfaces=())
    got = run(problem)
    # half of 0.1 bp of the level is what a trade may ask for
    assert abs(got.step_difference) / 3.0 < 5e-4 + 2.0 * got.step_difference_error
    assert np.all(np.abs(got.martingale_means - 1.0) < 5.0 * got.martingale_mean_errors + 3e-6)


def test_a_single_lognormal_level_above_a_known_amount_is_blacks_formula_on_what_moves():
    problem = replace(skewed(Aggregate.weighted_sum((1.0,)), CALL, floors=np.array([10.0])), surfaces=())
    s = 0.15 * np.sqrt(1.5)
    d = np.log(90.0 / 90.0) / s + 0.5 * s
    black = 0.95 * 90.0 * (ndtr(d) - ndtr(d - s))
    assert run(problem).value == pytest.approx(black, rel=1e-12)
    ranked = replace(problem, aggregate=Aggregate.best_of(1))  # the same level by the way of paths
    got = run(ranked, settings=fixed(8192))
    assert got.steps == 4
    assert abs(got.value - black) < 5.0 * got.standard_error + abs(got.step_difference)


@pytest.mark.parametrize("case", SUMS)
def test_known_amounts_in_a_sum_are_part_of_the_strike_under_local_volatility_too(case):
    problem = skewed(*SUMS[case], floors=FLOORS)
    known = float(np.array(problem.aggregate.weights) @ FLOORS)
    shifted = replace(problem, floors=np.zeros(3), payoff=problem.payoff.of_shifted_argument(known))
    got, want = run(problem), run(shifted)
    assert got.value == want.value and got.lognormal.value == want.lognormal.value


@pytest.mark.parametrize("case", ["best-of call", "geometric call"])
def test_flat_surfaces_with_known_amounts_are_the_lognormal_model_with_them(case):
    problem = flat(skewed(*OTHERS[case], floors=FLOORS))
    got = run(problem, settings=fixed(8192, 16))
    error = np.hypot(got.standard_error, got.lognormal.standard_error)
    assert abs(got.model_difference) < 5.0 * error + abs(got.step_difference)
    assert got.model_difference_error >= got.standard_error


@pytest.mark.parametrize("case", [*OTHERS, "quanto"])
def test_vegas_above_known_amounts_are_differences_of_values(case):
    is_quanto = case == "quanto"
    problem = replace(skewed(*OTHERS["best-of call" if is_quanto else case], floors=FLOORS), surfaces=())
    if is_quanto:
        problem = converted(problem, composite=False)
    base = run(problem, settings=fixed(1024))
    vegas, errors = base.lognormal.deviation_vegas, base.lognormal.deviation_vega_errors
    covariance = problem.covariance
    for i, exposures in enumerate(problem.rate_exposures):
        deviation = np.sqrt(covariance[i, i])
        values = []
        for factor in (1.03, 0.97):
            variances = problem.variances.copy()
            variances[i] *= factor**2
            # own draws: nothing is shared with the engine's own differences
            values.append(run(replace(problem, variances=variances), settings=fixed(1024), seed=5))
        slope = (values[0].value - values[1].value) / (0.06 * deviation)
        noise = np.hypot(values[0].standard_error, values[1].standard_error) / (0.06 * deviation)
        drift = -covariance[i, 3:] @ exposures / deviation  # of the forward's logarithm
        want = pytest.approx(slope, abs=4.0 * errors[i] + 0.6 * noise + 0.02 * np.abs(vegas).max())
        assert vegas[i] + drift * base.log_deltas[i] == want
    assert np.all(errors < 0.05 * np.abs(vegas).max())


def bent(problem, times=(0.0, 0.2, 0.7, 1.5), factors=(1.8, 0.5, 1.1)):
    """Variances of the same size, bent in time, each asset in its own way."""
    t = np.array(times)
    rates = problem.variances[:, -1] / problem.years
    bends = np.stack([np.roll(factors, i) for i in range(problem.n_assets)])
    rises = rates[:, None] * bends * np.diff(t)
    return replace(
        problem, variance_times=t, variances=np.concatenate([np.zeros((len(rates), 1)), rises], axis=1).cumsum(axis=1)
    )


def test_the_covariance_is_the_integral_of_the_volatilities_product():
    problem = bent(skewed(*SUMS["basket call"]))
    vol = np.sqrt(np.diff(problem.variances, axis=1) / np.diff(problem.variance_times))

    def at(i, t):
        return vol[i, np.searchsorted(problem.variance_times[1:-1], t)]

    want = 0.4 * quad(lambda t: at(0, t) * at(1, t), 0.0, 1.5, points=[0.2, 0.7])[0]
    assert problem.covariance[0, 1] == pytest.approx(want, rel=1e-9)
    assert np.diag(problem.covariance) == pytest.approx(problem.variances[:, -1], rel=1e-12)
    early = replace(problem, years=0.5)  # ends inside a piece
    assert np.diag(early.covariance) == pytest.approx(
        [np.interp(0.5, problem.variance_times, v) for v in problem.variances]
    )


@pytest.mark.parametrize("case", [*SUMS, "best-of call", "second best", "geometric call"])
def test_flat_surfaces_that_vary_in_time_are_the_lognormal_model(case):
    problem = flat(bent(skewed(*{**SUMS, **OTHERS}[case])))
    got = run(problem)
    law = JointLognormal(problem.scales, problem.covariance)
    own = EuropeanProblem(law, problem.aggregate, problem.payoff, problem.discount_factor)
    known = sample(own, group="other", seed=2, value_tolerance=1e-9, delta_tolerance=1e-9, settings=fixed().sampling)
    # the same paths: what steps do to correlations of unlike volatilities is taken away with the control
    slack = 1e-6 * np.abs(known.log_deltas).sum()
    error = np.hypot(got.standard_error, known.standard_error)
    assert abs(got.value - known.value) < 5.0 * error + slack
    assert abs(got.model_difference) < 4.0 * got.model_difference_error
    assert abs(got.step_difference) < 5.0 * got.step_difference_error + slack
    assert got.lognormal.value == pytest.approx(known.value, abs=5.0 * error)


@pytest.mark.parametrize("case", ["basket call", "best-of call"])
def test_volatilities_that_jump_in_time_need_no_more_steps(case):
    problem = bent(skewed(*{**SUMS, **OTHERS}[case]))
    rows = np.sqrt(np.diff(problem.variances, axis=1) / np.diff(problem.variance_times))
    jumps = problem.variance_times[1:-1]
    surfaces = []
    for row, skew in zip(rows, (-0.5, -0.2, -0.4), strict=True):

        def sigma(t, k, row=row, skew=skew):
            return row[np.searchsorted(jumps, t)] * smile(1.0, skew, 0.2)(t, k)

        surfaces.append(tabulated(sigma, float(row.mean()), 1.5, cells=60))  # both jumps are between cells
    problem = replace(problem, surfaces=tuple(surfaces))
    few, many = (run(problem, settings=fixed(4096, steps)) for steps in (8, 64))
    bias = 0.005  # half a basis point of the level
    assert abs(few.value - many.value) < 4.0 * np.hypot(few.standard_error, many.standard_error) + bias


def test_the_lognormal_model_of_the_answer_is_the_exact_one_with_its_vegas():
    problem = bent(skewed(*SUMS["basket call"]))
    got = run(problem)
    alone = run(replace(problem, surfaces=()))
    assert alone.steps == 0 and alone.value == alone.lognormal.value
    error = np.hypot(alone.standard_error, got.lognormal.standard_error)
    assert abs(got.lognormal.value - alone.value) < 5.0 * error
    assert np.all(np.isfinite(got.lognormal.deviation_vegas)) and np.all(got.lognormal.deviation_vegas > 0.0)
    assert got.model_difference_error > 0.0


@pytest.mark.parametrize("is_lognormal", [False, True])
def test_variances_next_to_nothing_leave_the_intrinsic_value(is_lognormal):
    problem = skewed(Aggregate.weighted_sum((0.4, 0.3, 0.3)), Profile(ProfileKind.CALL, 90.0).payoff())
    times, variances = constant(np.full(3, 1e-5), problem.years)
    problem = replace(problem, variance_times=times, variances=variances)
    problem = replace(problem, surfaces=()) if is_lognormal else flat(problem)
    got = run(problem)
    forward = float(np.array(problem.aggregate.weights) @ problem.scales)
    assert got.value == pytest.approx(0.95 * (forward - 90.0), abs=1e-4)
    assert got.log_deltas == pytest.approx(0.95 * np.array(problem.aggregate.weights) * problem.scales, rel=1e-4)


def test_an_asset_without_any_variance_is_no_obstacle():
    problem = skewed(*OTHERS["best-of call"])
    variances = problem.variances.copy()
    variances[1] = 0.0
    problem = flat(replace(problem, variances=variances))
    got = run(problem, settings=fixed(4096, 16))
    assert abs(got.value - got.lognormal.value) < 5.0 * got.model_difference_error + 2e-3
    assert np.isfinite(got.standard_error)


@pytest.mark.parametrize("is_composite", [False, True])
def test_known_amounts_are_converted_like_the_rest(is_composite):
    problem = converted(skewed(*SUMS["basket call"], floors=FLOORS), composite=is_composite)
    lognormal = run(replace(problem, surfaces=()))
    moved = flat(problem)
    got = run(moved, settings=fixed(8192, 16))
    assert abs(got.value - lognormal.value) < 5.0 * np.hypot(got.standard_error, lognormal.standard_error) + 1e-3
    # a known amount paid in another currency is no known amount of a composite: three steps, not none
    assert lognormal.steps == (4 if is_composite else 0)
