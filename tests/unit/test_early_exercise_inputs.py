import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear, Profile, ProfileKind
from pricer.core.randomness import Purpose, stream
from pricer.engines.early_exercise import kernels
from pricer.engines.early_exercise.decision_inputs import DateInputs, InputChoice, importance, inputs_by_date
from pricer.engines.early_exercise.dynamics import LognormalDynamics
from pricer.engines.early_exercise.problem import EarlyExerciseProblem, Right, infimum
from tests.unit.early_exercise_cases import alike, best_of_call

UNEQUAL = np.array([0.15, 0.25, 0.35, 0.2])

AGGREGATES = [
    Aggregate.best_of(4),
    Aggregate.worst_of(4),
    Aggregate.kth_best(2, 4),
    Aggregate.rank_weighted((0.5, 0.0, 0.3, 0.2)),
    Aggregate.weighted_sum((0.5, -0.2, 0.4, 0.3)),
    Aggregate.geometric((0.1, 0.2, 0.3, 0.4)),
]


def draws(number: int) -> np.random.Generator:
    return stream(5, "inputs", Purpose.FIT, number)


def in_numpy(
    inputs: DateInputs, aggregate: Aggregate, payoffs: list[PiecewiseLinear], levels: np.ndarray
) -> np.ndarray:
    """The kernel's twin in double precision, (rows, lanes)."""
    x = levels.T.astype(float)
    a = aggregate(x)
    ranked = np.sort(np.log(x), axis=1)[:, ::-1][:, inputs.first_rank : inputs.first_rank + inputs.n_ranks]
    worst = inputs.weights[-1] == 1.0
    ratio = x.min(axis=1, keepdims=True) / x if worst else x / x.max(axis=1, keepdims=True)
    powers = [np.log(ratio ** (2**k) @ inputs.powers[k].astype(float)) for k in range(len(inputs.powers))]
    averaged = []
    for shocks, payoff in zip(inputs.shocks.astype(float), payoffs[1:], strict=True):
        if shocks.shape[1] == 1 and x.shape[1] > 1:
            moved = a[None, :] * shocks
        else:
            moved = aggregate(x[None, :, :] * shocks[:, None, :])
        averaged.append(payoff(moved).mean(axis=0))
    scores = np.log(x) @ inputs.scores.T.astype(float)
    return np.vstack([payoffs[0](a), np.zeros_like(a), a, ranked.T, scores.T, *powers, *averaged])


@pytest.mark.parametrize("aggregate", AGGREGATES, ids=lambda aggregate: str(aggregate.kind))
def test_the_kernel_agrees_with_numpy(aggregate):
    payoff = Profile(ProfileKind.CALL, 60.0, floor=1.0, cap=40.0).payoff()
    problem = best_of_call(4, volatilities=UNEQUAL, aggregate=aggregate, payoff=payoff)
    inputs = inputs_by_date(problem, InputChoice(ranks=2, scores=2, powers=3, shocks=8), draws(0))[4]
    levels = LognormalDynamics(problem, importance(problem)).paths(draws(1), 512)[4]
    out = np.empty((inputs.rows, 512), dtype=np.float32)
    inputs.fill(levels, out)
    discounts = problem.discount_factors
    wanted = in_numpy(inputs, aggregate, [payoff.scaled(float(discounts[i])) for i in (4, 5, 8)], levels)
    assert np.allclose(out, wanted, rtol=1e-4, atol=1e-4)


def test_the_frozen_shocks_keep_forwards():
    problem = best_of_call(3, correlation=0.3)
    for i, inputs in enumerate(inputs_by_date(problem, InputChoice(), draws(0))[:-1]):
        for horizon, to in enumerate([i + 1, 8] if i < 7 else [8]):
            growth = np.exp(-0.05 * (problem.times[to] - problem.times[i]))
            assert np.allclose(inputs.shocks[horizon].mean(axis=0), growth, rtol=1e-6)


def test_the_last_date_looks_at_nothing_but_its_payoff():
    assert len(inputs_by_date(best_of_call(3), InputChoice(), draws(0))[-1].shocks) == 0


def test_paths_have_the_law_asked_for():
    problem = best_of_call(4, correlation=0.4, volatilities=UNEQUAL)
    dynamics = LognormalDynamics(problem, importance(problem))
    logs = np.log(np.concatenate([dynamics.paths(draws(b), 4096) for b in range(16)], axis=2).astype(float))
    deviations = np.sqrt(problem.times[:, None] * UNEQUAL**2)
    means = np.log(100.0) + problem.times[:, None] * (0.05 - 0.1 - 0.5 * UNEQUAL**2)
    # 65,536 points: one part in 256 of a deviation if they were independent, and these are more even than that
    assert np.all(np.abs(logs.mean(axis=2) - means) < deviations / 256.0)
    steps = np.diff(logs, axis=0)
    for i, covariance in enumerate(problem.step_covariances[1:]):
        assert np.allclose(np.cov(steps[i]), covariance, atol=0.02 * np.max(covariance))
    across = np.corrcoef(steps[0], steps[1])[:4, 4:]
    assert np.max(np.abs(across)) < 4.0 / 256.0


