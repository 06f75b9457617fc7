"""The local-volatility engine: limits it must reach, sensitivities, repeats, and how it ends."""

from dataclasses import replace

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear, Profile, ProfileKind
from pricer.engines.local_vol_monte_carlo import LocalVolSettings, sample_local_vol
from pricer.engines.monte_carlo import SamplingSettings, sample
from pricer.simulation.batch_means import batch_estimate
from tests.unit.local_vol_cases import flat, paths_of, skewed

CALL = Profile(ProfileKind.CALL, 100.0).payoff()
DIGITAL = Profile(ProfileKind.CASH_DIGITAL_CALL, 100.0, cash_amount=10.0).payoff()
NEAR_0 = PiecewiseLinear(0.0, 0.0, (0.0,), (1.0,), (5.0,))
BASKET = Aggregate.weighted_sum((0.4, 0.3, 0.3))
CASES = {
    "basket call": (BASKET, CALL),
    "basket digital": (BASKET, DIGITAL),
    "spread with a jump": (Aggregate.weighted_sum((1.0, -0.6, -0.4)), NEAR_0),
    "geometric digital": (Aggregate.geometric((0.4, 0.3, 0.3)), DIGITAL),
    "worst-of digital": (
        Aggregate.worst_of(3),
        Profile(ProfileKind.CASH_DIGITAL_CALL, 90.0, cash_amount=10.0).payoff(),
    ),
    "best-of call": (Aggregate.best_of(3), CALL),
    "second best": (Aggregate.kth_best(2, 3), CALL),
}


def fixed(points: int = 2048, steps: int = 8) -> LocalVolSettings:
    sampling = SamplingSettings(initial_points=points, maximum_points=points)
    return LocalVolSettings(sampling, initial_steps=steps, maximum_steps=steps)


def run(problem, *, seed=1, group="test", settings=None, value_tolerance=1e-9, delta_tolerance=1e-9):
    settings = fixed() if settings is None else settings
    tolerances = {"value_tolerance": value_tolerance, "delta_tolerance": delta_tolerance}
    return sample_local_vol(problem, group=group, seed=seed, settings=settings, **tolerances)


@pytest.mark.parametrize("case", CASES)
def test_a_flat_surface_is_the_lognormal_model(case):
    problem = flat(skewed(*CASES[case]))
    got = run(problem)
    lognormal = sample(problem.lognormal, group="other", seed=2, value_tolerance=1e-9, delta_tolerance=1e-9)
    scale = abs(lognormal.value) + np.abs(lognormal.log_deltas).max()
    # the same paths up to single precision: no error worth the name is left but the rounding claimed
    assert abs(got.model_difference) < 4.0 * got.model_difference_error < 1e-5 * scale
    # t of 30 degrees of freedom: beyond 5 standard errors once in 40,000
    assert abs(got.value - lognormal.value) < 5.0 * np.hypot(got.standard_error, lognormal.standard_error)
    error = np.hypot(got.log_delta_errors, lognormal.log_delta_errors)
    assert np.all(np.abs(got.log_deltas - lognormal.log_deltas) < 5.0 * error)
    assert abs(got.step_difference) < 5.0 * got.step_difference_error + 1e-6 * scale


@pytest.mark.parametrize("dividends", [False, True])
@pytest.mark.parametrize("case", CASES)
def test_deltas_are_differences_of_values_with_the_surface_held_in_strikes(case, dividends):
    aggregate, payoff = CASES[case]
    floors = np.array([0.0, 8.0, 15.0]) if dividends else None
    base = run(skewed(aggregate, payoff, floors=floors))
    for i in range(3):
        # 0.01: differences of tabulated surfaces are smooth, but tables of paths are straight between nodes
        up, down = (
            run(skewed(aggregate, payoff, floors=floors, shifts=h * np.eye(3)[i]), settings=fixed())
            for h in (0.01, -0.01)
        )
        slope = (up.value - down.value) / 0.02
        # same draws, but each value with its own regression on its control: a few of the delta's own errors
        noise = np.hypot(up.standard_error, down.standard_error) / 0.02
        allowed = 4.0 * base.log_delta_errors[i] + 0.25 * noise + 2e-3 * np.abs(base.log_deltas).max()
        assert base.log_deltas[i] == pytest.approx(slope, abs=allowed)


