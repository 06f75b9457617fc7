"""Covariances of lower rank, no covariance at all, and what cannot be had then."""

import numpy as np
import pytest
import QuantLib as ql
from numpy.polynomial.hermite_e import hermegauss
from scipy.integrate import quad
from scipy.special import ndtr

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.profile import PiecewiseLinear, Profile, ProfileKind
from pricer.engines.monte_carlo import Sample, SamplingSettings, sample
from pricer.engines.problem import EuropeanProblem
from pricer.market.joint_lognormal import JointLognormal

CALL = Profile(ProfileKind.CALL, 100.0).payoff()
DIGITAL = Profile(ProfileKind.CASH_DIGITAL_CALL, 100.0, cash_amount=10.0).payoff()


def drawn(law, aggregate, payoff, value=1e-3, delta=1e-1, points=2**13) -> Sample:
    settings = SamplingSettings(maximum_points=points)
    problem = EuropeanProblem(law, aggregate, payoff, 0.95)
    return sample(problem, group="edge", seed=3, value_tolerance=value, delta_tolerance=delta, settings=settings)


def black(forward, deviation):
    return ql.blackFormula(ql.Option.Call, 100.0, forward, deviation, 0.95)


@pytest.mark.parametrize(
    ("aggregate", "level"),
    [
        (Aggregate.weighted_sum((1.0, -0.2)), 88.0),
        (Aggregate.geometric((0.5, 0.5)), np.sqrt(110.0 * 110.0)),
        (Aggregate.best_of(2), 110.0),
        (Aggregate.rank_weighted((2.0, -1.0)), 110.0),
    ],
)
def test_without_covariance_the_value_is_the_payoff(aggregate, level):
    law = JointLognormal(np.array([110.0, 110.0]), np.zeros((2, 2)))
    payoff = PiecewiseLinear(1.0, 0.5, (100.0,), (2.0,), (5.0,))
    s = drawn(law, aggregate, payoff)
    assert s.value == pytest.approx(0.95 * float(payoff(np.array(level))), rel=1e-14)
    assert (s.standard_error, s.paths, s.reached) == (0.0, 1, True)


def test_without_covariance_deltas_are_slopes_and_vegas_vanish():
    law = JointLognormal(np.array([110.0, 100.0]), np.zeros((2, 2)))
    s = drawn(law, Aggregate.weighted_sum((0.5, 0.6)), CALL)
    assert s.log_deltas == pytest.approx(0.95 * np.array([55.0, 60.0]), rel=1e-14)
    assert np.array_equal(s.log_gammas, [0.0, 0.0])
    assert np.array_equal(s.deviation_vegas, [0.0, 0.0])
    assert s.ending == "exact: nothing is left to sample"


@pytest.mark.parametrize("aggregate", [Aggregate.weighted_sum((0.5, 0.5)), Aggregate.worst_of(2)])
def test_on_a_kink_or_a_tie_no_slope_is_claimed(aggregate):
    law = JointLognormal(np.array([100.0, 100.0]), np.zeros((2, 2)))
    s = drawn(law, aggregate, CALL)
    assert s.value == 0.0
    assert np.all(np.isnan(s.log_deltas))
    assert "stands on a kink" in s.ending
    # what is not known has no error of 0 either
    for missing in (s.log_delta_errors, s.deviation_vegas, s.deviation_vega_errors):
        assert np.all(np.isnan(missing))
    if aggregate.kind is AggregateKind.WEIGHTED_SUM:
        assert np.all(np.isnan(s.log_gamma_errors))


@pytest.mark.parametrize("weights", [(0.3, 0.3, 0.4), (0.1, 0.2, 0.7), (1 / 3, 1 / 3, 1 / 3), (0.6, 0.3, 0.1)])
@pytest.mark.parametrize("kind", [Aggregate.weighted_sum, Aggregate.geometric])
def test_a_level_on_a_jump_is_not_above_it_in_whatever_order_it_was_summed(kind, weights):
    # all legs at the strike at expiry: in doubles 0.3 + 0.3 + 0.4 and its likes fall on either side of 1
    law = JointLognormal(np.full(3, 100.0), np.zeros((3, 3)))
    s = drawn(law, kind(weights), DIGITAL)
    assert (s.value, s.standard_error) == (0.0, 0.0)
    assert np.all(np.isnan(s.log_deltas))


def test_legs_that_cancel_stand_on_the_jump_within_their_own_rounding():
    law = JointLognormal(np.full(3, 1e6 / 3.0), np.zeros((3, 3)))
    payoff = Profile(ProfileKind.CASH_DIGITAL_CALL, 0.0, cash_amount=10.0).payoff()
    assert drawn(law, Aggregate.weighted_sum((0.1, 0.2, -0.3)), payoff).value == 0.0


def test_perfectly_correlated_equals_are_one_asset():
    law = JointLognormal(np.array([90.0, 120.0]), np.full((2, 2), 0.09))
    s = drawn(law, Aggregate.weighted_sum((0.5, 0.5)), CALL)
    assert s.value == pytest.approx(black(105.0, 0.3), abs=1e-10)
    assert s.standard_error == 0.0


