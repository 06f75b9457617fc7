"""Two-asset formulas and the single-asset one against QuantLib's independent engines."""

from __future__ import annotations

import numpy as np
import pytest
import QuantLib as ql

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import ProfileKind
from pricer.engines.closed_form.bjerksund_stensland import BJERKSUND_STENSLAND
from pricer.engines.closed_form.black_scholes import BLACK_SCHOLES
from pricer.engines.closed_form.exchange import EXCHANGE
from pricer.engines.closed_form.extremes import TWO_ASSET_EXTREMES
from pricer.engines.closed_form.kirk import KIRK
from pricer.engines.closed_form.lognormal_sum import LognormalSum
from pricer.engines.closed_form.one_factor_sum import ONE_FACTOR_SUM, OneFactorSum
from pricer.engines.closed_form.quadrature import integrate, normal_density
from pricer.engines.closed_form.ranked_quadrature import RankedLevels
from pricer.engines.closed_form.two_asset_sum import TWO_ASSET_SUM, TwoAssetSum
from tests.unit.closed_form_cases import QuantLibMarket, equal_correlation, law, problem

SPREAD = Aggregate.weighted_sum((1.0, -1.0))
RHOS = [-0.8, 0.0, 0.6, 0.95]


def market(rho, days=400):
    return QuantLibMarket((100.0, 94.0), (0.02, 0.04), (0.25, 0.33), [[1.0, rho], [rho, 1.0]], 0.03, days)


@pytest.mark.parametrize("rho", RHOS)
@pytest.mark.parametrize("strike", [60.0, 95.0, 150.0])
@pytest.mark.parametrize("side", [ql.Option.Call, ql.Option.Put])
def test_the_best_and_worst_of_two_agree_with_quantlibs_stulz_engine(rho, strike, side):
    m = market(rho)
    kind = ProfileKind.CALL if side == ql.Option.Call else ProfileKind.PUT
    plain = ql.PlainVanillaPayoff(side, strike)
    for aggregate, payoff in (
        (Aggregate.best_of(2), ql.MaxBasketPayoff(plain)),
        (Aggregate.worst_of(2), ql.MinBasketPayoff(plain)),
    ):
        ours = TWO_ASSET_EXTREMES.reference(m.problem(aggregate, kind, strike))
        assert ours.value == pytest.approx(m.basket(payoff, ql.StulzEngine(*m.processes, rho)), abs=1e-9)
        assert ours.error < 1e-11


@pytest.mark.parametrize("rho", RHOS)
@pytest.mark.parametrize("strike", [0.0, 4.0, 30.0])
def test_kirk_agrees_with_quantlib(rho, strike):
    m = market(rho)
    payoff = ql.SpreadBasketPayoff(ql.PlainVanillaPayoff(ql.Option.Call, strike))
    wanted = m.basket(payoff, ql.KirkEngine(*m.processes, rho))
    assert KIRK.reference(m.problem(SPREAD, ProfileKind.CALL, strike)).value == pytest.approx(wanted, abs=1e-10)


@pytest.mark.parametrize("rho", RHOS)
@pytest.mark.parametrize("strike", [0.0, 4.0, 30.0])
@pytest.mark.parametrize("side", [ql.Option.Call, ql.Option.Put])
def test_bjerksund_and_stensland_agree_with_quantlib(rho, strike, side):
    m = market(rho)
    kind = ProfileKind.CALL if side == ql.Option.Call else ProfileKind.PUT
    payoff = ql.SpreadBasketPayoff(ql.PlainVanillaPayoff(side, strike))
    wanted = m.basket(payoff, ql.BjerksundStenslandSpreadEngine(*m.processes, rho))
    ours = BJERKSUND_STENSLAND.reference(m.problem(SPREAD, kind, strike))
    assert ours.value == pytest.approx(wanted, abs=1e-10)


