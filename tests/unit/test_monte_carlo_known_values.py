"""The sampling engine against formulas, QuantLib's engines and published values."""

import numpy as np
import pytest
import QuantLib as ql

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear, Profile, ProfileKind
from pricer.engines.monte_carlo import Sample, SamplingSettings, sample
from pricer.engines.problem import EuropeanProblem
from pricer.market.joint_lognormal import JointLognormal

DISCOUNT = 0.95


def drawn(law, aggregate, payoff, discount=DISCOUNT, value=1e-12, points=4096, seed=1) -> Sample:
    settings = SamplingSettings(initial_points=1024, maximum_points=points)
    problem = EuropeanProblem(law, aggregate, payoff, discount)
    return sample(problem, group="known", seed=seed, value_tolerance=value, delta_tolerance=1.0, settings=settings)


def agrees(s: Sample, want: float, allowed: float = 0.0) -> None:
    # 5 standard errors: Student's t with 14 degrees of freedom goes beyond once in 5,000
    assert abs(s.value - want) <= 5.0 * s.standard_error + allowed, (s.value, s.standard_error, want)


def quantlib_price(payoff: ql.StrikedTypePayoff, forward: float, deviation: float) -> float:
    return float(ql.BlackCalculator(payoff, forward, deviation, DISCOUNT).value())


CALL, PUT = ql.Option.Call, ql.Option.Put
ONE_ASSET = {
    "call": (Profile(ProfileKind.CALL, 95.0), lambda f, s: quantlib_price(ql.PlainVanillaPayoff(CALL, 95.0), f, s)),
    "put": (Profile(ProfileKind.PUT, 95.0), lambda f, s: quantlib_price(ql.PlainVanillaPayoff(PUT, 95.0), f, s)),
    "cash digital call": (
        Profile(ProfileKind.CASH_DIGITAL_CALL, 95.0, cash_amount=7.0),
        lambda f, s: quantlib_price(ql.CashOrNothingPayoff(CALL, 95.0, 7.0), f, s),
    ),
    "cash digital put": (
        Profile(ProfileKind.CASH_DIGITAL_PUT, 95.0, cash_amount=7.0),
        lambda f, s: quantlib_price(ql.CashOrNothingPayoff(PUT, 95.0, 7.0), f, s),
    ),
    "asset digital call": (
        Profile(ProfileKind.ASSET_DIGITAL_CALL, 95.0),
        lambda f, s: quantlib_price(ql.AssetOrNothingPayoff(CALL, 95.0), f, s),
    ),
    "asset digital put": (
        Profile(ProfileKind.ASSET_DIGITAL_PUT, 95.0),
        lambda f, s: quantlib_price(ql.AssetOrNothingPayoff(PUT, 95.0), f, s),
    ),
    "capped call": (
        Profile(ProfileKind.CALL, 95.0, cap=20.0),
        lambda f, s: (
            quantlib_price(ql.PlainVanillaPayoff(CALL, 95.0), f, s)
            - quantlib_price(ql.PlainVanillaPayoff(CALL, 115.0), f, s)
        ),
    ),
    "forward": (Profile(ProfileKind.FORWARD, 95.0), lambda f, s: DISCOUNT * (f - 95.0)),
}


@pytest.mark.parametrize("kind", ONE_ASSET)
def test_one_asset_is_black_scholes_exactly(kind):
    profile, formula = ONE_ASSET[kind]
    law = JointLognormal(np.array([100.0]), np.array([[0.09]]))
    for aggregate in (Aggregate.weighted_sum((1.0,)), Aggregate.best_of(1), Aggregate.geometric((1.0,))):
        s = drawn(law, aggregate, profile.payoff())
        assert s.value == pytest.approx(formula(100.0, 0.3), abs=1e-10)
        assert s.standard_error == 0.0
        assert (s.paths, s.reached, s.ending) == (1, True, "exact: nothing is left to sample")


