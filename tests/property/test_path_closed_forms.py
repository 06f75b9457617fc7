"""What must hold for barriers, averages and defaultable options, whatever the numbers."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear, Profile, ProfileKind
from pricer.engines.closed_form import FAMILIES, best_exact, references
from pricer.engines.closed_form import discrete_barrier as on_dates
from pricer.engines.closed_form.average_convolution import average_by_convolution
from pricer.engines.closed_form.barrier import Corridor, WatchedLevel, knock_in, knock_out, one_touch, touch_probability
from pricer.engines.closed_form.external_barrier import knock_out_by_another, knock_out_of_aggregate
from pricer.engines.closed_form.fixing_law import FixingLaw
from pricer.engines.closed_form.given_driver import first_exact
from pricer.engines.closed_form.payoff_pieces import lognormal_expectations
from pricer.engines.closed_form.vulnerable import growing_liabilities, on_any_aggregate, on_one_level, sole_liability
from pricer.engines.closed_form.writer_default import (
    WriterAssets,
    fixed_boundary,
    independent_default,
    recovery_of_market_value,
    time_of_default,
)
from pricer.engines.problem import EuropeanProblem
from pricer.market.joint_lognormal import JointLognormal
from tests.unit.closed_form_cases import random_problem

repeatable = settings(max_examples=40, deadline=None, derandomize=True)
few = settings(max_examples=8, deadline=None, derandomize=True)

EXACT = first_exact(FAMILIES)
levels = st.builds(
    lambda growth, deviation: WatchedLevel(1.0, math.exp(growth), deviation), st.floats(-0.1, 0.1), st.floats(0.05, 0.6)
)
corridors = st.builds(
    Corridor, st.one_of(st.just(0.0), st.floats(0.3, 0.97)), st.one_of(st.just(math.inf), st.floats(1.03, 3.0))
)
payoffs = st.builds(
    lambda kind, strike, cap: Profile(kind, strike, cap=cap).payoff(),
    st.sampled_from([kind for kind in ProfileKind if kind is not ProfileKind.FORWARD]),
    st.floats(0.6, 1.6),
    st.one_of(st.none(), st.floats(0.1, 1.0)),
)
claims = st.builds(
    lambda growth, deviation, payoff: EuropeanProblem(
        JointLognormal(np.array([math.exp(growth)]), np.array([[deviation**2]])),
        Aggregate.weighted_sum((1.0,)),
        payoff,
        0.95,
    ),
    st.floats(-0.1, 0.1),
    st.floats(0.05, 0.6),
    payoffs,
)
correlations = st.floats(-0.95, 0.95)


def plain(level, payoff):
    return float(lognormal_expectations(payoff, np.array([level.forward]), level.deviation)[0])


def evenly(level, corridor, dates, last=1.0):
    share = np.arange(1, dates + 1) / dates * last
    return on_dates.Observations(
        level.forward**share,
        level.deviation**2 * share,
        np.full(dates, corridor.lower),
        np.full(dates, corridor.upper),
        np.empty(0),
    )


def free(problem):
    return best_exact(references(problem)).value


@repeatable
@given(levels, corridors, payoffs)
def test_knock_in_and_knock_out_make_the_plain_option(level, corridor, payoff):
    both = knock_in(level, corridor, payoff) + knock_out(level, corridor, payoff)
    assert both.value == pytest.approx(plain(level, payoff), abs=both.error + 1e-13)
    assert both.error < 1e-11


@repeatable
@given(levels, corridors, payoffs, st.floats(1.001, 1.5))
def test_a_wider_corridor_is_worth_more_and_never_more_than_the_plain_option(level, corridor, payoff, by):
    wider = Corridor(corridor.lower / by, corridor.upper * by)
    narrow, wide = knock_out(level, corridor, payoff), knock_out(level, wider, payoff)
    assert -1e-12 <= narrow.value <= wide.value + 1e-12 <= plain(level, payoff) + 2e-12
    certain = knock_out(level, corridor, PiecewiseLinear(1.0, 0.0)).value + touch_probability(level, corridor).value
    assert certain == pytest.approx(1.0, abs=1e-12)


@repeatable
@given(levels, st.floats(0.4, 0.97), payoffs)
def test_a_second_barrier_out_of_reach_changes_nothing(level, lower, payoff):
    far = math.exp(level.drift + 12.0 * level.deviation)
    one, two = knock_out(level, Corridor(lower), payoff), knock_out(level, Corridor(lower, max(far, 2.0) * 4.0), payoff)
    assert one.value == pytest.approx(two.value, abs=1e-11)


@repeatable
@given(levels, st.one_of(st.floats(0.5, 0.99), st.floats(1.01, 2.0)), st.floats(0.7, 1.0))
def test_a_touch_payment_lies_between_its_payment_at_expiry_and_its_probability(level, barrier, discount_factor):
    corridor = Corridor(barrier) if barrier < 1.0 else Corridor(0.0, barrier)
    probability = touch_probability(level, corridor).value
    value = one_touch(level, barrier, discount_factor).value
    assert discount_factor * probability - 1e-13 <= value <= probability + 1e-13
    assert one_touch(level, barrier, 1.0).value == pytest.approx(probability, abs=1e-13)


@repeatable
@given(levels, corridors, payoffs, st.integers(1, 12))
def test_fewer_observations_knock_out_less(level, corridor, payoff, dates):
    once = on_dates.knock_out(evenly(level, corridor, 1), level.forward, level.deviation**2, payoff)
    some = on_dates.knock_out(evenly(level, corridor, dates), level.forward, level.deviation**2, payoff)
    twice = on_dates.knock_out(evenly(level, corridor, 2 * dates), level.forward, level.deviation**2, payoff)
    always = knock_out(level, corridor, payoff)
    assert always.value - 1e-11 <= twice.value <= some.value + 1e-11 <= once.value + 2e-11
    assert max(once.error, some.error, twice.error) < 1e-10


@few
@given(levels, corridors, payoffs)
def test_frequent_observation_comes_near_the_corrected_continuous_barrier(level, corridor, payoff):
    dates = 150
    step = level.deviation / math.sqrt(dates)
    # Six steps of room: what the published correction asks for.
    assume(math.log(1.0 / max(corridor.lower, 1e-9)) > 6 * step and math.log(corridor.upper) > 6 * step)
    found = on_dates.knock_out(evenly(level, corridor, dates), level.forward, level.deviation**2, payoff)
    corrected = knock_out(level, corridor.widened(step), payoff)
    continuous = knock_out(level, corridor, payoff)
    assert abs(corrected.value - found.value) <= 0.2 * abs(continuous.value - found.value) + 1e-4 * level.deviation


@few
@given(levels, corridors, payoffs, st.integers(2, 5), st.floats(0.5, 1.0))
def test_the_value_of_an_observed_barrier_is_the_mean_of_its_values_on_the_first_date(
    level, corridor, payoff, dates, last
):
    # Seasoning: aged to the first observation at many levels, and weighted with their law.
    now = evenly(level, corridor, dates, last)
    value = on_dates.knock_out(now, level.forward, level.deviation**2, payoff)
    first = math.sqrt(now.variances[0])
    low, high = max(math.log(corridor.lower or 1e-300), -9.0 * first), min(math.log(corridor.upper), 9.0 * first)
    x, w = np.polynomial.legendre.leggauss(40)
    points = 0.5 * (low + high) + 0.5 * (high - low) * x
    mean = 0.0
    for point, weight in zip(points, 0.5 * (high - low) * w, strict=True):
        grown = math.exp(point) / now.forwards[0]
        rest = on_dates.Observations(
            now.forwards[1:] * grown, now.variances[1:] - first**2, now.lowers[1:], now.uppers[1:], np.empty(0)
        )
        later = on_dates.knock_out(rest, level.forward * grown, level.deviation**2 - first**2, payoff).value
        z = (point - math.log(now.forwards[0]) + 0.5 * first**2) / first
        mean += weight * later * math.exp(-0.5 * z * z) / (first * math.sqrt(2.0 * math.pi))

    assert value.value == pytest.approx(mean, abs=1e-8)


@repeatable
@given(levels, st.one_of(st.floats(0.5, 0.98), st.floats(1.02, 2.0)), payoffs, correlations, st.floats(0.05, 0.5))
def test_a_barrier_on_another_level_by_both_ways(level, barrier, payoff, rho, deviation):
    corridor = Corridor(barrier) if barrier < 1.0 else Corridor(0.0, barrier)
    closed = knock_out_by_another(level, corridor, 1.1, deviation, rho, payoff)
    law = JointLognormal(np.array([1.1]), np.array([[deviation**2]]))
    problem = EuropeanProblem(law, Aggregate.weighted_sum((1.0,)), payoff, 1.0)
    integral = knock_out_of_aggregate(problem, level, corridor, np.array([rho * deviation * level.deviation]), EXACT)
    assert closed.value == pytest.approx(integral.value, abs=closed.error + integral.error + 1e-9)
    itself = knock_out_by_another(level, corridor, level.forward, level.deviation, 1.0, payoff)
    assert itself.value == pytest.approx(knock_out(level, corridor, payoff).value, abs=1e-9)


@few
@given(
    st.lists(st.floats(0.01, 0.2), min_size=1, max_size=6),
    st.floats(-0.1, 0.1),
    payoffs,
    st.integers(0, 2**32 - 1),
)
def test_an_average_is_the_mean_of_its_values_on_the_first_date(steps, growth, payoff, seed):
    variances = np.cumsum(np.square(steps))
    forwards = np.exp(growth * variances / variances[-1])
    weights = np.random.default_rng(seed).dirichlet(np.full(len(steps), 3.0))
    weights = np.maximum(weights, 1e-3)
    law = FixingLaw(forwards[:, None], variances[:, None, None])
    value = average_by_convolution(law, weights, payoff)
    assert value.error < 1e-10
    if len(steps) == 1:
        wanted = lognormal_expectations(payoff.of_shifted_argument(0.0), weights * forwards, steps[0])[0]
        assert value.value == pytest.approx(wanted, abs=1e-12)
        return
    # What later returns smooth, in deviations of the first: the trapezoidal rule needs a few nodes in it.
    assume(weights[1:].sum() * steps[1] > 0.3 * steps[0])
    z = np.linspace(-9.0, 9.0, 181)
    mean = 0.0
    for point, weight in zip(z, 0.1 * np.exp(-0.5 * z * z) / math.sqrt(2.0 * math.pi), strict=True):
        grown = math.exp(steps[0] * (point - 0.5 * steps[0]))
        later = FixingLaw(forwards[1:, None] * grown, (variances[1:] - variances[0])[:, None, None])
        fixed = weights[0] * forwards[0] * grown
        mean += weight * average_by_convolution(later, weights[1:], payoff, fixed).value
    assert value.value == pytest.approx(mean, abs=1e-9)


@few
@given(claims, correlations, st.floats(0.5, 3.0), st.floats(0.05, 0.6), st.floats(0.2, 1.0), st.floats(0.0, 1.0))
def test_a_defaultable_claim_is_worth_no_more_than_a_safe_one(claim, rho, forward, deviation, boundary, deadweight):
    covariance = np.array([rho * deviation * float(claim.law.deviations[0])])
    assets = WriterAssets(forward, deviation, covariance)
    shares = fixed_boundary(assets, boundary, 1.0, deadweight)
    closed = on_one_level(claim, assets.loadings, shares)
    integral = on_any_aggregate(claim, assets.loadings, shares, EXACT)
    assert closed.value == pytest.approx(integral.value, abs=closed.error + integral.error + 1e-9)
    safe = free(claim)
    assert -1e-11 <= closed.value <= safe + 1e-11
    assert sole_liability(claim, assets, EXACT).value <= min(safe, claim.discount_factor * forward) + 1e-9
    never = on_one_level(claim, assets.loadings, fixed_boundary(assets, 0.0, 1.0, deadweight))
    assert never.value == pytest.approx(safe, abs=1e-10)


@repeatable
@given(claims, correlations, st.floats(0.5, 3.0), st.floats(0.1, 0.6), st.floats(0.0, 0.9))
def test_liabilities_grow_only_with_claims_that_count(claim, rho, forward, deviation, deadweight):
    # A claim of 1e-6 of its size leaves the boundary where it was (Klein & Inglis 2001 becomes Klein 1996).
    assets = WriterAssets(forward, deviation, np.array([rho * deviation * float(claim.law.deviations[0])]))
    small = EuropeanProblem(claim.law, claim.aggregate, claim.payoff.scaled(1e-6), claim.discount_factor)
    grown = growing_liabilities(small, assets, 1.0, deadweight).value * 1e6
    fixed = on_one_level(claim, assets.loadings, fixed_boundary(assets, 1.0, 1.0, deadweight)).value
    assert grown == pytest.approx(fixed, abs=2e-5)
    assert growing_liabilities(claim, assets, 1.0, deadweight).value <= fixed + 1e-9


@few
@given(st.integers(0, 2**32 - 1), st.floats(0.5, 1.0), st.floats(0.0, 0.9))
def test_independent_default_takes_one_factor_off_any_aggregate(seed, survival, recovery):
    rng = np.random.default_rng(seed)
    problem = random_problem(rng, 2, profiles=(ProfileKind.CALL, ProfileKind.PUT))
    value = on_any_aggregate(problem, np.zeros(2), time_of_default(survival, recovery), EXACT)
    factor = independent_default(survival, recovery)
    assert value.value == pytest.approx(factor * free(problem), abs=value.error + 1e-8)
    assert recovery_of_market_value(survival, recovery) <= factor + 1e-15


@few
@given(st.integers(0, 2**32 - 1), st.floats(0.6, 0.99))
def test_a_call_loses_and_a_put_gains_when_the_writer_fails_with_rising_levels(seed, survival):
    # The driver is low when the writer fails: loadings below 0 mean that levels are high then.
    problem = random_problem(np.random.default_rng(seed), 1, profiles=(ProfileKind.CALL,))
    assume(min(problem.aggregate.weights) > 0.0)
    loading = -0.6 * problem.law.deviations
    shares = time_of_default(survival, 0.3)
    wrong_way, alone = (on_any_aggregate(problem, x, shares, EXACT).value for x in (loading, 0.0 * loading))
    assert wrong_way <= alone + 1e-10
