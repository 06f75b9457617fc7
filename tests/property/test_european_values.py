"""What must hold for European values, whoever computes them."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import ProfileKind
from pricer.engines.closed_form import best_exact, references
from pricer.engines.problem import EuropeanProblem, ReferenceKind
from pricer.market.joint_lognormal import JointLognormal
from tests.property.problems import laws, problems, struck, value_of

# Standard errors from 32 randomisations are themselves estimated (Student, 30 degrees of
# freedom): 8 of them are exceeded with probability 1e-8, so a thousand examples stay quiet.
REACH = 8.0
repeatable = settings(max_examples=25, deadline=None, derandomize=True)


def within(difference, *errors):
    assert abs(difference) <= REACH * float(np.sqrt(np.sum(np.square(errors)))) + 1e-7


@repeatable
@given(problems(kinds=(ProfileKind.CALL,)))
def test_call_less_put_is_the_forward_on_every_aggregate(problem):
    strike = problem.payoff.knots[0]
    call, put, forward = (
        value_of(struck(problem, kind, strike)) for kind in (ProfileKind.CALL, ProfileKind.PUT, ProfileKind.FORWARD)
    )
    within(call.value - put.value - forward.value, call.standard_error, put.standard_error, forward.standard_error)


@repeatable
@given(problems(kinds=(ProfileKind.CALL,)))
def test_exact_forms_keep_parity(problem):
    strike = problem.payoff.knots[0]
    exact = [
        best_exact(references(struck(problem, kind, strike)))
        for kind in (ProfileKind.CALL, ProfileKind.PUT, ProfileKind.FORWARD)
    ]
    if None in exact:
        return
    call, put, forward = exact
    assert abs(call.value - put.value - forward.value) <= call.error + put.error + forward.error + 1e-8


@repeatable
@given(laws(2, 2), st.floats(70.0, 130.0))
def test_call_on_max_and_call_on_min_share_the_two_calls(law, strike):
    base = EuropeanProblem(law, Aggregate.best_of(2), struck_call(strike), 0.95)
    largest, smallest = value_of(base), value_of(replace(base, aggregate=Aggregate.worst_of(2)))
    singles = sum(exact_value(single(law, i, strike)) for i in range(2))
    within(largest.value + smallest.value - singles, largest.standard_error, smallest.standard_error)
    exact = exact_value(base) + exact_value(replace(base, aggregate=Aggregate.worst_of(2)))
    assert exact == pytest.approx(singles, abs=1e-8)


@repeatable
@given(laws(2, 5), st.floats(70.0, 130.0))
def test_best_of_is_worth_at_least_each_and_worst_of_at_most(law, strike):
    best = EuropeanProblem(law, Aggregate.best_of(law.n_assets), struck_call(strike), 0.95)
    worst = replace(best, aggregate=Aggregate.worst_of(law.n_assets))
    high, low = value_of(best), value_of(worst)
    for i in range(law.n_assets):
        alone = exact_value(single(law, i, strike))
        assert high.value >= alone - REACH * high.standard_error - 1e-9
        assert low.value <= alone + REACH * low.standard_error + 1e-9


@repeatable
@given(problems(minimum=2), st.integers(0, 2**32 - 1))
def test_the_order_of_the_underlyings_does_not_matter(problem, shuffle):
    order = np.random.default_rng(shuffle).permutation(problem.law.n_assets)
    law = JointLognormal(problem.law.forwards[order], problem.law.covariance[np.ix_(order, order)])
    weights = problem.aggregate.weights
    if not problem.aggregate.is_ranked:
        weights = tuple(weights[i] for i in order)
    other = replace(problem, law=law, aggregate=replace(problem.aggregate, weights=weights))
    a, b = value_of(problem), value_of(other)
    within(a.value - b.value, a.standard_error, b.standard_error)
    for i, j in enumerate(order):
        within(b.log_deltas[i] - a.log_deltas[j], b.log_delta_errors[i], a.log_delta_errors[j])
    one, two = best_exact(references(problem)), best_exact(references(other))
    assert (one is None) == (two is None)
    if one is not None:
        assert abs(one.value - two.value) <= one.error + two.error + 1e-8


@repeatable
@given(problems(kinds=(ProfileKind.CALL, ProfileKind.PUT, ProfileKind.STRADDLE)), st.sampled_from((0.125, 8.0, 64.0)))
def test_a_change_of_currency_unit_scales_the_value(problem, unit):
    degree = sum(problem.aggregate.weights) if problem.aggregate.kind == "geometric" else 1.0
    payoff = problem.payoff
    scaled = replace(
        problem,
        law=replace(problem.law, forwards=problem.law.forwards * unit),
        payoff=replace(
            payoff, intercept=payoff.intercept * unit**degree, knots=tuple(k * unit**degree for k in payoff.knots)
        ),
    )
    base, other = value_of(problem), value_of(scaled)
    assert other.value == pytest.approx(unit**degree * base.value, rel=1e-9, abs=1e-12)
    np.testing.assert_allclose(other.log_deltas, unit**degree * base.log_deltas, rtol=1e-8, atol=1e-9)


@repeatable
@given(problems(kinds=(ProfileKind.CALL,)), st.floats(1.01, 1.3))
def test_a_call_falls_with_its_strike_and_never_faster_than_discounting(problem, factor):
    low = problem.payoff.knots[0]
    high = max(low * factor, low / factor)
    cheap, dear = (value_of(struck(problem, ProfileKind.CALL, k)) for k in (high, low))
    slack = REACH * (cheap.standard_error + dear.standard_error) + 1e-9
    assert -slack <= dear.value - cheap.value <= problem.discount_factor * (high - low) + slack


@repeatable
@given(problems())
def test_a_delta_is_the_slope_of_the_value(problem):
    base = value_of(problem)
    for i in range(problem.law.n_assets):
        slope, error = bumped_slope(problem, i)
        within(base.log_deltas[i] - slope, base.log_delta_errors[i], error)


def bumped_slope(problem, i, size=1e-4):
    """Slope in the logarithm of forward i, on the same draws, and its own error.

    Central differences at two sizes, extrapolated: the error is of fourth order in the size.
    """
    fine, coarse = (central_difference(problem, i, h) for h in (size, 2 * size))
    # the error of a difference on common draws is far below that of a value; a tenth of it is generous
    return (4 * fine - coarse) / 3, 0.1 * value_of(problem).standard_error


def central_difference(problem, i, size):
    up, down = (value_of(with_forward(problem, i, np.exp(sign * size))) for sign in (1, -1))
    return (up.value - down.value) / (2 * size)


def with_forward(problem, i, factor):
    forwards = problem.law.forwards.copy()
    forwards[i] *= factor
    return replace(problem, law=replace(problem.law, forwards=forwards))


@repeatable
@given(problems(maximum=4))
def test_every_lower_bound_lies_below_every_exact_value_and_upper_bound(problem):
    known = references(problem)
    floors = [r.value - r.error for r in known if r.kind in (ReferenceKind.LOWER_BOUND, ReferenceKind.EXACT)]
    ceilings = [r.value + r.error for r in known if r.kind in (ReferenceKind.UPPER_BOUND, ReferenceKind.EXACT)]
    if floors and ceilings:
        assert max(floors) <= min(ceilings) + 1e-9


def struck_call(strike):
    from pricer.contracts.profile import Profile

    return Profile(ProfileKind.CALL, strike).payoff()


def single(law, i, strike):
    alone = JointLognormal(law.forwards[i : i + 1], law.covariance[i : i + 1, i : i + 1])
    return EuropeanProblem(alone, Aggregate.weighted_sum((1.0,)), struck_call(strike), 0.95)


def exact_value(problem):
    exact = best_exact(references(problem))
    assert exact is not None
    return exact.value