@pytest.mark.parametrize("rho", RHOS)
@pytest.mark.parametrize("strike", [-20.0, 0.0, 4.0, 30.0])
def test_spread_quadrature_agrees_with_quantlibs_quadrature_and_expansion(rho, strike):
    m = market(rho)
    ours = TWO_ASSET_SUM.reference(m.problem(SPREAD, ProfileKind.CALL, strike))
    payoff = ql.AverageBasketPayoff(ql.PlainVanillaPayoff(ql.Option.Call, strike), ql.Array([1.0, -1.0]))
    assert ours.value == pytest.approx(m.basket(payoff, ql.ChoiBasketEngine(m.processes, m.matrix, 30.0)), abs=1e-7)
    if strike > 0.0:
        # The second-order expansion of Deng, Li & Zhou (2008) is an approximation itself.
        expansion = m.basket(payoff, ql.DengLiZhouBasketEngine(m.processes, m.matrix))
        assert ours.value == pytest.approx(expansion, abs=0.05)
    assert ours.error < 1e-11


@pytest.mark.parametrize("rho", RHOS)
def test_an_exchange_option_agrees_with_quantlib(rho):
    m = market(rho)
    option = ql.MargrabeOption(3, 2, m.exercise)
    option.setPricingEngine(ql.AnalyticEuropeanMargrabeEngine(*m.processes, rho))
    aggregate = Aggregate.weighted_sum((3.0, -2.0))
    ours = EXCHANGE.reference(m.problem(aggregate, ProfileKind.EXCHANGE))
    assert ours.value == pytest.approx(option.NPV(), abs=1e-10)
    quadrature = TWO_ASSET_SUM.reference(m.problem(aggregate, ProfileKind.EXCHANGE))
    assert quadrature.value == pytest.approx(ours.value, abs=quadrature.error + ours.error)


@pytest.mark.parametrize("strike", [80.0, 100.0])
def test_a_put_on_the_worst_of_two_agrees_with_two_dimensional_finite_differences(strike):
    m = market(0.4)
    payoff = ql.MinBasketPayoff(ql.PlainVanillaPayoff(ql.Option.Put, strike))
    grid = ql.Fd2dBlackScholesVanillaEngine(*m.processes, 0.4, 150, 150, 40)
    ours = TWO_ASSET_EXTREMES.reference(m.problem(Aggregate.worst_of(2), ProfileKind.PUT, strike))
    assert ours.value == pytest.approx(m.basket(payoff, grid), abs=0.01)


@pytest.mark.parametrize("kind", [ProfileKind.CALL, ProfileKind.PUT])
def test_one_asset_agrees_with_quantlibs_finite_differences_and_analytic_engine(kind):
    m = market(0.0)
    side = ql.Option.Call if kind is ProfileKind.CALL else ql.Option.Put
    option = ql.VanillaOption(ql.PlainVanillaPayoff(side, 105.0), m.exercise)
    ours = BLACK_SCHOLES.reference(m.problem(Aggregate.weighted_sum((1.0, 0.0)), kind, 105.0))
    option.setPricingEngine(ql.AnalyticEuropeanEngine(m.processes[0]))
    assert ours.value == pytest.approx(option.NPV(), abs=1e-11)
    option.setPricingEngine(ql.FdBlackScholesVanillaEngine(m.processes[0], 400, 400))
    assert ours.value == pytest.approx(option.NPV(), abs=2e-3)


def test_one_asset_held_short_is_priced_at_any_strike():
    joint = law([100.0], [0.3], np.eye(1))
    short = Aggregate.weighted_sum((-2.0,))
    call = BLACK_SCHOLES.reference(problem(joint, short, ProfileKind.CALL, -210.0))
    put = BLACK_SCHOLES.reference(problem(joint, Aggregate.weighted_sum((2.0,)), ProfileKind.PUT, 210.0))
    assert call.value == pytest.approx(put.value, rel=1e-14)
    assert BLACK_SCHOLES.reference(problem(joint, short, ProfileKind.PUT, 10.0)).value == pytest.approx(210.0)


@pytest.mark.parametrize("rho", [-0.9999, -0.5, 0.0, 0.7, 0.9999])
@pytest.mark.parametrize("weights", [(1.0, -1.0), (0.5, 0.5), (-1.0, -0.4), (-0.3, 2.0)])
def test_the_quadrature_gives_the_same_whichever_asset_it_conditions_on(rho, weights):
    covariance = law([1.0, 1.0], [0.2, 0.5], equal_correlation(2, rho), 2.0).covariance
    coefficients = np.array(weights) * [100.0, 90.0]
    one = TwoAssetSum(LognormalSum(0.0, coefficients, covariance))
    other = TwoAssetSum(LognormalSum(0.0, coefficients[::-1], covariance[::-1, ::-1].copy()))
    for strike in (-40.0, 0.0, 12.0, 90.0):
        for ours, theirs in (
            (one.option(strike, 1), other.option(strike, 1)),
            (one.digital(strike, 1), other.digital(strike, 1)),
        ):
            assert ours.value == pytest.approx(theirs.value, abs=ours.error + theirs.error)
            assert ours.error < 1e-11


