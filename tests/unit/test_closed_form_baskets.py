"""Weighted sums and geometric baskets: independent engines, bounds, and the pieces they are made of."""

from __future__ import annotations

import math

import numpy as np
import pytest
import QuantLib as ql

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import ProfileKind
from pricer.engines.closed_form.basket_quadrature import BASKET_QUADRATURE, split_along
from pricer.engines.closed_form.forward import FORWARD
from pricer.engines.closed_form.geometric_basket import GEOMETRIC_BASKET
from pricer.engines.closed_form.lognormal_sum import LognormalSum
from pricer.engines.closed_form.lower_bound import LOWER_BOUND
from pricer.engines.closed_form.moment_matching import MOMENT_MATCHING
from pricer.engines.closed_form.quadrature import gauss_hermite, integrate, normal_density
from pricer.engines.closed_form.sparse_grid import Effort, expectation, tensor_rule
from pricer.engines.closed_form.sum_kernels import conditional
from pricer.engines.closed_form.two_asset_sum import TWO_ASSET_SUM
from pricer.engines.closed_form.upper_bound import UPPER_BOUND, comonotonic, mean_variance
from pricer.market.joint_lognormal import JointLognormal
from tests.unit.closed_form_cases import (
    QuantLibMarket,
    equal_correlation,
    law,
    problem,
    random_correlation,
)

MARKET = QuantLibMarket(
    (100.0, 80.0, 120.0, 60.0),
    (0.01, 0.0, 0.03, 0.02),
    (0.22, 0.35, 0.18, 0.3),
    [[1.0, 0.5, 0.3, 0.2], [0.5, 1.0, 0.6, 0.4], [0.3, 0.6, 1.0, 0.1], [0.2, 0.4, 0.1, 1.0]],
    0.03,
    500,
)
WEIGHTS = [(0.25, 0.25, 0.25, 0.25), (1.0, -0.5, 0.6, -1.0), (-0.3, -0.2, 0.9, 0.1)]


@pytest.mark.parametrize("weights", WEIGHTS)
@pytest.mark.parametrize("moneyness", [-15.0, 0.0, 12.0])
@pytest.mark.parametrize("side", [ql.Option.Call, ql.Option.Put])
def test_basket_quadrature_agrees_with_quantlibs_choi_engine(weights, moneyness, side):
    strike = float(np.dot(weights, MARKET.law.forwards)) + moneyness
    payoff = ql.AverageBasketPayoff(ql.PlainVanillaPayoff(side, strike), ql.Array(list(weights)))
    wanted = MARKET.basket(payoff, ql.ChoiBasketEngine(MARKET.processes, MARKET.matrix, 12.0))
    kind = ProfileKind.CALL if side == ql.Option.Call else ProfileKind.PUT
    ours = BASKET_QUADRATURE.reference(MARKET.problem(Aggregate.weighted_sum(weights), kind, strike))
    assert ours.value == pytest.approx(wanted, abs=2e-6)
    assert ours.error < 1e-4


@pytest.mark.parametrize("strike", [50.0, 70.0, 90.0, 105.0])
def test_deng_li_and_zhou_is_close_to_the_quadrature_for_a_long_leg_against_three(strike):
    aggregate = Aggregate.weighted_sum((3.0, -1.0, -0.8, -1.0))
    payoff = ql.AverageBasketPayoff(ql.PlainVanillaPayoff(ql.Option.Call, strike), ql.Array(list(aggregate.weights)))
    approximation = MARKET.basket(payoff, ql.DengLiZhouBasketEngine(MARKET.processes, MARKET.matrix))
    ours = BASKET_QUADRATURE.reference(MARKET.problem(aggregate, ProfileKind.CALL, strike))
    assert ours.value == pytest.approx(approximation, abs=0.03)