@pytest.mark.parametrize("case", ["basket digital", "worst-of digital"])
def test_deltas_of_digitals_are_as_stable_as_values(case):
    base = run(skewed(*CASES[case]), settings=fixed(4096))
    other = run(skewed(*CASES[case]), seed=2, settings=fixed(4096))
    error = np.hypot(base.log_delta_errors, other.log_delta_errors)
    assert np.all(np.abs(base.log_deltas - other.log_deltas) < 5.0 * error)
    assert np.max(base.log_delta_errors) < 0.01 * np.sum(np.abs(base.log_deltas))


def test_the_lognormal_payoff_on_the_same_noise_lowers_the_error():
    problem = skewed(BASKET, Profile(ProfileKind.PUT, 85.0).payoff())
    got = run(problem, settings=fixed(1024))
    paths = paths_of(problem, settings=fixed(1024))
    means = problem.discount_factor * paths.fine.extend(1024)[:, [0]] / 1024
    (alone,), (alone_error,) = batch_estimate(means)
    assert got.value == pytest.approx(alone, abs=5.0 * alone_error)
    assert got.standard_error < 0.75 * alone_error
    assert got.model_difference == pytest.approx(got.value - got.lognormal.value, abs=1e-12)
    assert got.model_difference > 100.0 * got.model_difference_error


def test_the_weak_order_is_two():
    # a worst-of put on steep skews; bias against 32 steps on common draws
    problem = skewed(Aggregate.worst_of(2), Profile(ProfileKind.PUT, 95.0).payoff(), years=2.0)
    values = {steps: run(problem, settings=fixed(2**14, steps)) for steps in (4, 8, 16, 32)}
    first, second = (values[n].step_difference for n in (8, 16))
    errors = [values[n].step_difference_error for n in (8, 16)]
    assert abs(first) > 10.0 * errors[0]
    # order 2 divides by 4; order 1 would divide by 2, order 3 by 8
    assert 2.8 < first / second < 6.0
    assert abs(values[16].value - values[32].value) < abs(second)


def test_forwards_are_exact():
    problem = skewed(*CASES["basket call"], floors=np.array([0.0, 5.0, 20.0]))
    got = run(problem)
    assert np.all(np.abs(got.martingale_means - 1.0) < 5.0 * got.martingale_mean_errors + 3e-6)
    forward = run(replace(problem, payoff=PiecewiseLinear(0.0, 1.0)))
    want = problem.discount_factor * np.array(BASKET.weights) @ (problem.scales + problem.floors)
    assert forward.value == pytest.approx(want, abs=5.0 * forward.standard_error)
    deltas = problem.discount_factor * np.array(BASKET.weights) * problem.scales
    assert np.all(np.abs(forward.log_deltas - deltas) < 5.0 * forward.log_delta_errors)


def test_call_less_put_is_forward():
    problem = skewed(*CASES["basket call"])
    call, put = (
        run(replace(problem, payoff=Profile(kind, 100.0).payoff())) for kind in (ProfileKind.CALL, ProfileKind.PUT)
    )
    forward = problem.discount_factor * (float(np.array(BASKET.weights) @ problem.scales) - 100.0)
    assert call.value - put.value == pytest.approx(forward, abs=5.0 * np.hypot(call.standard_error, put.standard_error))


def test_the_same_seed_gives_the_same_bits_and_another_group_others():
    problem = skewed(*CASES["best-of call"])
    one, two, other = run(problem), run(problem), run(problem, group="another")
    assert one.value == two.value and np.array_equal(one.log_deltas, two.log_deltas)
    assert one.value != other.value
    assert abs(one.value - other.value) < 5.0 * np.hypot(one.standard_error, other.standard_error)


