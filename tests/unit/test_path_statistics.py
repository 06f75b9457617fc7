"""Statistics of a path against plain NumPy."""

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.average import Average, AverageOf
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.locked_in import LockedIn
from pricer.contracts.performance_sum import PerformanceSum
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.realised_correlation import RealisedCorrelation
from pricer.contracts.realised_variance import RealisedVariance
from pricer.contracts.redemption import Redemption
from tests.unit.seasoned_contracts import walked, week

PATH = np.array([[1.00, 1.00, 1.00], [1.04, 0.97, 1.01], [1.10, 0.95, 1.08], [1.02, 0.99, 1.15], [1.07, 0.91, 1.12]])
WEEKS = tuple(week(k) for k in range(5))
BASKET = Aggregate.weighted_sum((0.5, 0.3, 0.2))


def test_the_expiry_level_is_the_aggregate_of_one_day():
    assert walked(ExpiryLevel(WEEKS[4], Aggregate.worst_of(3)), PATH[4:]) == 0.91


def test_an_average_of_underlyings_is_taken_before_the_worst_of_them():
    worst = Aggregate.worst_of(3)
    assert walked(Average(WEEKS, worst), PATH) == pytest.approx(PATH.mean(axis=0).min(), rel=1e-15)
    assert walked(Average(WEEKS, worst, AverageOf.AGGREGATE), PATH) == pytest.approx(PATH.min(axis=1).mean(), rel=1e-15)


def test_both_averages_of_a_weighted_sum_agree():
    first, second = (walked(Average(WEEKS, BASKET, of), PATH) for of in AverageOf)
    assert first == pytest.approx(second, rel=1e-15)


def test_a_running_mean_counts_the_days_seen():
    average = Average(WEEKS, BASKET)
    state = average.observe(average.observe(average.start(), WEEKS[0], PATH[0].tolist()), WEEKS[1], PATH[1].tolist())
    assert average.running_mean(average.start()) == ()
    np.testing.assert_allclose(average.running_mean(state), [1.02, 0.985, 1.005])
    with pytest.raises(ValueError, match="2 of 5 averaging dates"):
        average.value(state)


def test_a_cliquet_adds_limited_performances_of_the_basket_within_each_period():
    local = Profile(ProfileKind.FORWARD, strike=1.0, floor=-0.01, cap=0.02)
    performances = (PATH[1:] / PATH[:-1]) @ np.array([0.5, 0.3, 0.2]) - 1.0
    want = np.clip(performances, -0.01, 0.02).sum()
    assert walked(PerformanceSum(WEEKS, BASKET, local), PATH) == pytest.approx(want, rel=1e-12)


def test_the_best_that_is_left_is_locked_in_and_leaves():
    # Week 0: the third (1.30) leaves; week 1: the first (1.10) is best of the two that are left.
    levels = np.array([[1.2, 0.9, 1.3], [1.1, 1.0, 5.0]])
    assert walked(LockedIn(WEEKS[:2], 3), levels) == pytest.approx((1.3 + 1.1) / 2)
    # The second best of three, then, with two left, the second best of two.
    assert walked(LockedIn(WEEKS[:2], 3, rank=2), levels) == pytest.approx((1.2 + 1.0) / 2)
    # All three leave one after the other; the last has no second beside it.
    three = np.vstack((levels, [[9.0, 9.0, 0.7]]))
    assert walked(LockedIn(WEEKS[:3], 3, rank=2), three) == pytest.approx((1.2 + 1.0 + 0.7) / 3)


def test_realised_variance_of_a_basket_of_shares():
    returns = np.diff(np.log(PATH @ np.array([0.5, 0.3, 0.2])))
    statistic = RealisedVariance(WEEKS, BASKET, (0.0, 0.0, 0.0, 1.0))
    assert walked(statistic, PATH) == pytest.approx(252.0 * np.mean(returns**2), rel=1e-12)
    assert statistic.label == "variance"


@pytest.mark.parametrize("as_volatility", [False, True])
def test_a_dispersion_is_components_less_the_basket(as_volatility):
    series = np.column_stack((PATH, PATH @ np.array([0.5, 0.3, 0.2])))
    variances = 52.0 * np.mean(np.diff(np.log(series), axis=0) ** 2, axis=0)
    sizes = np.sqrt(variances) if as_volatility else variances
    statistic = RealisedVariance(WEEKS, BASKET, (0.5, 0.3, 0.2, -1.0), as_volatility, returns_per_year=52.0)
    assert walked(statistic, PATH) == pytest.approx(sizes @ np.array([0.5, 0.3, 0.2, -1.0]), rel=1e-11)
    assert statistic.label == "dispersion"


def test_realised_correlation_is_the_weighted_mean_of_pearsons_coefficients():
    matrix = np.corrcoef(np.diff(np.log(PATH), axis=0).T)
    weights = np.array([0.5, 0.3, 0.2])
    pairs = [(i, j) for i in range(3) for j in range(i)]
    want = sum(weights[i] * weights[j] * matrix[i, j] for i, j in pairs) / sum(
        weights[i] * weights[j] for i, j in pairs
    )
    assert walked(RealisedCorrelation(WEEKS, (0.5, 0.3, 0.2)), PATH) == pytest.approx(want, rel=1e-12)


def test_returns_may_be_measured_from_zero_in_a_correlation():
    returns = np.diff(np.log(PATH[:, :2]), axis=0)
    want = returns[:, 0] @ returns[:, 1] / np.sqrt((returns**2).sum(axis=0).prod())
    assert walked(RealisedCorrelation(WEEKS, (1.0, 1.0), demeaned=False), PATH[:, :2]) == pytest.approx(want, rel=1e-12)


def test_what_never_moves_has_no_correlation():
    still = PATH[:, :2].copy()
    still[:, 1] = 1.0
    with pytest.raises(ValueError, match="never moved"):
        walked(RealisedCorrelation(WEEKS, (1.0, 1.0)), still)


LEVELS = np.linspace(0.1, 1.9, 37)


@pytest.mark.parametrize(
    ("redemption", "want"),
    [
        (Redemption(), np.ones_like(LEVELS)),
        (Redemption(capital=0.03), np.full_like(LEVELS, 0.03)),
        (Redemption(put_strike=0.8, leverage=1.25), 1.0 - 1.25 * np.maximum(0.8 - LEVELS, 0.0)),
        (Redemption(put_strike=1.0, floor=0.6), np.maximum(np.minimum(LEVELS, 1.0), 0.6)),
        (
            Redemption(capital=0.95, call_strike=1.0, participation=0.8, cap=1.2),
            np.minimum(0.95 + 0.8 * np.maximum(LEVELS - 1.0, 0.0), 1.2),
        ),
        (Redemption(put_strike=1.0, call_strike=1.0), LEVELS),
        (
            Redemption(put_strike=1.1, call_strike=0.9),
            1.0 - np.maximum(1.1 - LEVELS, 0.0) + np.maximum(LEVELS - 0.9, 0.0),
        ),
    ],
)
def test_a_redemption_is_capital_less_a_put_plus_a_call(redemption, want):
    np.testing.assert_allclose(redemption.payoff()(LEVELS), want, rtol=1e-13, atol=1e-15)