def test_a_digital_on_a_basket_is_the_slope_of_its_calls():
    aggregate = Aggregate.weighted_sum((1.0, -0.5, 0.6, -1.0))
    step = 0.05
    calls = [
        BASKET_QUADRATURE.reference(MARKET.problem(aggregate, ProfileKind.CALL, 65.0 + shift)).value
        for shift in (-2.0 * step, -step, step, 2.0 * step)
    ]
    slope = (calls[3] - 8.0 * calls[2] + 8.0 * calls[1] - calls[0]) / (12.0 * step)
    digital = BASKET_QUADRATURE.reference(MARKET.problem(aggregate, ProfileKind.CASH_DIGITAL_CALL, 65.0))
    assert digital.value == pytest.approx(slope, abs=1e-5)


def test_a_discrete_geometric_average_is_a_geometric_basket():
    # The dates of one asset's geometric average are levels with covariance sigma^2 min(t_i, t_j).
    days, rate, dividends, sigma, spot = [90, 200, 365], 0.04, 0.01, 0.3, 100.0
    market = QuantLibMarket((spot,), (dividends,), (sigma,), [[1.0]], rate, days[-1])
    times = np.array(days) / 365.0
    joint = JointLognormal(spot * np.exp((rate - dividends) * times), sigma * sigma * np.minimum.outer(times, times))
    for side, kind in ((ql.Option.Call, ProfileKind.CALL), (ql.Option.Put, ProfileKind.PUT)):
        option = ql.DiscreteAveragingAsianOption(
            ql.Average.Geometric,
            1.0,
            0,
            [ql.Settings.instance().evaluationDate + day for day in days],
            ql.PlainVanillaPayoff(side, 103.0),
            market.exercise,
        )
        option.setPricingEngine(ql.AnalyticDiscreteGeometricAveragePriceAsianEngine(market.processes[0]))
        aggregate = Aggregate.geometric((1 / 3, 1 / 3, 1 / 3))
        ours = GEOMETRIC_BASKET.reference(problem(joint, aggregate, kind, 103.0, math.exp(-rate)))
        assert ours.value == pytest.approx(option.NPV(), rel=1e-11)


def test_a_geometric_basket_whose_weights_do_not_add_up_to_one_is_a_power():
    joint = law([1.1], [0.3], np.eye(1), 2.0)
    ours = GEOMETRIC_BASKET.reference(problem(joint, Aggregate.geometric((2.0,)), ProfileKind.CALL, 1.2))

    def density(z):
        level = (1.1 * np.exp(0.3 * np.sqrt(2.0) * z - 0.09)) ** 2.0
        return normal_density(z) * np.maximum(level - 1.2, 0.0)

    wanted = integrate(density, np.linspace(-9.0, 11.0, 11), 1e-13)
    assert ours.value == pytest.approx(wanted.value, abs=wanted.error + 1e-13)


def random_sum(rng, n):
    joint = law(rng.uniform(50, 150, n), rng.uniform(0.1, 0.5, n), random_correlation(rng, n), rng.uniform(0.1, 3.0))
    signs = rng.choice([-1.0, 1.0], n) if rng.random() < 0.5 else np.ones(n)
    aggregate = Aggregate.weighted_sum(tuple(signs * rng.dirichlet(np.full(n, 2.0))))
    return joint, aggregate, float(aggregate(joint.forwards)) + 15.0 * rng.normal()


def test_bounds_enclose_the_exact_value_of_random_sums():
    rng = np.random.default_rng(2024)
    compared, lowers, uppers = 0, [], []
    for _ in range(60):
        n = int(rng.integers(2, 6))
        joint, aggregate, strike = random_sum(rng, n)
        for kind in (ProfileKind.CALL, ProfileKind.PUT, ProfileKind.STRADDLE):
            p = problem(joint, aggregate, kind, strike)
            exact = (TWO_ASSET_SUM if n == 2 else BASKET_QUADRATURE).reference(p)
            if exact is None:
                continue
            lower, upper = LOWER_BOUND.reference(p), UPPER_BOUND.reference(p)
            assert lower.value <= exact.value + exact.error + lower.error
            assert upper.value >= exact.value - exact.error - upper.error
            compared += 1
            lowers.append(exact.value - lower.value)
            uppers.append(upper.value - exact.value)
    assert compared > 150
    # Bounds that enclose everything would prove nothing; these are near (levels around 100).
    assert np.median(lowers) < 0.05
    assert np.median(uppers) < 0.3


