from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace

import numpy as np
import pytest
from threadpoolctl import threadpool_limits

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear
from pricer.core.randomness import Purpose, stream
from pricer.engines.closed_form import best_exact
from pricer.engines.closed_form import references as closed_forms
from pricer.engines.early_exercise.certificate import CertificateSettings
from pricer.engines.early_exercise.decision_inputs import InputChoice, importance, inputs_by_date
from pricer.engines.early_exercise.dynamics import LognormalDynamics
from pricer.engines.early_exercise.engine import early_exercise_value
from pricer.engines.early_exercise.fitting import FitSettings, fit_rule
from pricer.engines.early_exercise.outcome import Ending
from pricer.engines.early_exercise.problem import EarlyExerciseProblem, Right
from pricer.engines.problem import EuropeanProblem
from pricer.market.joint_lognormal import JointLognormal
from tests.unit.early_exercise_cases import QUICK, alike, best_of_call, call, put

#: Independent draws of a normal stay within this many standard errors but for one test in 15,000.
SURE = 4.0


def european(problem: EarlyExerciseProblem, date: int = -1) -> float:
    """The exact value of exercising at one date only."""
    covariance = problem.covariances[date]
    drift = problem.log_drifts.cumsum(axis=0)[date]
    forwards = problem.spots * np.exp(drift + 0.5 * np.diag(covariance))
    law = JointLognormal(forwards, covariance)
    discount = float(problem.discount_factors[date])
    reference = best_exact(closed_forms(EuropeanProblem(law, problem.aggregate, problem.payoffs[date], discount)))
    assert reference is not None
    return reference.value


@pytest.mark.parametrize(
    "problem",
    [
        best_of_call(5, np.array([1.5])),
        best_of_call(3, np.array([1.5]), aggregate=Aggregate.worst_of(3), payoff=put(95.0), correlation=0.4),
        best_of_call(2, np.array([0.5]), aggregate=Aggregate.weighted_sum((1.0, -1.0)), payoff=call(3.0)),
        best_of_call(4, np.array([2.0]), aggregate=Aggregate.geometric((0.25,) * 4), payoff=put(100.0)),
    ],
    ids=["best of", "worst of", "spread", "geometric"],
)
def test_with_a_single_date_both_ends_are_the_european_value(problem):
    value = early_exercise_value(problem, QUICK)
    assert value.gap == 0.0
    assert abs(value.lower - european(problem)) < SURE * value.lower_error + 1e-9
    assert value.lower_error < 1e-2 * value.value


def test_a_call_without_dividends_is_never_ended_early():
    problem = EarlyExerciseProblem.from_constants(
        np.array([0.25, 0.5, 0.75, 1.0]),
        np.full(3, 100.0),
        rate=0.05,
        dividend_yields=np.zeros(3),
        volatilities=np.array([0.2, 0.25, 0.3]),
        correlation=alike(3, 0.3),
        aggregate=Aggregate.best_of(3),
        payoff=call(100.0),
    )
    value = early_exercise_value(problem, QUICK)
    exact = european(problem)
    assert value.lower - SURE * value.lower_error < exact < value.upper + SURE * value.upper_error
    assert value.dates[-1].exercise_probability > 0.99
    assert value.gap < 2e-3 * exact


def test_what_decides_the_martingale_has_no_mean():
    """The average of the fitted value on fresh paths is that over inner successors, date by date."""
    problem = best_of_call(4, correlation=0.3)
    dynamics = LognormalDynamics(problem, importance(problem))
    inputs = inputs_by_date(problem, InputChoice(), stream(3, "m", Purpose.FIT, 999))
    with threadpool_limits(limits=1), ThreadPoolExecutor(2) as pool:
        rule = fit_rule(dynamics, inputs, QUICK.fit, np.zeros(9), lambda b: stream(3, "m", Purpose.FIT, b), pool)
    moves = np.empty((16, problem.n_dates - 1))
    for block in range(16):
        generator = stream(3, "m", Purpose.CERTIFY, block)
        paths, successors = dynamics.paths(generator, 512), dynamics.successors(64)
        for i in range(problem.n_dates - 1):
            expected = rule.dates[i + 1].expected(i + 1, paths[i], successors, 64, generator)
            moves[block, i] = np.mean(rule.dates[i + 1].value(paths[i + 1]).astype(float) - expected)
    errors = moves.std(axis=0, ddof=1) / np.sqrt(16)
    assert np.all(np.abs(moves.mean(axis=0)) < SURE * errors)
    assert np.all(errors < 0.1)  # small enough to see a bias of a per cent of the value


