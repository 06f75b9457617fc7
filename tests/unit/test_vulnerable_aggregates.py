"""Options on several underlyings whose writer may default, and what is refused."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear, Profile, ProfileKind
from pricer.engines.closed_form import FAMILIES
from pricer.engines.closed_form.given_driver import first_exact
from pricer.engines.closed_form.vulnerable import growing_liabilities, on_any_aggregate, on_one_level, sole_liability
from pricer.engines.closed_form.writer_default import WriterAssets, fixed_boundary, time_of_default
from tests.unit.closed_form_cases import law, problem

EXACT = first_exact(FAMILIES)
CORRELATION = np.array([[1.0, 0.4, 0.3], [0.4, 1.0, -0.2], [0.3, -0.2, 1.0]])
VOLATILITIES = np.array([0.25, 0.35, 0.3])
COVARIANCE = 2.0 * CORRELATION * np.outer(VOLATILITIES, VOLATILITIES)
LAW = law([1.0, 1.05], VOLATILITIES[:2], CORRELATION[:2, :2], 2.0)
ASSETS = WriterAssets(1.3, math.sqrt(COVARIANCE[2, 2]), COVARIANCE[:2, 2])
AGGREGATES = (
    Aggregate.weighted_sum((0.5, 0.5)),
    Aggregate.weighted_sum((1.0, -1.0)),
    Aggregate.best_of(2),
    Aggregate.worst_of(2),
    Aggregate.geometric((0.5, 0.5)),
)


def draws(n=400_000):
    """Levels (n, 2) and assets (n,) on common antithetic draws."""
    z = np.random.default_rng(2).standard_normal((n // 2, 3))
    x = np.concatenate((z, -z)) @ np.linalg.cholesky(COVARIANCE).T - 0.5 * np.diag(COVARIANCE)
    return LAW.forwards * np.exp(x[:, :2]), ASSETS.forward * np.exp(x[:, 2])


def mean_and_error(paid):
    return paid.mean(), paid.std() / math.sqrt(paid.size)


@pytest.mark.parametrize("aggregate", AGGREGATES)
def test_two_underlyings_and_the_writer_equal_a_simulation(aggregate):
    option = problem(LAW, aggregate, ProfileKind.CALL, 0.1 if min(aggregate.weights) < 0.0 else 1.0, 0.96)
    levels, assets = draws()
    claims = option.payoff(aggregate(levels))
    shares = fixed_boundary(ASSETS, 0.9, 1.0, 0.3)
    structural = on_any_aggregate(option, ASSETS.loadings, shares, EXACT)
    paid = np.where(assets >= 0.9, 1.0, 0.7 * assets / 1.0)
    # Four standard errors of a fixed seed; antithetic draws make them smaller than shown.
    mean, error = mean_and_error(0.96 * claims * paid)
    assert structural.value == pytest.approx(mean, abs=4.0 * error)
    alone = sole_liability(option, replace(ASSETS, forward=0.2), EXACT)
    mean, error = mean_and_error(0.96 * np.minimum(claims, assets * 0.2 / 1.3))
    assert alone.value == pytest.approx(mean, abs=4.0 * error)
    assert max(structural.error, alone.error) < 1e-7


def test_a_geometric_basket_is_priced_by_probabilities_and_by_the_integral_alike():
    option = problem(LAW, AGGREGATES[-1], ProfileKind.STRADDLE, 1.0, 0.96)
    shares = fixed_boundary(ASSETS, 0.9, 1.0, 0.3)
    closed = on_one_level(option, ASSETS.loadings, shares)
    assert closed.value == pytest.approx(on_any_aggregate(option, ASSETS.loadings, shares, EXACT).value, abs=1e-9)
    levels, assets = draws()
    paid = np.where(assets >= 0.9 + option.payoff(option.aggregate(levels)), 1.0, 0.0)
    claims = option.payoff(option.aggregate(levels))
    paid = 0.96 * claims * np.where(paid > 0.0, 1.0, 0.7 * assets / (0.9 + claims))
    mean, error = mean_and_error(paid)
    assert growing_liabilities(option, ASSETS, 0.9, 0.3).value == pytest.approx(mean, abs=4.0 * error)


def test_a_basket_has_no_single_level():
    option = problem(LAW, AGGREGATES[0], ProfileKind.CALL, 1.0)
    assert on_one_level(option, ASSETS.loadings, time_of_default(0.9, 0.4)) is None
    assert growing_liabilities(option, ASSETS, 0.9, 0.3) is None


def test_an_aggregate_without_a_known_law_is_told():
    assert (
        on_any_aggregate(
            problem(LAW, AGGREGATES[0], ProfileKind.CALL, 1.0),
            ASSETS.loadings,
            time_of_default(0.9, 0.4),
            first_exact(()),
        )
        is None
    )


@pytest.mark.parametrize(
    "payoff",
    [
        Profile(ProfileKind.FORWARD, 0.1).payoff(),
        Profile(ProfileKind.PUT, 1.0, floor=-0.1, cap=0.5).payoff().scaled(-1.0),
        PiecewiseLinear(-0.05, 0.0, (1.0,), (1.0,), (0.0,)),
    ],
)
def test_a_payoff_that_may_be_negative_is_no_claim(payoff):
    option = replace(problem(LAW, AGGREGATES[0], ProfileKind.CALL, 1.0), payoff=payoff)
    with pytest.raises(ValueError, match="never negative"):
        on_any_aggregate(option, ASSETS.loadings, time_of_default(0.9, 0.4), EXACT)


def test_a_forward_is_a_claim_only_on_what_cannot_be_negative():
    # Nothing below 0 on a positive level; on a spread the same payoff is.
    payoff = PiecewiseLinear(0.0, 1.0)
    basket = replace(problem(LAW, AGGREGATES[0], ProfileKind.CALL, 1.0), payoff=payoff)
    value = on_any_aggregate(basket, np.zeros(2), time_of_default(0.9, 0.4), EXACT)
    assert value.value == pytest.approx((0.9 + 0.1 * 0.4) * 0.5 * LAW.forwards.sum(), abs=1e-9)
    with pytest.raises(ValueError, match="never negative"):
        on_any_aggregate(replace(basket, aggregate=AGGREGATES[1]), np.zeros(2), time_of_default(0.9, 0.4), EXACT)


def test_what_cannot_be_is_refused():
    with pytest.raises(ValueError, match="more than the whole claim"):
        fixed_boundary(ASSETS, 1.5, 1.0, 0.1)
    with pytest.raises(ValueError, match="out of range"):
        fixed_boundary(ASSETS, 0.5, 1.0, 1.2)
    with pytest.raises(ValueError, match="between 0 and 1"):
        time_of_default(1.2, 0.4)
    with pytest.raises(ValueError, match="above 0"):
        WriterAssets(0.0, 0.3, np.zeros(1))