def test_both_conditional_bounds_bind_by_themselves():
    joint = law([100.0, 90.0, 110.0], [0.3, 0.5, 0.2], equal_correlation(3, 0.3), 2.0)
    p = problem(joint, Aggregate.weighted_sum((0.5, 0.3, 0.2)), ProfileKind.CALL, 100.0)
    total, exact = LognormalSum.of(p), BASKET_QUADRATURE.reference(p)
    loadings = total.root()[:, -1]  # any direction will do
    for bound in (comonotonic, mean_variance):
        found = integrate(
            lambda w, bound=bound: normal_density(w) * bound(total, loadings, w, 100.0, 1),
            np.linspace(-9.5, 9.5, 9),
            1e-8,
        )
        assert found.value > exact.value


def test_moment_matching_has_the_sums_first_two_moments_and_is_close():
    joint = law([100.0, 90.0, 110.0], [0.2, 0.3, 0.15], equal_correlation(3, 0.5))
    aggregate = Aggregate.weighted_sum((0.5, 0.3, 0.2))
    matched = MOMENT_MATCHING.law(problem(joint, aggregate, ProfileKind.CALL, 100.0))
    terms = np.array(aggregate.weights) * joint.forwards
    assert matched.mean().value == pytest.approx(terms.sum())
    square = terms @ np.exp(joint.covariance) @ terms
    assert matched.mean().value ** 2 * math.exp(matched.deviation**2) == pytest.approx(square)
    p = problem(joint, aggregate, ProfileKind.CALL, 100.0)
    assert MOMENT_MATCHING.reference(p).value == pytest.approx(BASKET_QUADRATURE.reference(p).value, abs=0.02)
    signed = problem(joint, Aggregate.weighted_sum((0.5, -0.3, 0.2)), ProfileKind.CALL, 30.0)
    assert MOMENT_MATCHING.reference(signed) is None


def test_a_basket_held_short_is_the_mirror_image():
    joint = law([100.0, 90.0, 110.0], [0.2, 0.3, 0.15], equal_correlation(3, 0.5))
    long, short = Aggregate.weighted_sum((0.5, 0.3, 0.2)), Aggregate.weighted_sum((-0.5, -0.3, -0.2))
    for family in (BASKET_QUADRATURE, LOWER_BOUND, UPPER_BOUND, MOMENT_MATCHING):
        put = family.reference(problem(joint, long, ProfileKind.PUT, 95.0))
        call = family.reference(problem(joint, short, ProfileKind.CALL, -95.0))
        assert call.value == pytest.approx(put.value, abs=put.error + call.error + 1e-12)


def test_terms_that_move_as_one_are_merged_and_constant_ones_shift():
    correlation = equal_correlation(4, 0.5)
    correlation[0, 1] = correlation[1, 0] = 1.0
    joint = law([100.0, 50.0, 80.0, 30.0], [0.2, 0.2, 0.3, 0.0], correlation)
    found = LognormalSum.of(problem(joint, Aggregate.weighted_sum((1.0, -1.0, 0.0, 2.0)), ProfileKind.CALL, 1.0))
    assert found.n_terms == 1
    assert found.coefficients[0] == pytest.approx(50.0)
    assert found.shift == pytest.approx(60.0)


@pytest.mark.parametrize("strike", [-20.0, 0.0, 55.0, 80.0])
@pytest.mark.parametrize("side", [1.0, -1.0])
def test_the_compiled_conditional_option_agrees_with_quadrature_over_its_variable(strike, side):
    rng = np.random.default_rng(0)
    logs = np.log([60.0, 30.0, 25.0]) + 0.1 * rng.normal(size=(4, 3))
    signs, loadings = np.array([1.0, 1.0, -1.0]), np.array([0.3, 0.1, -0.2])
    for probability in (False, True):
        found = conditional(logs, signs, loadings, strike, side, probability)
        for row, value in zip(logs, found, strict=True):

            def density(w, row=row, probability=probability):
                excess = side * (np.exp(row + np.multiply.outer(w, loadings)) @ signs - strike)
                return normal_density(w) * ((excess > 0.0) if probability else np.maximum(excess, 0.0))

            wanted = integrate(density, np.linspace(-9.0, 9.3, 400), 1e-12, 400_000)
            assert value == pytest.approx(wanted.value, abs=max(1e-10, 2.0 * wanted.error))