@pytest.mark.parametrize("kind", ONE_ASSET)
def test_sampled_copies_of_one_asset_are_black_scholes(kind):
    # weights on assets of which only the first counts: the others are sampled all the same
    profile, formula = ONE_ASSET[kind]
    law = JointLognormal.from_volatilities(np.full(3, 100.0), np.array([0.3, 0.2, 0.4]), 0.5 + 0.5 * np.eye(3), 1.0)
    agrees(drawn(law, Aggregate.weighted_sum((1.0, 0.0, 0.0)), profile.payoff()), formula(100.0, 0.3))


@pytest.mark.parametrize("rank", [3, 1])
@pytest.mark.parametrize("kind", ONE_ASSET)
def test_geometric_aggregates_are_black_scholes_exactly(kind, rank):
    # a geometric aggregate is lognormal (Kemna & Vorst 1990, for baskets), whatever the covariance
    profile, formula = ONE_ASSET[kind]
    w, s = np.array([0.2, 0.5, 0.4]), np.array([0.3, 0.2, 0.4])
    correlation = 0.4 + 0.6 * np.eye(3) if rank == 3 else np.ones((3, 3))
    law = JointLognormal.from_volatilities(np.array([80.0, 100.0, 60.0]), s, correlation, 2.0)
    variance = w @ law.covariance @ w
    forward = np.exp(w @ (np.log(law.forwards) - 0.5 * np.diag(law.covariance)) + 0.5 * variance)
    scale = 100.0 / forward
    law = JointLognormal(law.forwards * scale ** (1.0 / w.sum()), law.covariance)
    got = drawn(law, Aggregate.geometric(tuple(w)), profile.payoff())
    assert got.value == pytest.approx(formula(100.0, np.sqrt(variance)), abs=1e-10)
    assert (got.standard_error, got.paths, got.ending) == (0.0, 1, "exact: nothing is left to sample")


@pytest.mark.parametrize("correlation", [-0.6, 0.0, 0.7, 0.97])
def test_an_exchange_is_margrabes(correlation):
    # Margrabe (1978): Black with the second forward as strike and the ratio's deviation
    f, s = np.array([100.0, 96.0]), np.array([0.3, 0.2])
    law = JointLognormal(f, np.outer(s, s) * np.array([[1.0, correlation], [correlation, 1.0]]))
    deviation = np.sqrt(s @ s - 2 * correlation * s[0] * s[1])
    want = ql.blackFormula(CALL, 96.0, 100.0, deviation, DISCOUNT)
    s = drawn(law, Aggregate.weighted_sum((1.0, -1.0)), Profile(ProfileKind.EXCHANGE).payoff())
    agrees(s, want)
    assert s.standard_error < 3e-5 * want


@pytest.mark.parametrize("best", [True, False])
def test_best_and_worst_of_two_are_quantlibs_stulz(best):
    today = ql.Date(2, 1, 2025)
    ql.Settings.instance().evaluationDate = today
    days = ql.Actual365Fixed()

    def process(spot, dividend, volatility):
        return ql.BlackScholesMertonProcess(
            ql.QuoteHandle(ql.SimpleQuote(spot)),
            ql.YieldTermStructureHandle(ql.FlatForward(today, dividend, days)),
            ql.YieldTermStructureHandle(ql.FlatForward(today, 0.05, days)),
            ql.BlackVolTermStructureHandle(ql.BlackConstantVol(today, ql.NullCalendar(), volatility, days)),
        )

    basket = ql.MaxBasketPayoff if best else ql.MinBasketPayoff
    option = ql.BasketOption(basket(ql.PlainVanillaPayoff(CALL, 98.0)), ql.EuropeanExercise(today + 365))
    option.setPricingEngine(ql.StulzEngine(process(100.0, 0.02, 0.2), process(105.0, 0.01, 0.3), 0.4))
    forwards = np.array([100.0 * np.exp(0.03), 105.0 * np.exp(0.04)])
    law = JointLognormal.from_volatilities(forwards, np.array([0.2, 0.3]), np.array([[1.0, 0.4], [0.4, 1.0]]), 1.0)
    aggregate = Aggregate.best_of(2) if best else Aggregate.worst_of(2)
    agrees(drawn(law, aggregate, Profile(ProfileKind.CALL, 98.0).payoff(), np.exp(-0.05)), option.NPV(), 1e-6)