def test_a_covariance_of_lower_rank_that_holds_the_common_direction_is_smoothed():
    # the third asset is a copy of the first, and the second moves on its own: rank 2, and digitals on
    # the worst keep their sensitivities
    low = np.array([[0.2, 0.0], [0.0, 0.2], [0.2, 0.0]])
    law = JointLognormal(np.array([100.0, 95.0, 105.0]), low @ low.T)
    s = drawn(law, Aggregate.worst_of(3), DIGITAL)
    d = (np.log(np.array([100.0, 95.0]) / 100.0) - 0.02) / 0.2  # the copy, at 105, is never the worst
    normal, cumulative = ql.NormalDistribution(), ql.CumulativeNormalDistribution()
    assert abs(s.value - 9.5 * cumulative(d[0]) * cumulative(d[1])) < 5 * s.standard_error
    deltas = 9.5 / 0.2 * np.array([normal(d[0]) * cumulative(d[1]), normal(d[1]) * cumulative(d[0]), 0.0])
    assert np.all(np.abs(s.log_deltas - deltas) < 5 * s.log_delta_errors)


def comonotone() -> JointLognormal:
    deviations = np.array([0.1, 0.3])
    return JointLognormal(np.array([100.0, 105.0]), np.outer(deviations, deviations))


def test_without_a_common_factor_values_and_first_derivatives_of_kinks_remain():
    law = comonotone()
    s = drawn(law, Aggregate.weighted_sum((0.5, 0.5)), CALL, points=2**15)

    def payoff(z):
        level = 50.0 * np.exp(0.1 * z - 0.005) + 52.5 * np.exp(0.3 * z - 0.045)
        return max(level - 100.0, 0.0) * np.exp(-0.5 * z * z) / np.sqrt(2 * np.pi)

    want = 0.95 * quad(payoff, -8, 8, points=[-0.1, 0.0, 0.1], epsabs=1e-10)[0]
    assert abs(s.value - want) < 5 * s.standard_error
    assert np.all(np.isfinite(s.log_deltas))
    assert np.all(np.isnan(s.log_gammas))
    assert s.ending.endswith("gammas not available: the covariance leaves no factor to smooth the payoff's kinks")


def test_without_a_common_factor_jumps_have_values_and_no_sensitivities():
    s = drawn(comonotone(), Aggregate.worst_of(2), DIGITAL, value=0.05)
    assert s.reached
    # worst of the two is above 100 when both are: the second needs the larger shock
    need = max(np.log(100.0 / 100.0) / 0.1 + 0.05, np.log(100.0 / 105.0) / 0.3 + 0.15)
    assert abs(s.value - 9.5 * ql.CumulativeNormalDistribution()(-need)) < 5 * s.standard_error
    assert np.all(np.isnan(s.log_deltas))
    assert np.all(np.isnan(s.deviation_vegas))
    assert "sensitivities not available" in s.ending


def test_paths_that_all_miss_the_kink_are_not_taken_for_certainty():
    s = drawn(comonotone(), Aggregate.weighted_sum((0.5, 0.5)), Profile(ProfileKind.CALL, 900.0).payoff())
    assert s.value == 0.0
    assert f"few of {s.paths} paths came past a kink" in s.ending
    # 99 %: less than 4.6 / paths of the probability is left out; beyond its edge, 3.7 deviations out, the
    # legs gain a few units on average, which is 4e-4 at most, and it is stated as three standard errors
    assert 1e-5 < s.standard_error < 1e-3


@pytest.mark.parametrize("points", [1024, 8192])
def test_no_jump_that_no_factor_smooths_is_taken_for_certain(points):
    """One normal, a digital: every randomisation may count the same points, and their spread is 0.

    The worst of two comonotone levels is above the strike when both are: Phi(-need). Before errors
    were held above that of one point, 1 in 10 strikes was 5 to 3,000 standard errors off.
    """
    settings = SamplingSettings(initial_points=points, maximum_points=points)
    for strike in np.linspace(80.0, 120.0, 60):
        need = max(np.log(strike / 100.0) / 0.1 + 0.05, np.log(strike / 105.0) / 0.3 + 0.15)
        payoff = Profile(ProfileKind.CASH_DIGITAL_CALL, strike, cash_amount=10.0).payoff()
        problem = EuropeanProblem(comonotone(), Aggregate.worst_of(2), payoff, 0.95)
        s = sample(problem, group="edge", seed=3, value_tolerance=0.0, delta_tolerance=0.0, settings=settings)
        assert abs(s.value - 9.5 * ndtr(-need)) < 4.0 * s.standard_error
        assert "came past a kink" not in s.ending