def test_successors_have_the_law_of_the_next_step():
    problem = best_of_call(4, correlation=0.4, volatilities=UNEQUAL)
    sampler = LognormalDynamics(problem, importance(problem)).successors(64)
    states = np.array([[100.0, 80.0], [90.0, 70.0], [110.0, 60.0], [50.0, 40.0]], dtype=np.float32)
    levels = np.empty((4, 128), dtype=np.float32)
    generator, moves = draws(3), []
    for _ in range(400):
        sampler.fill(2, states, generator, 0, levels)
        moves.append(np.log(levels.reshape(4, 2, 64)[:, 1].astype(float) / states[:, 1:]))
    together = np.concatenate(moves, axis=1)
    assert np.allclose(together.mean(axis=1), problem.log_drifts[2], atol=1e-6)  # mirrored: exact but for rounding
    assert np.allclose(np.cov(together), problem.step_covariances[2], rtol=0.02, atol=1e-4)


def test_an_average_over_successors_is_unbiased_whatever_their_number():
    problem = best_of_call(2)
    dynamics = LognormalDynamics(problem, importance(problem))
    states = np.full((2, 1), 100.0, dtype=np.float32)
    means = []
    for inner in (2, 64):
        sampler, generator, levels = dynamics.successors(inner), draws(inner), np.empty((2, inner), dtype=np.float32)
        averages = []
        for _ in range(6000 if inner == 2 else 1500):
            sampler.fill(0, states, generator, 0, levels)
            averages.append(np.maximum(levels.max(axis=0).astype(float) - 100.0, 0.0).mean())
        means.append((np.mean(averages), np.std(averages, ddof=1) / np.sqrt(len(averages))))
    (few, few_error), (many, many_error) = means
    assert abs(few - many) < 4.0 * np.hypot(few_error, many_error)
    assert many_error < 0.3 * few_error


def test_what_is_alike_gets_inputs_blind_to_labels():
    assert InputChoice.suited_to(best_of_call(5)).scores == 0
    assert InputChoice.suited_to(best_of_call(4, volatilities=UNEQUAL)).scores == 4
    basket = best_of_call(4, aggregate=Aggregate.weighted_sum((0.25,) * 4))
    assert InputChoice.suited_to(basket).ranks == 0


def test_payoffs_are_seen_by_who_decides():
    problem = best_of_call(2, right=Right.ISSUER)
    assert problem.decider_payoffs[3].slope == 0.0
    assert problem.decider_payoffs[3].bends == (-float(problem.discount_factors[3]),)


@pytest.mark.parametrize(
    ("payoff", "least"),
    [
        (Profile(ProfileKind.CALL, 100.0).payoff(), 0.0),
        (Profile(ProfileKind.PUT, 100.0).payoff(), 0.0),
        (Profile(ProfileKind.PUT, 100.0, cap=30.0).payoff().scaled(-1.0), -30.0),
        (Profile(ProfileKind.CASH_DIGITAL_PUT, 100.0, cash_amount=5.0).payoff().scaled(-1.0), -5.0),
        (Profile(ProfileKind.FORWARD, 100.0).payoff(), -np.inf),
        (PiecewiseLinear(3.0, 0.0), 3.0),
        (Profile(ProfileKind.STRADDLE, 100.0).payoff(), 0.0),
    ],
)
def test_the_least_value_of_a_payoff(payoff, least):
    assert infimum(payoff) == least


def test_problems_that_do_not_fit_together_are_refused():
    with pytest.raises(ValueError, match="dates must increase"):
        best_of_call(2, np.array([1.0, 1.0]))
    with pytest.raises(ValueError, match="3 levels for 2 weights"):
        best_of_call(3, aggregate=Aggregate.best_of(2))
    with pytest.raises(ValueError, match="fold the cash level"):
        best_of_call(2, aggregate=Aggregate.best_of(2, cash=90.0))
    with pytest.raises(ValueError, match="need log-drifts"):
        EarlyExerciseProblem(
            np.array([1.0]),
            np.ones(2),
            np.zeros((2, 2)),
            alike(2, 0.0)[None],
            Aggregate.best_of(2),
            (PiecewiseLinear(0.0, 1.0),),
            np.ones(1),
        )


def test_a_continuation_stays_near_the_best_single_date():
    inputs = np.tile(np.array([[7.0], [4.0], [5.0]], dtype=np.float32), 128)  # the last two are horizons
    out = np.linspace(-10.0, 20.0, 128).astype(np.float32)
    wanted = np.clip(out, 4.0, 8.0)
    kernels.hold(inputs, 2, -np.inf, -1.0, 3.0, out)
    assert np.array_equal(out, wanted)
    kernels.hold(inputs, 1, 6.0, -1.0, 2.0, out)  # the last one only, and no less than 6
    assert np.array_equal(out, np.clip(wanted, 6.0, 7.0))