def test_a_poor_rule_widens_the_interval_but_keeps_the_value_inside():
    problem = best_of_call(3)
    exact = 18.6902  # to 0.003: three-dimensional grid, tests/reference/bermudan_max_call.csv, BM-S-3-100
    poor = replace(
        QUICK,
        fit=FitSettings(blocks=8, points=128, inner=2, degree=1),
        certificate=CertificateSettings(blocks=32, points=128, inner=8),
        inputs=InputChoice(ranks=1, scores=0, powers=0, shocks=2),
    )
    value, good = early_exercise_value(problem, poor), early_exercise_value(problem, QUICK)
    assert value.gap > 5.0 * good.gap
    assert value.lower - SURE * value.lower_error < exact + 0.003
    assert value.upper + SURE * value.upper_error > exact - 0.003
    assert good.lower - SURE * good.lower_error < exact + 0.003
    assert good.upper + SURE * good.upper_error > exact - 0.003


def test_the_lower_bound_never_exceeds_the_upper_bound_of_more_dates():
    few = early_exercise_value(best_of_call(3, np.array([1.0, 2.0, 3.0])), QUICK)
    many = early_exercise_value(best_of_call(3), QUICK)
    assert few.lower - SURE * few.lower_error < many.upper + SURE * many.upper_error
    assert few.upper + SURE * few.upper_error < many.lower - SURE * many.lower_error  # six more dates are worth 0.3


def test_the_issuers_right_is_the_holders_of_the_opposite():
    payoffs = PiecewiseLinear(-100.0, -0.5, (90.0,), (0.3,), (0.0,))
    mine = best_of_call(2, np.array([1.0, 2.0, 3.0]), payoff=payoffs)
    theirs = replace(mine, payoffs=tuple(f.scaled(-1.0) for f in mine.payoffs), right=Right.ISSUER)
    holder, issuer = early_exercise_value(mine, QUICK), early_exercise_value(theirs, QUICK)
    assert (issuer.lower, issuer.upper) == (-holder.upper, -holder.lower)
    assert (issuer.lower_error, issuer.upper_error) == (holder.upper_error, holder.lower_error)


def test_an_issuer_never_pays_more_than_without_the_right():
    times = np.array([1.0, 2.0, 3.0])
    problem = best_of_call(3, times, correlation=0.5, right=Right.ISSUER, payoff=call(80.0))
    value = early_exercise_value(problem, QUICK)
    for date in range(problem.n_dates):
        assert value.lower - SURE * value.lower_error < european(problem, date)


def test_exercise_at_once_counts_where_it_is_worth_more():
    deep = best_of_call(1, np.array([0.0, 0.5, 1.0]), spot=40.0, payoff=put(100.0))
    value = early_exercise_value(replace(deep, log_drifts=deep.log_drifts + 0.2 * deep.times[:, None]), QUICK)
    assert (value.lower, value.upper, value.ending) == (60.0, 60.0, Ending.KNOWN)
    assert [date.exercise_probability for date in value.dates] == [1.0, 0.0, 0.0]
    waiting = best_of_call(2, np.array([0.0, 0.5, 1.0]))
    later = early_exercise_value(waiting.after_first_date(), QUICK)
    assert early_exercise_value(waiting, QUICK).value == later.value
    only = early_exercise_value(best_of_call(1, np.array([0.0]), spot=110.0), QUICK)
    assert only.value == pytest.approx(10.0)
    assert only.reached


def test_an_answer_repeats_to_the_last_bit_on_any_number_of_threads():
    problem = best_of_call(3, np.array([1.0, 2.0, 3.0]), correlation=0.2)
    once = early_exercise_value(problem, replace(QUICK, threads=1))
    assert early_exercise_value(problem, replace(QUICK, threads=3)) == once
    assert early_exercise_value(problem, replace(QUICK, seed=2)) != once
    assert early_exercise_value(problem, replace(QUICK, group="another")) != once


def test_levels_in_another_unit_change_nothing_but_the_unit():
    plain = best_of_call(2, np.array([1.0, 2.0]))
    scaled = replace(plain, spots=plain.spots / 128.0, payoffs=(call(100.0 / 128.0),) * 2)
    value, other = early_exercise_value(plain, QUICK), early_exercise_value(scaled, QUICK)
    assert other.value * 128.0 == pytest.approx(value.value, rel=1e-5)


def test_levels_that_do_not_move_have_a_known_value():
    still = best_of_call(2, np.array([1.0, 2.0, 3.0]), volatilities=np.zeros(2), payoff=put(100.0))
    value = early_exercise_value(still, QUICK)
    best = max(np.exp(-0.05 * t) * (100.0 - 100.0 * np.exp(-0.05 * t)) for t in (1.0, 2.0, 3.0))
    assert value.lower == pytest.approx(best, rel=1e-5)
    assert value.gap == pytest.approx(0.0, abs=1e-5)


