"""Averages over dates and forward starts against QuantLib's engines."""

from __future__ import annotations

import math

import numpy as np
import pytest
import QuantLib as ql

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import Profile, ProfileKind
from pricer.engines.closed_form import FAMILIES, best_exact, references
from pricer.engines.closed_form.average_convolution import average_by_convolution
from pricer.engines.closed_form.fixing_law import (
    FixingLaw,
    arithmetic_average,
    average_over,
    forward_start,
    geometric_average,
)
from pricer.engines.closed_form.geometric_basket import GEOMETRIC_BASKET
from pricer.engines.closed_form.moment_matching import MOMENT_MATCHING
from pricer.engines.problem import ReferenceKind
from tests.unit.closed_form_cases import TODAY, QuantLibMarket

RATE, YIELD, VOLATILITY, SPOT = 0.04, 0.015, 0.28, 100.0
DAYS = np.array([31, 62, 90, 120, 181, 273, 365])
KINDS = ((ql.Option.Call, ProfileKind.CALL), (ql.Option.Put, ProfileKind.PUT))


def market():
    return QuantLibMarket([SPOT], [YIELD], [VOLATILITY], [[1.0]], RATE, 365)


def fixing_law(days=DAYS):
    years = np.asarray(days) / 365.0
    return FixingLaw(SPOT * np.exp((RATE - YIELD) * years)[:, None], (VOLATILITY**2 * years)[:, None, None])


def option(kind, strike, average, past=(), days=DAYS):
    dates = [TODAY - 30 * (len(past) - i) for i in range(len(past))] + [TODAY + int(d) for d in days]
    payoff = ql.PlainVanillaPayoff(kind, strike)
    return ql.DiscreteAveragingAsianOption(average, dates, payoff, market().exercise, [float(p) for p in past])


@pytest.mark.parametrize("past", [(), (104.0, 97.0, 92.0)])
@pytest.mark.parametrize("strike", [85.0, 100.0, 115.0])
def test_geometric_average_equals_the_discrete_engine(past, strike):
    quantlib = market()
    weights = average_over(DAYS.size, [1.0], len(past))
    fixed = math.prod(p ** weights[0, 0] for p in past)
    for kind, ours in KINDS:
        asian = option(kind, strike, ql.Average.Geometric, past)
        asian.setPricingEngine(ql.AnalyticDiscreteGeometricAveragePriceAsianEngine(quantlib.processes[0]))
        problem = geometric_average(
            fixing_law(), weights, Profile(ours, strike).payoff(), quantlib.discount_factor, fixed
        )
        assert GEOMETRIC_BASKET.reference(problem).value == pytest.approx(asian.NPV(), abs=1e-11)


@pytest.mark.parametrize("past", [(), (104.0, 97.0, 92.0)])
@pytest.mark.parametrize("strike", [85.0, 100.0, 115.0])
def test_two_moments_equal_turnbull_and_wakeman(past, strike):
    quantlib = market()
    weights = average_over(DAYS.size, [1.0], len(past))
    for kind, ours in KINDS:
        asian = option(kind, strike, ql.Average.Arithmetic, past)
        asian.setPricingEngine(ql.TurnbullWakemanAsianEngine(quantlib.processes[0]))
        problem = arithmetic_average(
            fixing_law(), weights, Profile(ours, strike).payoff(), quantlib.discount_factor, sum(past) * weights[0, 0]
        )
        assert MOMENT_MATCHING.reference(problem).value == pytest.approx(asian.NPV(), abs=1e-10)


@pytest.mark.parametrize("past", [(), (104.0, 97.0, 92.0)])
@pytest.mark.parametrize("strike", [85.0, 100.0, 115.0])
def test_arithmetic_average_by_convolution_equals_chois_quadrature(past, strike):
    # Choi (2018); from lambda 25 on its value stands still to 1e-11.
    quantlib = market()
    weights = average_over(DAYS.size, [1.0], len(past))
    asian = option(ql.Option.Call, strike, ql.Average.Arithmetic, past)
    asian.setPricingEngine(ql.ChoiAsianEngine(quantlib.processes[0], 25.0, 1 << 26))
    payoff = Profile(ProfileKind.CALL, strike).payoff()
    found = average_by_convolution(fixing_law(), weights[:, 0], payoff, sum(past) * weights[0, 0])
    assert found.error < 1e-11
    assert quantlib.discount_factor * found.value == pytest.approx(asian.NPV(), abs=2e-10)