def test_the_directions_make_up_the_covariance_and_the_sum_rises_along_the_first():
    rng = np.random.default_rng(5)
    for _ in range(30):
        joint, aggregate, strike = random_sum(rng, 5)
        total = LognormalSum.of(problem(joint, aggregate, ProfileKind.CALL, strike))
        split = split_along(total, strike)
        if split is None:
            continue
        loadings, across = split
        assert np.allclose(np.outer(loadings, loadings) + across @ across.T, total.covariance, atol=1e-12)
        assert np.all(np.sign(total.coefficients) * loadings >= 0.0)


def test_the_sparse_grid_is_exact_within_its_error_for_smooth_functions():
    sigma = np.array([0.5, 0.3, 0.2, 0.1, 0.05])

    def lognormal(z, variables):
        return np.exp(z @ sigma[variables])

    for effort in (Effort(1e-3, 1.0, 10_000, 1000), Effort(1e-9, 1.0, 100_000, 1000)):
        found = expectation(lognormal, 5, effort)
        assert abs(found.value - math.exp(0.5 * float(sigma @ sigma))) <= found.error
        assert found.error <= effort.tolerance


def test_the_sparse_grid_says_so_when_it_is_stopped_early():
    def rough(z, variables):
        return np.abs(z.sum(axis=1)) if variables else np.zeros(z.shape[0])

    found = expectation(rough, 3, Effort(1e-9, 1e9, 2_000, 50))
    wanted = math.sqrt(2.0 * 3.0 / math.pi)
    assert 1e-9 < abs(found.value - wanted) <= found.error
    hopeless = expectation(rough, 3, Effort(1e-9, 1e-6, 100_000, 1000))
    assert hopeless.error > 1e-6


def test_tensor_rules_integrate_monomials():
    z, weights = tensor_rule((4, 3))
    assert weights @ (z[:, 0] ** 6 * z[:, 1] ** 4) == pytest.approx(15.0 * 3.0)
    nodes, one = gauss_hermite(5)
    assert one @ nodes**8 == pytest.approx(105.0)
    empty, unit = tensor_rule(())
    assert empty.shape == (1, 0)
    assert unit.tolist() == [1.0]


def test_a_basket_too_large_for_the_quadrature_still_has_its_forward_and_bounds():
    joint = law(np.full(40, 100.0), np.full(40, 0.3), equal_correlation(40, 0.4))
    aggregate = Aggregate.weighted_sum((1 / 40,) * 40)
    assert BASKET_QUADRATURE.reference(problem(joint, aggregate, ProfileKind.CALL, 100.0)) is None
    forward = FORWARD.reference(problem(joint, aggregate, ProfileKind.FORWARD, 90.0))
    assert forward.value == pytest.approx(10.0)
    call = problem(joint, aggregate, ProfileKind.CALL, 100.0)
    lower, upper = LOWER_BOUND.reference(call), UPPER_BOUND.reference(call)
    assert 0.0 < upper.value - lower.value < 0.03


@pytest.mark.parametrize("years", [1.0 / 365.0, 0.25, 1.0])
@pytest.mark.parametrize("rho", [0.99, 0.9999])
def test_the_upper_bound_holds_where_the_strike_puts_a_kink_on_the_edge_of_a_panel(years, rho):
    # At the money the conditional mean crosses the strike almost exactly in the middle of the range.
    rng = np.random.default_rng(5)
    for weights in ((1.0, -1.0), (0.5, 0.5)):
        for strike_shift in (0.0, 1e-4, 0.02):
            joint = law([1.0, 1.0], rng.uniform(0.05, 0.4, 2), equal_correlation(2, rho), years)
            p = problem(joint, Aggregate.weighted_sum(weights), ProfileKind.CALL, sum(weights) + strike_shift)
            exact, upper = TWO_ASSET_SUM.reference(p), UPPER_BOUND.reference(p)
            assert upper.value >= exact.value - exact.error - upper.error
            assert upper.error < 1e-9
