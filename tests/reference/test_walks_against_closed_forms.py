"""Walked contracts against formulas for them: barriers, averages, forward starts, realised variance.

The closed forms are themselves checked against published tables and QuantLib in this folder. Sampled values may
be off by four of their standard errors under the fixed seeds here: one in 16,000 were they normal.
"""

import math

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.average import Average, AverageOf
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.fixings import Fixing
from pricer.contracts.levels import Levels
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.realised_variance import RealisedVariance
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction, Trigger
from pricer.engines.closed_form import best_exact, discrete_barrier, references
from pricer.engines.closed_form.barrier import Corridor, WatchedLevel, knock_out
from pricer.engines.closed_form.fixing_law import FixingLaw, arithmetic_average, average_over, forward_start
from pricer.engines.closed_form.variance_swap import expected_squares
from pricer.engines.contract_walk.engine import walk_reference, walk_value
from pricer.engines.contract_walk.settings import WalkSettings
from pricer.engines.model_value import Asked
from pricer.engines.problem import EuropeanProblem
from pricer.market.joint_lognormal import JointLognormal
from tests.unit.markets import TODAY
from tests.unit.walk_cases import ASKED, CALL, SPOTS, contract, paid_at_once, quarter, terms_of, weekdays

QUARTERS = tuple(quarter(k) for k in range(1, 5))
TIGHT = Asked("T1", 7, 1e-4, 1e-3, 1e-3)
PUT = Profile(ProfileKind.PUT, 1.0)


def law_of(terms):
    """Of performances from today's spots."""
    references_ = np.array([SPOTS[name] for name in terms.contract.underlyings])
    return FixingLaw(terms.forwards / references_, np.cumsum(terms.covariances, axis=0))


def exact(problem):
    found = best_exact(references(problem))
    assert found is not None
    return found.value


def value_of(found, smiled=False, market=None, settings=WalkSettings(), asked=TIGHT, fixings=()):  # noqa: B008
    trade, terms, market = terms_of(found, market, fixings)
    return walk_value(trade, terms, market, asked, settings, smiled=smiled), terms


def agrees(value, expected, standard_errors=4.0):
    error = value.sample.standard_error
    assert abs(value.sample.value - expected) <= standard_errors * error + 1e-12, (value.sample.value, expected, error)
    assert error < 4e-4


@pytest.mark.parametrize("kind", BarrierKind)
@pytest.mark.parametrize("direction", Direction)
def test_a_barrier_on_dates_is_worth_its_quadrature(kind, direction):
    level = 0.9 if direction is Direction.DOWN else 1.1
    trigger = Trigger(direction, Aggregate.worst_of(1))
    barrier = Barrier(kind, trigger, tuple(map(paid_at_once, QUARTERS)), (level,) * 4)
    value, terms = value_of(contract(barrier, payout=PUT))
    law = law_of(terms)
    variances = law.covariances[:, 0, 0]
    lower, upper = (level, np.inf) if direction is Direction.DOWN else (0.0, level)
    watched = discrete_barrier.Observations(
        law.forwards[:, 0], variances, np.full(4, lower), np.full(4, upper), np.empty(0)
    )
    price = discrete_barrier.knock_out if kind is BarrierKind.OUT else discrete_barrier.knock_in
    expected = price(watched, float(law.forwards[-1, 0]), float(variances[-1]), PUT.payoff())
    agrees(value, terms.discount(QUARTERS[-1]) * expected.value)


def test_a_rebate_is_paid_at_the_hit():
    trigger = Trigger(Direction.DOWN, Aggregate.worst_of(1))
    barrier = Barrier(BarrierKind.OUT, trigger, tuple(map(paid_at_once, QUARTERS)), (0.9,) * 4, rebate_at_hit=0.2)
    value, terms = value_of(contract(barrier))
    law = law_of(terms)
    variances, last = law.covariances[:, 0, 0], terms.discount(QUARTERS[-1])
    rebates = np.array([0.2 * terms.discount(day) / last for day in QUARTERS])
    watched = discrete_barrier.Observations(law.forwards[:, 0], variances, np.full(4, 0.9), np.full(4, np.inf), rebates)
    expected = discrete_barrier.knock_out(watched, float(law.forwards[-1, 0]), float(variances[-1]), CALL.payoff())
    agrees(value, last * expected.value)


@pytest.mark.parametrize("days", [QUARTERS[:2], weekdays(QUARTERS[1])], ids=["two dates", "every day"])
def test_one_underlying_watched_at_all_times_is_worth_the_reflected_law_however_few_the_dates(days):
    """Forward and volatility are nearly flat here: the formula's growth at the pace of variance holds to 1e-5."""
    trigger = Trigger(Direction.DOWN, Aggregate.worst_of(1))
    start = Barrier(
        BarrierKind.OUT, trigger, tuple(map(paid_at_once, (TODAY, *days))), (0.9,) * (len(days) + 1), continuous=True
    )
    found = contract(start, payout=PUT, last=QUARTERS[1])
    fixing = [Fixing("ARVENNE", TODAY, 100.0)]
    asked = Asked("T1", 7, 1e-4 if len(days) < 10 else 4e-4, 1e-3, 1e-3)
    value, terms = value_of(found, fixings=fixing, asked=asked)
    law = law_of(terms)
    watched = WatchedLevel(1.0, float(law.forwards[-1, 0]), math.sqrt(law.covariances[-1, 0, 0]))
    expected = knock_out(watched, Corridor(lower=0.9), PUT.payoff()).value
    agrees(value, terms.discount(QUARTERS[1]) * expected)


