"""What must hold for every market, whatever its numbers."""

from __future__ import annotations

from datetime import date, timedelta

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from pricer.market.calendars import CALENDARS, advance, is_business_day, roll
from pricer.market.correlation import CorrelationError, checked
from pricer.market.curves import DiscountCurve
from pricer.market.fx import FxRates
from pricer.market.nearest_correlation import nearest_correlation
from pricer.market.volatility import CalendarArbitrageError, VolatilityCurve, covariance

TODAY = date(2026, 11, 30)
repeatable = settings(max_examples=60, deadline=None, derandomize=True)

days_ahead = st.integers(0, 15_000).map(lambda n: TODAY + timedelta(days=n))
calendars = st.sampled_from([*CALENDARS, "TARGET+US", "UK+JP+CH"])


@st.composite
def symmetric(draw, bound=1.0):
    """Symmetric with unit diagonal and entries up to ``bound``; definite or not."""
    n = draw(st.integers(1, 8))
    raw = draw(arrays(float, (n, n), elements=st.floats(-bound, bound, allow_subnormal=False)))
    out = np.triu(raw, 1) + np.triu(raw, 1).T
    np.fill_diagonal(out, 1.0)
    return out


@st.composite
def pillars(draw, values):
    steps = draw(st.lists(st.integers(1, 1500), min_size=1, max_size=6))
    dates = [TODAY + timedelta(days=int(n)) for n in np.cumsum(steps)]
    return dates, draw(st.lists(values, min_size=len(dates), max_size=len(dates)))


@st.composite
def volatility_curves(draw):
    """Total variance grows by non-negative amounts, so there is no arbitrage."""
    dates, increments = draw(pillars(st.floats(0.0, 0.5)))
    assume(increments[0] > 0.0)
    years = np.array([(day - TODAY).days / 365 for day in dates])
    return VolatilityCurve.from_quotes(TODAY, dates, np.sqrt(np.cumsum(increments) / years).tolist())


@repeatable
@given(symmetric(bound=3.0))
def test_the_nearest_correlation_is_a_correlation_and_its_own_nearest(matrix):
    nearest = nearest_correlation(matrix)
    np.testing.assert_array_equal(np.diag(nearest), 1.0)
    np.testing.assert_array_equal(nearest, nearest.T)
    assert np.linalg.eigvalsh(nearest)[0] >= -1e-12
    assert np.abs(nearest).max() <= 1.0 + 1e-12
    np.testing.assert_allclose(nearest_correlation(nearest), nearest, atol=1e-10)


@repeatable
@given(symmetric(bound=3.0), st.integers(0, 2**32 - 1))
def test_no_other_correlation_matrix_is_nearer(matrix, seed):
    n = len(matrix)
    distance = np.linalg.norm(nearest_correlation(matrix) - matrix)
    for loads in np.random.default_rng(seed).standard_normal((20, n, n)):
        loads /= np.linalg.norm(loads, axis=1, keepdims=True)
        assert np.linalg.norm(loads @ loads.T - matrix) >= distance - 1e-9


@repeatable
@given(symmetric(), st.randoms(use_true_random=False))
def test_relabelling_relabels_the_nearest_correlation(matrix, random):
    order = list(range(len(matrix)))
    random.shuffle(order)
    grid = np.ix_(order, order)
    np.testing.assert_allclose(nearest_correlation(matrix[grid]), nearest_correlation(matrix)[grid], atol=1e-9)


@repeatable
@given(symmetric())
def test_a_checked_matrix_is_positive_and_within_its_limit(matrix):
    ids = [f"U{i}" for i in range(len(matrix))]
    try:
        kept, repair = checked(ids, matrix, limit=0.25)
    except CorrelationError as error:
        assert error.repair.largest_change > 0.25
        return
    assert np.linalg.eigvalsh(kept.matrix)[0] >= (1e-10 if repair else -1e-12)
    change = np.abs(kept.matrix - matrix).max()
    assert change == (repair.largest_change if repair else 0.0) <= 0.25


@repeatable
@given(volatility_curves(), days_ahead, days_ahead)
def test_total_variance_never_falls(curve, one, other):
    early, late = sorted((one, other))
    assert curve.total_variance(early) <= curve.total_variance(late) * (1 + 1e-12)