def test_a_digital_that_one_leg_alone_reaches_is_smoothed_along_that_leg():
    """Three assets, deviations 75 %, 2 % and 2 %, digital at six times the spot: the common factor of all
    is 1.6 % wide, which left every path on one side, and 0 for certain where 0.0023 % is true.
    """
    s = np.array([0.75, 0.02, 0.02])
    correlation = np.array([[1.0, -0.3, 0.2], [-0.3, 1.0, 0.3], [0.2, 0.3, 1.0]])
    law = JointLognormal(np.ones(3), correlation * np.outer(s, s))
    payoff = Profile(ProfileKind.CASH_DIGITAL_CALL, 6.0).payoff()
    problem = EuropeanProblem(law, Aggregate.weighted_sum((1 / 3,) * 3), payoff, 1.0)
    # the wide asset is normal given the two narrow ones: Gauss-Hermite over these
    nodes, weights = hermegauss(24)
    low = np.linalg.cholesky(correlation[1:, 1:])
    pull = np.linalg.solve(correlation[1:, 1:], correlation[1:, 0])
    left = np.sqrt(1.0 - pull @ correlation[1:, 0])
    want = 0.0
    for i, j in np.ndindex(24, 24):
        z = low @ np.array([nodes[i], nodes[j]])
        need = np.log(18.0 - np.sum(np.exp(0.02 * z - 0.0002))) + 0.5 * 0.75**2
        want += weights[i] * weights[j] / (2 * np.pi) * ndtr((pull @ z - need / 0.75) / left)
    assert want == pytest.approx(2.3e-5, rel=0.05)
    for seed in range(5):
        got = sample(problem, group="T", seed=seed, value_tolerance=1e-4, delta_tolerance=1e-4, delta_fraction=1e-4)
        assert abs(got.value - want) < 5 * got.standard_error
        assert got.standard_error < 1e-7


def test_a_jump_that_a_narrow_factor_leaves_to_few_paths_is_given_its_chance():
    # correlation 0.9999 of unequal deviations: the common factor is 4 % of one wide, and hardly a path comes
    # near a digital 4.5 deviations out
    s, rho = np.array([0.2, 0.3]), 0.9999
    law = JointLognormal(np.ones(2), np.outer(s, s) * np.array([[1.0, rho], [rho, 1.0]]))
    payoff = Profile(ProfileKind.CASH_DIGITAL_CALL, np.exp(4.5 * 0.2)).payoff()
    problem = EuropeanProblem(law, Aggregate.worst_of(2), payoff, 1.0)
    want = ndtr(-4.5 - 0.5 * 0.2)  # the wider asset is above whenever the narrower is
    for seed in range(20):
        got = sample(problem, group="T", seed=seed, value_tolerance=1e-4, delta_tolerance=1.0)
        assert got.reached
        assert abs(got.value - want) < 3.0 * got.standard_error
        assert 1.0 / got.paths < got.standard_error < 3.0 / got.paths
        assert f"few of {got.paths} paths" in got.ending


def test_an_asset_that_cannot_move_is_a_constant_leg():
    law = JointLognormal(np.array([100.0, 20.0, 50.0]), np.diag([0.09, 0.0, 0.04]))
    s = drawn(law, Aggregate.weighted_sum((1.0, 1.0, 0.0)), DIGITAL, value=1e-6)
    digital = ql.BlackCalculator(ql.CashOrNothingPayoff(ql.Option.Call, 80.0, 10.0), 100.0, 0.3, 0.95)
    assert s.value == pytest.approx(digital.value(), abs=1e-5)
    assert s.deviation_vegas[1] == 0.0
    assert np.all(np.isfinite(s.log_deltas))


@pytest.mark.parametrize("rho", [0.9999, 0.99999])
def test_a_nearly_singular_spread_keeps_its_margin(rho):
    """Both levels of the spread move together, and its own forward is a control that hardly moves at all:
    its coefficient magnified the rounding of single levels to 0.15 % of the premium.
    """
    s = 0.5 * np.sqrt(5.0)
    law = JointLognormal(np.array([100.0, 100.0]), s * s * np.array([[1.0, rho], [rho, 1.0]]))
    v = s * np.sqrt(2 * (1 - rho))
    want = ql.blackFormula(ql.Option.Call, 100.0, 100.0, v, 0.95)
    first_delta = 95.0 * ql.CumulativeNormalDistribution()(v / 2)
    problem = EuropeanProblem(law, Aggregate.weighted_sum((1.0, -1.0)), Profile(ProfileKind.EXCHANGE).payoff(), 0.95)
    settings = SamplingSettings(initial_points=2**14, maximum_points=2**14)
    for seed in range(10):
        got = sample(problem, group="edge", seed=seed, value_tolerance=0.0, delta_tolerance=0.0, settings=settings)
        assert abs(got.value - want) < 5 * got.standard_error
        assert abs(got.log_deltas[0] - first_delta) < 5 * got.log_delta_errors[0]
    assert got.standard_error < 1e-3 * want


@pytest.mark.parametrize(
    ("settings", "message"),
    [
        ({"randomisations": 2}, "at least 4 randomisations"),
        ({"initial_points": 1000}, "power of two"),
        ({"maximum_points": 512}, "1024 initial points exceed 512"),
    ],
)
def test_settings_that_cannot_work_are_refused(settings, message):
    with pytest.raises(ValueError, match=message):
        SamplingSettings(**settings)