def test_moving_the_barrier_of_daily_dates_comes_close_to_watching_it_at_all_times():
    """Two names that move as one: the worst of them is one level, but no bridge is drawn for it."""
    trigger = Trigger(Direction.DOWN, Aggregate.worst_of(2))
    days = (TODAY, *weekdays(QUARTERS[1]))
    barrier = Barrier(BarrierKind.OUT, trigger, tuple(map(paid_at_once, days)), (0.9,) * len(days), continuous=True)
    levels = Levels(("ARVENNE", "ARVENNE"), (100.0, 100.0))
    found = contract(barrier, names=("ARVENNE", "ARVENNE"), payout=PUT, last=QUARTERS[1], levels=levels)
    asked = Asked("T1", 7, 3e-4, 1e-3, 1e-3)
    value, terms = value_of(found, fixings=[Fixing("ARVENNE", TODAY, 100.0)], asked=asked)
    variance, forward = terms.covariances[:, 0, 0].sum(), terms.forwards[-1, 0] / 100.0
    expected = knock_out(WatchedLevel(1.0, forward, math.sqrt(variance)), Corridor(lower=0.9), PUT.payoff()).value
    agrees(value, terms.discount(QUARTERS[1]) * expected)


@pytest.mark.parametrize("of", AverageOf)
def test_an_average_of_signed_weights_is_worth_its_quadrature(of):
    weights = (0.6, -0.5)
    profile = Profile(ProfileKind.CALL, 0.1)
    statistic = Average(QUARTERS[:2], Aggregate.weighted_sum(weights), of)
    value, terms = value_of(
        contract(names=("ARVENNE", "BELCOR"), statistic=statistic, payout=profile, last=QUARTERS[1])
    )
    problem = arithmetic_average(law_of(terms), average_over(2, weights), profile.payoff(), terms.discount(QUARTERS[1]))
    agrees(value, exact(problem))


def test_a_forward_start_is_worth_a_call_on_the_ratio():
    levels = Levels(("ARVENNE", "BELCOR"), None, (QUARTERS[0],))
    found = contract(names=("ARVENNE", "BELCOR"), levels=levels)
    value, terms = value_of(found)
    prices = FixingLaw(terms.forwards, np.cumsum(terms.covariances, axis=0))
    problem = forward_start(prices, 0, 1, Aggregate.worst_of(2), CALL.payoff(), terms.discount(QUARTERS[-1]))
    agrees(value, exact(problem))


def test_averaging_in_is_a_weighted_sum():
    """(S / mean(S1, S2) - 1)+ has no formula; that of its money value, (S - mean(S1, S2))+, has one. A digital on
    the ratio is one on the difference, too."""
    levels = Levels(("ARVENNE",), None, QUARTERS[:2])
    digital = Profile(ProfileKind.CASH_DIGITAL_CALL, 1.0, 0.1)
    value, terms = value_of(contract(levels=levels, payout=digital))
    prices = FixingLaw(terms.forwards, np.cumsum(terms.covariances, axis=0))
    weights = np.array([[-0.5], [-0.5], [1.0]])
    over = Profile(ProfileKind.CASH_DIGITAL_CALL, 0.0, 0.1)
    problem = arithmetic_average(prices, weights, over.payoff(), terms.discount(QUARTERS[-1]))
    agrees(value, exact(problem))


@pytest.mark.parametrize("returns", [20, 120])
def test_realised_variance_is_worth_its_expected_squares(returns):
    days = (TODAY, *weekdays(QUARTERS[2])[:returns])
    statistic = RealisedVariance(days, Aggregate.weighted_sum((1.0,)), (1.0, 0.0))
    found = contract(statistic=statistic, payout=Profile(ProfileKind.FORWARD, 0.04), last=days[-1])
    value, terms = value_of(found, fixings=[Fixing("ARVENNE", TODAY, 99.0)], asked=Asked("T1", 7, 2e-5, 1.0, 1.0))
    forwards = np.append(100.0, terms.forwards[:, 0])
    squares = expected_squares(terms.covariances[:, 0, 0], np.diff(np.log(forwards)), math.log(100.0 / 99.0))
    agrees(value, terms.discount(days[-1]) * (252.0 / returns * squares - 0.04))