@pytest.mark.parametrize(
    ("correlation", "want"),
    [(0.1, 21.6921), (0.3, 25.0293), (0.5, 28.0074), (0.7, 30.7427), (0.8, 32.0412), (0.95, 33.9187)],
)
def test_baskets_are_those_of_krekel_and_others(correlation, want):
    # Krekel, de Kock, Korn & Man (2004), four assets at 100, volatility 40 %, five years, strike 100,
    # no interest; their Monte Carlo column, from memory, with its own errors of about 0.0015
    law = JointLognormal.from_volatilities(
        np.full(4, 100.0), np.full(4, 0.4), correlation + (1 - correlation) * np.eye(4), 5.0
    )
    agrees(
        drawn(law, Aggregate.weighted_sum((0.25,) * 4), Profile(ProfileKind.CALL, 100.0).payoff(), 1.0), want, 0.0005
    )


def test_all_ranks_together_are_the_sum_of_all_assets():
    n = 5
    law = JointLognormal.from_volatilities(
        np.array([90.0, 95.0, 100.0, 105.0, 110.0]), np.linspace(0.2, 0.4, n), 0.3 + 0.7 * np.eye(n), 1.0
    )
    line = PiecewiseLinear(0.0, 1.0)
    ranks = [drawn(law, Aggregate.kth_best(k, n), line, 1.0) for k in range(1, n + 1)]
    # the same points for every rank: the sum is as exact as the forwards' own sampling
    assert sum(s.value for s in ranks) == pytest.approx(500.0, rel=3e-5)


def test_a_forward_is_exact_whatever_is_drawn():
    law = JointLognormal.from_volatilities(np.array([80.0, 120.0]), np.array([0.5, 0.3]), np.eye(2), 2.0)
    s = drawn(law, Aggregate.weighted_sum((1.5, -0.5)), PiecewiseLinear(-10.0, 1.0))
    assert s.value == pytest.approx(DISCOUNT * (120.0 - 60.0 - 10.0), rel=1e-10)
    assert s.log_deltas == pytest.approx(DISCOUNT * np.array([120.0, -60.0]), rel=1e-9)


def test_calls_less_puts_are_the_forward():
    law = JointLognormal.from_volatilities(np.full(4, 100.0), np.full(4, 0.4), 0.5 + 0.5 * np.eye(4), 1.0)
    for aggregate in (Aggregate.weighted_sum((0.25,) * 4), Aggregate.geometric((0.25,) * 4)):
        call, put, forward = (
            drawn(law, aggregate, Profile(kind, 90.0).payoff()).value
            for kind in (ProfileKind.CALL, ProfileKind.PUT, ProfileKind.FORWARD)
        )
        assert call - put == pytest.approx(forward, abs=1e-9)


def test_negative_weights_mirror_the_payoff():
    law = JointLognormal.from_volatilities(np.array([90.0, 110.0]), np.array([0.2, 0.3]), np.eye(2), 1.0)
    call = drawn(law, Aggregate.weighted_sum((0.5, 0.5)), Profile(ProfileKind.CALL, 100.0).payoff())
    mirrored = drawn(law, Aggregate.weighted_sum((-0.5, -0.5)), Profile(ProfileKind.PUT, -100.0).payoff())
    assert mirrored.value == pytest.approx(call.value, rel=1e-12)
    assert mirrored.log_deltas == pytest.approx(call.log_deltas, rel=1e-12)
    assert mirrored.deviation_vegas == pytest.approx(call.deviation_vegas, rel=1e-12)