def test_convolution_lies_between_the_bounds_and_meets_the_quadratures_for_few_dates():
    for days in ([120, 365], [31, 200, 365], list(range(30, 366, 30))):
        weights = average_over(len(days), [1.0])
        payoff = Profile(ProfileKind.CALL, 104.0).payoff()
        problem = arithmetic_average(fixing_law(days), weights, payoff, 1.0)
        found = average_by_convolution(fixing_law(days), weights[:, 0], payoff)
        refs = references(problem)
        lower = max(r.value for r in refs if r.kind is ReferenceKind.LOWER_BOUND)
        upper = min(r.value for r in refs if r.kind is ReferenceKind.UPPER_BOUND)
        assert lower - 1e-9 < found.value < upper + 1e-9
        assert upper - lower < 0.05
        exact = best_exact(refs)
        assert found.value == pytest.approx(exact.value, abs=exact.error + found.error)


@pytest.mark.parametrize("moneyness", [0.9, 1.0, 1.1])
def test_forward_starts_equal_the_forward_engines(moneyness):
    # Rubinstein (1990): in shares, S(T) - m S(t), and as a performance, S(T) / S(t) - m.
    quantlib = market()
    law = fixing_law()
    start, end = 2, DAYS.size - 1
    for kind, ours in KINDS:
        terms = (moneyness, TODAY + int(DAYS[start]), ql.PlainVanillaPayoff(kind, 0.0), quantlib.exercise)
        forward = ql.ForwardVanillaOption(*terms)
        forward.setPricingEngine(ql.ForwardEuropeanEngine(quantlib.processes[0]))
        payoff = Profile(ours, moneyness).payoff()
        performance = forward_start(law, start, end, Aggregate.weighted_sum((1.0,)), payoff, quantlib.discount_factor)
        value = best_exact(references(performance)).value
        assert value * law.forwards[start, 0] == pytest.approx(forward.NPV(), abs=1e-11)
        weights = np.zeros((DAYS.size, 1))
        weights[end], weights[start] = 1.0, -moneyness
        spread = arithmetic_average(law, weights, Profile(ours, 0.0).payoff(), quantlib.discount_factor)
        assert best_exact(references(spread)).value == pytest.approx(forward.NPV(), abs=1e-11)


def test_every_family_takes_averages_of_baskets_over_dates():
    # An average over 12 dates of a basket of three: bounds and approximation, tight and in order.
    years = np.arange(1, 13) / 12.0
    correlation = 0.4 + 0.6 * np.eye(3)
    volatilities = np.array([0.2, 0.3, 0.25])
    covariances = years[:, None, None] * correlation * np.outer(volatilities, volatilities)
    law = FixingLaw(np.exp(0.02 * years)[:, None] * np.ones(3), covariances)
    problem = arithmetic_average(law, average_over(12, [0.5, 0.3, 0.2]), Profile(ProfileKind.CALL, 1.0).payoff(), 0.98)
    found = {family.method: family.reference(problem) for family in FAMILIES}
    by_kind = {r.kind: r.value for r in found.values() if r is not None}
    assert by_kind[ReferenceKind.LOWER_BOUND] < by_kind[ReferenceKind.UPPER_BOUND]
    assert by_kind[ReferenceKind.UPPER_BOUND] - by_kind[ReferenceKind.LOWER_BOUND] < 3e-4
    draws = np.random.default_rng(3).multivariate_normal(np.zeros(36), law.joint().covariance, 200_000, method="eigh")
    levels = law.joint().forwards * np.exp(draws - 0.5 * np.diag(law.joint().covariance))
    paid = 0.98 * problem.payoff(problem.aggregate(levels))
    # Four standard errors: a fixed seed, one comparison on each side.
    slack = 4.0 * paid.std() / math.sqrt(paid.size)
    assert by_kind[ReferenceKind.LOWER_BOUND] - slack < paid.mean() < by_kind[ReferenceKind.UPPER_BOUND] + slack