def test_deltas_are_those_of_the_closed_form():
    """A worst-of call averaged over no path at all: European deltas, by the quadrature's own differences."""
    names = ("ARVENNE", "BELCOR")
    value, terms = value_of(contract(names=names), asked=Asked("T1", 7, 1e-4, 2e-4, 0.0))
    law = JointLognormal(law_of(terms).forwards[-1], law_of(terms).covariances[-1])

    def price(bump):
        problem = EuropeanProblem(
            JointLognormal(law.forwards * bump, law.covariance), Aggregate.worst_of(2), CALL.payoff(), 1.0
        )
        return exact(problem) * terms.discount(QUARTERS[-1])

    for i, spot in enumerate((100.0, 50.0)):
        bump = np.where(np.arange(2) == i, 1e-4, 0.0)
        expected = (price(1.0 + bump) - price(1.0 - bump)) / 2e-4 / spot
        assert abs(value.ratios.deltas[i] - expected) < 4.0 * value.ratios.delta_errors[i] + 1e-6
        assert value.ratios.delta_errors[i] * spot <= 2e-4


def test_vegas_are_those_of_the_closed_form():
    """By the quadrature's differences on the terms that a moved volatility leaves; a realised variance's is exact."""
    names = ("ARVENNE", "BELCOR")
    value, terms = value_of(contract(names=names))

    def price(asset, by):
        moved = law_of(terms.with_volatility_moved(asset, by))
        law = JointLognormal(moved.forwards[-1], moved.covariances[-1])
        return exact(EuropeanProblem(law, Aggregate.worst_of(2), CALL.payoff(), terms.discount(QUARTERS[-1])))

    for i in range(2):
        expected = 0.01 * (price(i, 1e-3) - price(i, -1e-3)) / 2e-3
        assert abs(value.ratios.vegas[i] - expected) < 4.0 * value.ratios.vega_errors[i] + 1e-7
        assert value.ratios.vega_errors[i] < 1e-5


def test_the_vega_of_a_variance_is_twice_its_volatility():
    days = weekdays(QUARTERS[0])[:21]
    statistic = RealisedVariance(days, Aggregate.weighted_sum((1.0,)), (1.0, 0.0))
    found = contract(statistic=statistic, payout=Profile(ProfileKind.FORWARD, 0.04), last=days[-1])
    value, terms = value_of(found, asked=Asked("T1", 7, 2e-5, 1.0, 1.0))

    def price(by):
        law = law_of(terms.with_volatility_moved(0, by))
        squares = expected_squares(np.diff(law.covariances[:, 0, 0]), np.diff(np.log(law.forwards[:, 0])))
        return terms.discount(days[-1]) * 252.0 / 20 * squares

    expected = 0.01 * (price(1e-3) - price(-1e-3)) / 2e-3
    assert abs(value.ratios.vegas[0] - expected) < 4.0 * value.ratios.vega_errors[0] + 1e-9
    assert value.ratios.vega_errors[0] < 0.01 * expected


WEEK = weekdays(QUARTERS[0])[:6]

COVERED = {
    "barrier": contract(
        Barrier(
            BarrierKind.IN,
            Trigger(Direction.DOWN, Aggregate.worst_of(1)),
            tuple(map(paid_at_once, QUARTERS)),
            (0.8,) * 4,
            Redemption(capital=0.0),
        ),
        payout=PUT,
    ),
    "average": contract(
        names=("ARVENNE", "BELCOR"),
        statistic=Average(QUARTERS[:2], Aggregate.weighted_sum((0.6, -0.5))),
        payout=Profile(ProfileKind.CALL, 0.1),
        last=QUARTERS[1],
    ),
    "variance": contract(
        statistic=RealisedVariance(WEEK, Aggregate.weighted_sum((1.0,)), (1.0, 0.0)),
        payout=Profile(ProfileKind.FORWARD, 0.04),
        last=WEEK[-1],
    ),
}


def expected_of(name, terms):
    law = law_of(terms)
    if name == "average":
        weights = average_over(2, (0.6, -0.5))
        payoff = Profile(ProfileKind.CALL, 0.1).payoff()
        return exact(arithmetic_average(law, weights, payoff, terms.discount(QUARTERS[1])))
    variances = law.covariances[:, 0, 0]
    if name == "variance":
        squares = expected_squares(np.diff(variances), np.diff(np.log(law.forwards[:, 0])))
        return terms.discount(WEEK[-1]) * (252.0 / 5 * squares - 0.04)
    watched = discrete_barrier.Observations(
        law.forwards[:, 0], variances, np.full(4, 0.8), np.full(4, np.inf), np.empty(0)
    )
    found = discrete_barrier.knock_in(watched, float(law.forwards[-1, 0]), float(variances[-1]), PUT.payoff())
    return terms.discount(QUARTERS[-1]) * found.value


@pytest.mark.parametrize("name", COVERED)
def test_intervals_cover_the_value_as_often_as_they_say(name):
    """300 seeds; 99 % intervals may miss 9 times: 3 are expected, 10 or more have a chance of 0.001."""
    from pricer.engines.selector import sampling_quantile

    settings = WalkSettings(reference_cells=16 * 4 * 256)
    trade, terms, market = terms_of(COVERED[name])
    expected = expected_of(name, terms)
    reach = sampling_quantile(settings.randomisations - 1, 0.01)
    misses = 0
    for seed in range(300):
        asked = Asked("T1", seed, ASKED.value_tolerance, 1.0, 1.0)
        found = walk_reference(trade, terms, market, asked, settings, smiled=False)
        misses += abs(found.value - expected) > reach * found.error
    assert misses <= 9