def test_it_says_when_the_gap_asked_is_out_of_reach():
    problem = best_of_call(2, np.array([1.0, 2.0, 3.0]))
    wide = early_exercise_value(problem, replace(QUICK, gap=1e-7, least_gap=0.0))
    assert wide.ending is Ending.GAP_TOO_WIDE
    assert not wide.reached
    noisy = early_exercise_value(
        problem, replace(QUICK, gap=1.1 * wide.relative_gap, certificate=CertificateSettings(16, 128, 64))
    )
    assert noisy.ending in (Ending.TOO_NOISY, Ending.REACHED)
    assert noisy.reached == (max(noisy.lower_error, noisy.upper_error) <= 1.1 * wide.relative_gap * noisy.value)


def test_more_rounds_narrow_what_was_too_wide():
    problem = best_of_call(2, np.array([1.0, 2.0, 3.0]))
    small = replace(QUICK, fit=FitSettings(8, 128, 8), certificate=CertificateSettings(8, 128, 8), gap=3e-3)
    one, more = early_exercise_value(problem, small), early_exercise_value(problem, replace(small, rounds=6))
    assert not one.reached
    assert more.reached
    assert more.effort.rounds > 1
    assert more.gap < one.gap


def test_the_answer_tells_each_date():
    problem = best_of_call(3)
    value = early_exercise_value(problem, QUICK)
    assert [date.time for date in value.dates] == problem.times.tolist()
    assert sum(date.exercise_probability for date in value.dates) == pytest.approx(1.0)
    assert all(date.held_out_error > 0.0 and date.fresh_error > 0.0 for date in value.dates[:-1])
    assert value.interval(2.0) == (value.lower - 2.0 * value.lower_error, value.upper + 2.0 * value.upper_error)


def test_sizes_that_the_sampler_does_not_have_are_refused():
    with pytest.raises(ValueError, match="power of two from 128 on; got 100"):
        CertificateSettings(points=100)
    with pytest.raises(ValueError, match="power of two from 2 to 512; got 1024"):
        CertificateSettings(inner=1024)
    with pytest.raises(ValueError, match="at least 2 blocks; got 1"):
        CertificateSettings(blocks=1)
    with pytest.raises(ValueError, match="at least 8 blocks"):
        FitSettings(blocks=4)


def test_income_is_paid_until_the_option_ends():
    """A constant income of 1 a date, and an exercise that pays nothing: the holder stays to the end."""
    problem = best_of_call(2, np.array([1.0, 2.0, 3.0]))
    income, nothing = PiecewiseLinear(1.0, 0.0), PiecewiseLinear(0.0, 0.0)
    paid = replace(problem, payoffs=(nothing,) * 3, incomes=(income, None, income))
    value = early_exercise_value(paid, QUICK)
    assert value.lower == pytest.approx(2.0, abs=1e-5)
    assert value.gap == pytest.approx(0.0, abs=1e-5)
    issuer = early_exercise_value(replace(paid, right=Right.ISSUER), QUICK)
    assert issuer.value == pytest.approx(1.0, abs=1e-5)  # ended on the first date, whose income is paid


def test_a_date_without_a_right_is_as_good_as_no_date():
    problem = best_of_call(2, np.array([1.0, 2.0, 3.0]))
    without = replace(problem, payoffs=(problem.payoffs[0], None, problem.payoffs[2]))
    value, twice = (
        early_exercise_value(without, QUICK),
        early_exercise_value(best_of_call(2, np.array([1.0, 3.0])), QUICK),
    )
    assert value.dates[1].exercise_probability == 0.0
    noise = SURE * np.hypot(value.upper_error, twice.upper_error)
    assert value.value == pytest.approx(twice.value, abs=noise + value.gap + twice.gap)


def test_what_some_dates_add_is_seen_on_the_same_paths():
    problem = best_of_call(2, np.array([1.0, 1.5, 2.0, 2.5, 3.0]))
    both = early_exercise_value(replace(problem, some=(True, False, True, False, True)), QUICK)
    some = early_exercise_value(best_of_call(2, np.array([1.0, 2.0, 3.0])), QUICK)
    noise = SURE * np.hypot(both.upper_error, some.upper_error) + both.gap + some.gap
    assert both.gain == pytest.approx(both.value - some.value, abs=noise)
    assert 0.0 < both.gain_error < 0.3 * both.gain


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"incomes": (None,)}, "as many incomes; got 1"),
        ({"some": (True,)}, "as many marks; got 1"),
        ({"floors": np.zeros((1, 1))}, "floors must be"),
        ({"payoffs": (None, None)}, "the last date needs a payoff"),
    ],
)
def test_parts_that_do_not_fit_are_refused(change, message):
    with pytest.raises(ValueError, match=message):
        replace(best_of_call(2, np.array([1.0, 2.0])), **change)
