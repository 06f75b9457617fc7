"""What holds for every early-exercise option, whatever its figures."""

from dataclasses import replace

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import Profile, ProfileKind
from pricer.engines.early_exercise.certificate import CertificateSettings
from pricer.engines.early_exercise.engine import EarlyExerciseSettings, early_exercise_value
from pricer.engines.early_exercise.fitting import FitSettings
from pricer.engines.early_exercise.problem import EarlyExerciseProblem

#: Standard errors allowed; a handful of examples, each on independent draws.
SURE = 5.0

SMALL = EarlyExerciseSettings(
    seed=11,
    group="property",
    rounds=1,
    fit=FitSettings(blocks=8, points=128, inner=32),
    certificate=CertificateSettings(blocks=16, points=128, inner=32),
)


@st.composite
def problems(draw) -> EarlyExerciseProblem:
    n = draw(st.integers(1, 4))
    aggregate = draw(
        st.sampled_from(
            [
                Aggregate.best_of(n),
                Aggregate.worst_of(n),
                Aggregate.kth_best((n + 1) // 2, n),
                Aggregate.weighted_sum(tuple(1.0 / n for _ in range(n))),
                Aggregate.geometric(tuple(1.0 / n for _ in range(n))),
            ]
        )
    )
    kind = draw(st.sampled_from([ProfileKind.CALL, ProfileKind.PUT, ProfileKind.STRADDLE]))
    correlation = draw(st.floats(0.0, 0.9))
    return EarlyExerciseProblem.from_constants(
        draw(st.floats(0.2, 2.0)) * np.arange(1, 5) / 4.0,
        np.array(draw(st.lists(st.floats(80.0, 120.0), min_size=n, max_size=n))),
        rate=draw(st.floats(0.0, 0.1)),
        dividend_yields=np.full(n, draw(st.floats(0.0, 0.1))),
        volatilities=np.array(draw(st.lists(st.floats(0.1, 0.4), min_size=n, max_size=n))),
        correlation=correlation + (1.0 - correlation) * np.eye(n),
        aggregate=aggregate,
        payoff=Profile(kind, 100.0).payoff(),
    )


def only(problem: EarlyExerciseProblem, dates: list[int]) -> EarlyExerciseProblem:
    """The same option with some of its dates."""
    ends = np.array(dates)
    drifts, covariances = problem.log_drifts.cumsum(axis=0)[ends], problem.covariances[ends]
    return replace(
        problem,
        times=problem.times[ends],
        log_drifts=np.diff(drifts, axis=0, prepend=0.0),
        step_covariances=np.diff(covariances, axis=0, prepend=0.0),
        payoffs=tuple(problem.payoffs[i] for i in dates),
        discount_factors=problem.discount_factors[ends],
    )


@settings(max_examples=5, deadline=None, derandomize=True)
@given(problems())
def test_more_dates_are_worth_no_less_and_the_bounds_are_in_order(problem):
    all_dates = early_exercise_value(problem, SMALL)
    scale = max(all_dates.value, 1e-3)
    assert all_dates.gap > -SURE * all_dates.gap_error - 1e-6 * scale
    assert all_dates.gap < 0.05 * scale + 0.02
    for dates in ([3], [1, 3]):
        fewer = early_exercise_value(only(problem, dates), SMALL)
        noise = SURE * np.hypot(fewer.lower_error, all_dates.upper_error)
        assert fewer.lower < all_dates.upper + noise + 1e-6 * scale


@settings(max_examples=3, deadline=None, derandomize=True)
@given(problems(), st.randoms(use_true_random=False))
def test_the_order_of_the_assets_does_not_matter(problem, random):
    order = list(range(problem.n_assets))
    random.shuffle(order)
    turned = replace(
        problem,
        spots=problem.spots[order],
        log_drifts=np.ascontiguousarray(problem.log_drifts[:, order]),
        step_covariances=np.ascontiguousarray(problem.step_covariances[:, order][:, :, order]),
    )
    one, other = early_exercise_value(problem, SMALL), early_exercise_value(turned, SMALL)
    noise = SURE * np.hypot(one.upper_error, other.upper_error)
    assert one.lower < other.upper + noise + 1e-6
    assert other.lower < one.upper + noise + 1e-6