@repeatable
@given(pillars(st.floats(0.01, 2.0)))
def test_quotes_are_repriced_or_refused_for_arbitrage(quotes):
    dates, volatilities = quotes
    variances = [v * v * (day - TODAY).days / 365 for day, v in zip(dates, volatilities, strict=True)]
    if np.any(np.diff(variances) < -1e-11):
        with pytest.raises(CalendarArbitrageError):
            VolatilityCurve.from_quotes(TODAY, dates, volatilities)
    elif np.all(np.diff(variances) >= 0.0):
        curve = VolatilityCurve.from_quotes(TODAY, dates, volatilities)
        for day, volatility in zip(dates, volatilities, strict=True):
            assert curve.volatility(day) == pytest.approx(volatility, rel=1e-12)


@repeatable
@given(st.lists(volatility_curves(), min_size=2, max_size=4), st.floats(-0.3, 1.0), days_ahead)
def test_covariance_is_that_of_a_law(curves, rho, day):
    n = len(curves)
    correlation = np.full((n, n), rho) + (1.0 - rho) * np.eye(n)
    found = covariance(curves, correlation, day)
    variances = np.array([curve.total_variance(day) for curve in curves])
    np.testing.assert_allclose(np.diag(found), variances, rtol=1e-9, atol=1e-15)
    np.testing.assert_array_equal(found, found.T)
    assert np.linalg.eigvalsh(found)[0] >= -1e-12 * max(1.0, variances.max())
    # The integral of a product is at most the root of the product of integrals (Cauchy-Schwarz).
    limit = np.abs(correlation) * np.sqrt(np.outer(variances, variances))
    assert np.all(np.abs(found) <= limit * (1 + 1e-9) + 1e-15)


@repeatable
@given(pillars(st.floats(-0.05, 0.3)), days_ahead)
def test_discount_factors_lie_between_those_of_the_extreme_forwards(quotes, day):
    dates, zeros = quotes
    curve = DiscountCurve.from_zero_rates("C", "EUR", "", TODAY, dates, zeros)
    assert curve.discount_factor(TODAY) == 1.0
    for pillar, zero in zip(dates, zeros, strict=True):
        assert curve.discount_factor(pillar) == pytest.approx(np.exp(-zero * (pillar - TODAY).days / 365), rel=1e-12)
    forwards = -np.diff(curve.log_discount_factors) / np.diff(curve.times)
    time = (day - TODAY).days / 365
    low, high = (-forwards.max() * time, -forwards.min() * time)
    log = -curve.zero_rate(day) * time
    slack = 1e-9 * (1.0 + abs(low) + abs(high))
    assert low - slack <= log <= high + slack


@repeatable
@given(
    st.dictionaries(
        st.sampled_from(["EURUSD", "USDJPY", "EURGBP", "GBPCHF", "AUDUSD", "CHFSEK", "JPYAUD"]), st.floats(1e-3, 1e3)
    )
)
def test_a_rate_and_its_way_back_cancel(pairs):
    rates = FxRates.from_pairs(pairs)
    for a in rates.currencies:
        assert rates.rate(a, a) == 1.0
        for b in rates.currencies:
            try:
                there = rates.rate(a, b)
            except LookupError:
                with pytest.raises(LookupError):
                    rates.rate(b, a)
                continue
            assert there * rates.rate(b, a) == pytest.approx(1.0, rel=1e-14)


@repeatable
@given(calendars, days_ahead, st.integers(1, 30))
def test_advancing_counts_business_days(calendar, day, n):
    there = advance(calendar, day, n)
    assert is_business_day(calendar, there)
    span = (there - day).days
    assert sum(is_business_day(calendar, day + timedelta(days=i)) for i in range(1, span + 1)) == n
    assert advance(calendar, there, -n) <= roll(calendar, day, "following")


@repeatable
@given(calendars, days_ahead)
def test_rolling_finds_the_nearest_business_day_of_its_side(calendar, day):
    after, before = roll(calendar, day, "following"), roll(calendar, day, "preceding")
    assert before <= day <= after
    assert is_business_day(calendar, before) and is_business_day(calendar, after)
    between = [before + timedelta(days=i) for i in range(1, (after - before).days)]
    assert not any(is_business_day(calendar, closed) for closed in between)
    assert roll(calendar, day, "modified following") == (after if after.month == day.month else before)
