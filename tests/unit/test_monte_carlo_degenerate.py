"""Covariances of lower rank, no covariance at all, and what cannot be had then."""

import numpy as np
import pytest
import QuantLib as ql
from scipy.integrate import quad

from pricer.contracts.aggregate import Aggregate
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


def test_perfectly_correlated_equals_are_one_asset():
    law = JointLognormal(np.array([90.0, 120.0]), np.full((2, 2), 0.09))
    s = drawn(law, Aggregate.weighted_sum((0.5, 0.5)), CALL)
    assert s.value == pytest.approx(black(105.0, 0.3), abs=1e-10)
    assert s.standard_error == 0.0


def test_a_covariance_of_lower_rank_that_holds_the_common_direction_is_smoothed():
    # the third asset's log is the mean of the others': rank 2, and digitals keep their sensitivities
    low = np.array([[0.3, 0.0], [0.1, 0.2], [0.2, 0.1]])
    law = JointLognormal(np.array([100.0, 95.0, 105.0]), low @ low.T)
    s = drawn(law, Aggregate.geometric((0.3, 0.3, 0.4)), DIGITAL)
    w = np.array([0.3, 0.3, 0.4])
    variance = w @ law.covariance @ w
    mean = w @ (np.log(law.forwards) - 0.5 * np.diag(law.covariance))
    want = 0.95 * 10.0 * ql.CumulativeNormalDistribution()((mean - np.log(100.0)) / np.sqrt(variance))
    assert abs(s.value - want) < 5 * s.standard_error
    density = 0.95 * 10.0 * ql.NormalDistribution()((mean - np.log(100.0)) / np.sqrt(variance)) / np.sqrt(variance)
    assert np.all(np.abs(s.log_deltas - w * density) < 5 * s.log_delta_errors)


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
    assert s.paths == 16 * 2**13  # drawn to the end although the first sample shows no error
    assert f"no path in {s.paths} came past a kink" in s.ending


def test_an_asset_that_cannot_move_is_a_constant_leg():
    law = JointLognormal(np.array([100.0, 20.0, 50.0]), np.diag([0.09, 0.0, 0.04]))
    s = drawn(law, Aggregate.weighted_sum((1.0, 1.0, 0.0)), DIGITAL, value=1e-6)
    digital = ql.BlackCalculator(ql.CashOrNothingPayoff(ql.Option.Call, 80.0, 10.0), 100.0, 0.3, 0.95)
    assert s.value == pytest.approx(digital.value(), abs=1e-5)
    assert s.deviation_vegas[1] == 0.0
    assert np.all(np.isfinite(s.log_deltas))


def test_a_nearly_singular_spread_keeps_its_margin():
    # correlation 0.9999: the common factor is still 1.4 % of a deviation wide
    s, rho = 0.3, 0.9999
    law = JointLognormal(np.array([100.0, 100.0]), s * s * np.array([[1.0, rho], [rho, 1.0]]))
    got = drawn(law, Aggregate.weighted_sum((1.0, -1.0)), Profile(ProfileKind.EXCHANGE).payoff(), value=1e-4)
    want = ql.blackFormula(ql.Option.Call, 100.0, 100.0, s * np.sqrt(2 * (1 - rho)), 0.95)
    assert abs(got.value - want) < 5 * got.standard_error


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