def test_results_do_not_depend_on_threads_at_work():
    from concurrent.futures import ThreadPoolExecutor

    problems = [skewed(*CASES[name]) for name in CASES]
    alone = [run(p, group=str(i), settings=fixed(512)).value for i, p in enumerate(problems)]
    with ThreadPoolExecutor(4) as pool:
        together = list(pool.map(lambda a: run(a[1], group=str(a[0]), settings=fixed(512)).value, enumerate(problems)))
    assert alone == together


def test_steps_are_doubled_until_their_bias_is_within_the_tolerance():
    problem = skewed(Aggregate.worst_of(2), Profile(ProfileKind.PUT, 95.0).payoff(), years=2.0)
    sampling = SamplingSettings(initial_points=4096, maximum_points=4096)
    loose = run(problem, settings=LocalVolSettings(sampling), value_tolerance=0.1, delta_tolerance=1.0)
    tight = run(problem, settings=LocalVolSettings(sampling), value_tolerance=1e-3, delta_tolerance=1.0)
    assert loose.steps == 8 and tight.steps > 8
    capped = run(problem, settings=LocalVolSettings(sampling, 4, 4), value_tolerance=1e-3, delta_tolerance=1.0)
    assert not capped.reached and "8 time steps leave a bias of about" in capped.ending


def test_precision_is_reached_or_the_ending_says_by_how_much_not():
    problem = skewed(*CASES["basket call"])
    reached = run(problem, settings=LocalVolSettings(), value_tolerance=5e-3, delta_tolerance=0.1)
    assert reached.reached and reached.ending == "precision reached"
    assert reached.standard_error <= 5e-3 and np.all(reached.log_delta_errors <= 0.1)
    missed = run(problem, settings=fixed(1024), value_tolerance=1e-7, delta_tolerance=1.0)
    assert not missed.reached and missed.ending.startswith("budget of points spent: standard error")


def test_a_jump_without_a_factor_to_smooth_it_has_no_deltas():
    ones = np.ones((2, 2))
    problem = skewed(Aggregate.weighted_sum((0.5, 0.5)), DIGITAL, correlation=ones)
    got = run(problem)
    assert np.all(np.isnan(got.log_deltas)) and "sensitivities not available" in got.ending
    assert np.isfinite(got.value) and got.standard_error > 0.0


def test_ranked_assets_that_never_differ_are_said_to_be_tied():
    problem = skewed(Aggregate.worst_of(2), Profile(ProfileKind.PUT, 95.0).payoff(), correlation=np.ones((2, 2)))
    twins = replace(
        problem,
        surfaces=problem.surfaces[:1] * 2,
        scales=np.full(2, problem.scales[0]),
        variances=np.stack([problem.variances[0]] * 2),
    )
    assert "assets 1 and 2 are tied" in run(twins).ending
    assert twins.ties == ((0, 1),) and problem.ties == ()
    assert replace(twins, scales=problem.scales[0] * np.array([1.0, 1.01])).ties == ()


def test_problems_that_do_not_fit_are_refused():
    problem = skewed(*CASES["basket call"])
    with pytest.raises(ValueError, match="do not fit"):
        replace(problem, scales=problem.scales[:2])
    with pytest.raises(ValueError, match="floors at least 0"):
        replace(problem, floors=-problem.floors - 1.0)
    with pytest.raises(ValueError, match="above 0; got 0"):
        replace(problem, years=0.0)
    with pytest.raises(ValueError, match="even and at least 4"):
        LocalVolSettings(initial_steps=3)


@pytest.mark.parametrize("strike", [150.0, 200.0, 260.0])
def test_what_hardly_any_path_reaches_has_an_error_that_says_so(strike):
    payoff = Profile(ProfileKind.CASH_DIGITAL_CALL, strike, cash_amount=100.0).payoff()
    problem = skewed(BASKET, payoff)
    few = run(problem, settings=fixed(256))
    many = run(problem, settings=fixed(2**15))
    assert few.standard_error > 0.0
    # t of 30 degrees of freedom: 99.8 %
    assert abs(few.value - many.value) < 3.4 * np.hypot(few.standard_error, many.standard_error)
    if strike > 200.0:
        assert "few of 8192 paths came past a kink" in few.ending
