"""Barriers on dates that change, rebates, and barriers outside an aggregate."""

from __future__ import annotations

import math

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear, Profile, ProfileKind
from pricer.engines.closed_form import FAMILIES
from pricer.engines.closed_form.barrier import Corridor, WatchedLevel, knock_in, knock_out, survival_given_end
from pricer.engines.closed_form.discrete_barrier import Observations
from pricer.engines.closed_form.discrete_barrier import knock_in as knock_in_on_dates
from pricer.engines.closed_form.discrete_barrier import knock_out as knock_out_on_dates
from pricer.engines.closed_form.external_barrier import knock_out_by_another, knock_out_of_aggregate
from pricer.engines.closed_form.given_driver import first_exact
from pricer.engines.closed_form.payoff_pieces import between, lognormal_expectations, part_between
from pricer.engines.problem import EuropeanProblem
from pricer.market.joint_lognormal import JointLognormal
from tests.unit.closed_form_cases import law, problem, random_correlation

EXACT = first_exact(FAMILIES)
CALL = Profile(ProfileKind.CALL, 1.0).payoff()
LEVEL = WatchedLevel(1.0, 1.03, 0.3)
# Uneven dates, changing volatility, growth and barriers, and rebates; the payment is after the last observation.
DATES = Observations(
    np.array([1.01, 0.99, 1.04, 1.05]),
    np.array([0.01, 0.04, 0.05, 0.10]),
    np.array([0.8, 0.0, 0.85, 0.7]),
    np.array([1.3, 1.35, math.inf, 1.6]),
    np.array([0.05, 0.04, 0.03, 0.02]),
)
FORWARD, VARIANCE = 1.06, 0.13


def simulated(observations, forward, variance, payoff, n=400_000):
    """Plain simulation of the same; the payoff is taken as its mean given the last date."""
    rng = np.random.default_rng(11)
    steps = np.sqrt(np.diff(observations.variances, prepend=0.0))
    w = np.cumsum(rng.standard_normal((n, steps.size)) * steps, axis=1)
    levels = observations.forwards * np.exp(w - 0.5 * observations.variances)
    outside = (levels <= observations.lowers) | (levels >= observations.uppers)
    hit = outside.any(axis=1)
    rebates = observations.rebates[np.argmax(outside, axis=1)] if observations.rebates.size else np.zeros(n)
    left = math.sqrt(variance - observations.variances[-1])
    end = lognormal_expectations(payoff, forward * np.exp(w[:, -1] - 0.5 * observations.variances[-1]), left)
    paid = np.where(hit, rebates, end)
    return paid.mean(), paid.std() / math.sqrt(n)


@pytest.mark.parametrize("kind", [ProfileKind.CALL, ProfileKind.PUT, ProfileKind.CASH_DIGITAL_CALL])
def test_changing_barriers_volatilities_and_rebates_equal_a_simulation(kind):
    payoff = Profile(kind, 1.0).payoff()
    found = knock_out_on_dates(DATES, FORWARD, VARIANCE, payoff)
    mean, error = simulated(DATES, FORWARD, VARIANCE, payoff)
    assert found.error < 1e-11
    # Four standard errors of a fixed seed.
    assert found.value == pytest.approx(mean, abs=4.0 * error)


def test_knock_in_on_dates_is_what_the_knock_out_lacks_and_has_no_rebates():
    free = Observations(DATES.forwards, DATES.variances, DATES.lowers, DATES.uppers, np.empty(0))
    both = knock_in_on_dates(DATES, FORWARD, VARIANCE, CALL) + knock_out_on_dates(free, FORWARD, VARIANCE, CALL)
    plain = lognormal_expectations(CALL, np.array([FORWARD]), math.sqrt(VARIANCE))[0]
    assert both.value == pytest.approx(plain, abs=1e-12)


def test_one_observation_at_expiry_is_a_payoff_with_a_jump():
    once = Observations(np.array([1.03]), np.array([0.09]), np.array([0.0]), np.array([1.4]), np.array([0.07]))
    inside = lognormal_expectations(between(CALL, 0.0, 1.4), np.array([1.03]), 0.3)[0]
    above = part_between(PiecewiseLinear(0.07, 0.0), 1.4, math.inf, 1.03, 0.3).value
    assert knock_out_on_dates(once, 1.03, 0.09, CALL).value == pytest.approx(inside + above, abs=1e-13)


def test_a_start_outside_the_corridor_is_out_already():
    corridor = Corridor(1.1, 2.0)
    assert knock_out(LEVEL, corridor, CALL).value == 0.0
    plain = lognormal_expectations(CALL, np.array([1.03]), 0.3)[0]
    assert knock_in(LEVEL, corridor, CALL).value == pytest.approx(plain, abs=1e-14)
    assert knock_out_by_another(LEVEL, Corridor(1.1), 1.0, 0.2, 0.5, CALL).value == 0.0