@pytest.mark.parametrize("rho", [-1.0, 1.0])
def test_perfectly_correlated_assets_agree_with_the_one_factor_formula(rho):
    joint = law([100.0, 95.0], [0.2, 0.45], equal_correlation(2, rho))
    for kind in (ProfileKind.CALL, ProfileKind.STRADDLE, ProfileKind.CASH_DIGITAL_PUT, ProfileKind.ASSET_DIGITAL_CALL):
        for strike in (-30.0, 0.0, 7.0):
            p = problem(joint, SPREAD, kind, strike)
            exact, quadrature = ONE_FACTOR_SUM.reference(p), TWO_ASSET_SUM.reference(p)
            assert quadrature.value == pytest.approx(exact.value, abs=exact.error + quadrature.error)


def test_a_sum_on_one_factor_that_crosses_its_strike_three_times_is_exact():
    # Rises, falls and rises again in the factor.
    total = OneFactorSum(0.0, np.array([110.0, -252.0, 238.0]), np.array([1.97, 1.37, 0.64]))
    strike = 102.0
    assert len(total.roots(strike)) == 3

    def density(w):
        level = np.exp(np.multiply.outer(w, total.loadings) - 0.5 * total.loadings**2) @ total.coefficients
        return normal_density(w) * np.maximum(level - strike, 0.0)

    wanted = integrate(density, np.linspace(-9.0, 11.0, 21), 1e-11, 100_000)
    found = total.option(strike, 1)
    assert found.value == pytest.approx(wanted.value, abs=found.error + wanted.error)
    put = total.option(strike, -1)
    assert found.value - put.value == pytest.approx(total.mean().value - strike, abs=1e-12)


def test_the_quadrature_over_gaps_agrees_with_stulz():
    joint = law([100.0, 110.0], [0.3, 0.2], equal_correlation(2, 0.4))
    for weights, aggregate in (((1.0, 0.0), Aggregate.best_of(2)), ((0.0, 1.0), Aggregate.worst_of(2))):
        ranked = RankedLevels(joint, np.array(weights))
        for strike in (80.0, 100.0, 130.0):
            stulz = TWO_ASSET_EXTREMES.reference(problem(joint, aggregate, ProfileKind.PUT, strike))
            found = ranked.option(strike, -1)
            assert found.value == pytest.approx(stulz.value, abs=found.error + stulz.error)


def test_kirk_and_the_exercise_rule_serve_negative_strikes_by_symmetry():
    joint, mirrored = law([100.0, 95.0], [0.2, 0.4], equal_correlation(2, 0.3)), Aggregate.weighted_sum((-1.0, 1.0))
    for family in (KIRK, BJERKSUND_STENSLAND):
        call = family.reference(problem(joint, SPREAD, ProfileKind.CALL, -8.0))
        put = family.reference(problem(joint, mirrored, ProfileKind.PUT, 8.0))
        assert call.value == pytest.approx(put.value, rel=1e-14)
        exact = TWO_ASSET_SUM.reference(problem(joint, SPREAD, ProfileKind.CALL, -8.0))
        assert call.value == pytest.approx(exact.value, abs=0.05)


def test_the_feasible_exercise_rule_is_never_worth_more_than_the_option():
    rng = np.random.default_rng(6)
    for _ in range(200):
        joint = law(rng.uniform(50, 150, 2), rng.uniform(0.1, 0.6, 2), equal_correlation(2, rng.uniform(-0.95, 0.95)))
        p = problem(joint, SPREAD, ProfileKind.CALL, rng.normal() * 30.0)
        exact = TWO_ASSET_SUM.reference(p)
        assert BJERKSUND_STENSLAND.reference(p).value <= exact.value + exact.error