def test_an_image_far_beyond_its_barrier_keeps_its_digits():
    # Drift of five deviations towards an upper barrier nine deviations away: the image weighs e^45 of next to nothing.
    level = WatchedLevel(1.0, math.exp(0.25 + 0.5 * 0.05**2), 0.05)
    inside = knock_out(level, Corridor(0.0, math.exp(0.45)), PiecewiseLinear(1.0, 0.0))
    # Probability of touching, from the inverse Gaussian law of first passage (Chhikara & Folks 1989).
    from scipy.stats import invgauss

    distance, drift, deviation = 0.45, 0.25, 0.05
    shape = distance**2 / deviation**2
    mean = distance / drift
    touched = invgauss.cdf(1.0, mean / shape, scale=shape)
    assert 1.0 - inside.value == pytest.approx(touched, abs=1e-14)
    found = knock_in(level, Corridor(0.0, math.exp(0.45)), PiecewiseLinear(1.0, 0.0))
    assert found.value == pytest.approx(touched, rel=1e-9)


def test_survival_of_the_bridge_makes_the_knock_out_on_the_level_itself():
    law_of_itself = JointLognormal(np.array([1.03]), np.array([[0.09]]))
    itself = EuropeanProblem(law_of_itself, Aggregate.weighted_sum((1.0,)), CALL, 0.9)
    for corridor in (Corridor(0.8), Corridor(0.0, 1.3), Corridor(0.75, 1.4)):
        found = knock_out_of_aggregate(itself, LEVEL, corridor, np.array([0.09]), EXACT)
        assert found.value == pytest.approx(0.9 * knock_out(LEVEL, corridor, CALL).value, abs=1e-9)
    assert np.all(survival_given_end(LEVEL, Corridor(0.8, 1.2), np.array([-1.0, 1.0])) == 0.0)


@pytest.mark.parametrize("corridor", [Corridor(0.85), Corridor(0.7, 1.3)])
def test_a_barrier_outside_a_basket_equals_a_simulation(corridor):
    rng = np.random.default_rng(5)
    correlation = random_correlation(rng, 3)
    volatilities = np.array([0.25, 0.3, 0.3])
    covariance = correlation * np.outer(volatilities, volatilities)
    basket = EuropeanProblem(
        JointLognormal(np.array([1.02, 0.98]), covariance[:2, :2]), Aggregate.weighted_sum((0.6, 0.4)), CALL, 0.95
    )
    found = knock_out_of_aggregate(basket, LEVEL, corridor, covariance[:2, 2], EXACT)
    # Daily steps; the barrier moved inwards by the mean overshoot stands for one watched continuously.
    n, steps = 20_000, 250
    root = np.linalg.cholesky(covariance / steps)
    logs = np.zeros((n, 3))
    alive = np.ones(n, dtype=bool)
    lift = 0.5825971579390107 * 0.3 / math.sqrt(steps)
    low = math.log(corridor.lower) + lift
    high = math.log(corridor.upper) - lift
    for _ in range(steps):
        logs += rng.standard_normal((n, 3)) @ root.T
        logs[:, 2] += LEVEL.drift / steps
        alive &= (logs[:, 2] > low) & (logs[:, 2] < high)
    ends = basket.law.forwards * np.exp(logs[:, :2] - 0.5 * np.diag(covariance)[:2])
    paid = 0.95 * np.where(alive, basket.payoff(basket.aggregate(ends)), 0.0)
    # Four standard errors, and a little for the correction.
    assert found.value == pytest.approx(paid.mean(), abs=4.0 * paid.std() / math.sqrt(n) + 2e-4)
    assert found.error < 1e-8


def test_what_cannot_be_is_refused():
    with pytest.raises(ValueError, match=r"lower barrier 1\.2 must be below the upper one 1\.1"):
        Corridor(1.2, 1.1)
    with pytest.raises(ValueError, match="must be above 0"):
        WatchedLevel(1.0, 1.0, 0.0)
    with pytest.raises(ValueError, match="variance must increase"):
        Observations(np.ones(2), np.array([0.1, 0.1]), np.zeros(2), np.full(2, 2.0), np.empty(0))
    with pytest.raises(ValueError, match="lower barrier must be below"):
        Observations(np.ones(1), np.array([0.1]), np.ones(1), np.ones(1), np.empty(0))
    with pytest.raises(ValueError, match="rebates need one number"):
        Observations(np.ones(1), np.array([0.1]), np.zeros(1), np.ones(1), np.ones(2))
    single = problem(law([1.0], [0.2], np.eye(1)), Aggregate.weighted_sum((1.0,)), ProfileKind.CALL, 1.0)
    with pytest.raises(ValueError, match="more covariance with the driver"):
        knock_out_of_aggregate(single, LEVEL, Corridor(0.8), np.array([0.1]), EXACT)
