"""Correlations from past levels: weights, gaps, stale runs, days off."""

from datetime import date, timedelta

import numpy as np
import pandas as pd
import pytest

from pricer.market.correlation import CorrelationError
from pricer.market.correlation_estimate import HistoryRules, Window, estimate, log_returns

START = date(2026, 1, 5)  # a Monday
WEEKDAYS = [day for n in range(560) if (day := START + timedelta(days=n)).weekday() < 5]
TRUTH = np.array([[1.0, 0.6, -0.2], [0.6, 1.0, 0.1], [-0.2, 0.1, 1.0]])
IDS = ("ARVENNE", "BELCOR", "EURUSD")


def history(seed=7, days=400):
    normals = np.random.default_rng(seed).standard_normal((days - 1, 3)) @ np.linalg.cholesky(TRUTH).T
    logs = np.vstack([np.zeros(3), np.cumsum(0.01 * normals, axis=0)])
    return WEEKDAYS[:days], 100.0 * np.exp(logs)


def refused(dates, levels, rules=None, ids=IDS):
    with pytest.raises(ValueError) as caught:
        estimate(ids, dates, levels, rules)
    return str(caught.value)


def test_a_planted_correlation_is_found_again():
    """At 399 equal weights the error of a correlation is (1 - rho^2) / 20; 4 of them, at this seed."""
    found = estimate(IDS, *history(), HistoryRules(half_life=1e9))
    assert np.all(np.abs(found.matrix.matrix - TRUTH) <= 4.0 * (1.0 - TRUTH**2) / 20.0)
    np.testing.assert_array_equal(found.counts, 399)
    np.testing.assert_allclose(found.effective, 399.0, rtol=1e-6)
    assert found.repair is None and found.days_off == 0 and not found.missing.any() and not found.stale.any()


def test_equal_weights_are_the_plain_correlation_about_zero():
    dates, levels = history()
    returns = np.diff(np.log(levels), axis=0)
    products = returns.T @ returns
    roots = np.sqrt(np.diag(products))
    found = estimate(IDS, dates, levels, HistoryRules(half_life=1e12)).matrix.matrix
    np.testing.assert_allclose(found, products / np.outer(roots, roots), atol=1e-9)


def test_weights_halve_with_the_half_life():
    """pandas' exponentially weighted moments with that half-life, about 0, at the last date."""
    dates, levels = history()
    returns = np.diff(np.log(levels), axis=0)
    products = pd.DataFrame({(i, j): returns[:, i] * returns[:, j] for i in range(3) for j in range(3)})
    last = products.ewm(halflife=30.0, adjust=True).mean().iloc[-1].to_numpy().reshape(3, 3)
    roots = np.sqrt(np.diag(last))
    found = estimate(IDS, dates, levels, HistoryRules(half_life=30.0))
    np.testing.assert_allclose(found.matrix.matrix, last / np.outer(roots, roots), atol=1e-12)
    # The sum of a geometric series, squared over that of its squares.
    kept = 0.5 ** (1.0 / 30.0)
    assert found.effective[0, 1] == pytest.approx((1.0 + kept) / (1.0 - kept), rel=1e-3)


def test_a_missing_level_costs_two_returns_of_its_id_only():
    dates, levels = history()
    levels[100, 0] = np.nan
    found = estimate(IDS, dates, levels)
    np.testing.assert_array_equal(found.missing, [1, 0, 0])
    np.testing.assert_array_equal(found.counts, [[397, 397, 397], [397, 399, 399], [397, 399, 399]])
    complete = estimate(IDS, dates, levels, HistoryRules(window=Window.COMPLETE))
    np.testing.assert_array_equal(complete.counts, 397)


def test_a_stale_run_and_the_jump_that_ends_it_are_left_out():
    dates, levels = history()
    levels[51:55, 1] = levels[50, 1]  # four days without a new level, then a catching-up return
    found = estimate(IDS, dates, levels)
    np.testing.assert_array_equal(found.stale, [0, 5, 0])
    assert found.counts[1, 1] == 394
    without = levels.copy()
    without[51:55, 1] = np.nan
    np.testing.assert_allclose(found.matrix.matrix, estimate(IDS, dates, without).matrix.matrix, rtol=1e-14)


def test_a_run_at_the_end_is_stale_and_a_short_one_is_not():
    returns, stale = log_returns(np.array([[1.0], [1.1], [1.1], [1.1], [1.2], [1.2], [1.2], [1.2]]), np.ones(7), 3)
    np.testing.assert_array_equal(stale, [3])
    np.testing.assert_array_equal(np.isnan(returns[:, 0]), [False] * 4 + [True] * 3)


def test_a_run_that_ends_in_a_gap():
    levels = np.array([[1.0], [1.0], [1.0], [1.0], [np.nan], [1.3], [1.2]])
    returns, stale = log_returns(levels, np.ones(6), 3)
    np.testing.assert_array_equal(stale, [3])
    np.testing.assert_array_equal(np.isnan(returns[:, 0]), [True] * 5 + [False])


def test_rows_on_days_off_are_dropped_and_told():
    dates, levels = history(days=200)
    weekend = [day + timedelta(days=1) for day in dates if day.weekday() == 4]
    every = sorted([*dates, *weekend])
    repeated = levels[[sum(day <= other for day in dates) - 1 for other in every]]
    found = estimate(IDS, every, repeated)
    assert found.days_off == len(weekend)
    np.testing.assert_array_equal(found.matrix.matrix, estimate(IDS, dates, levels).matrix.matrix)


def test_a_return_over_a_holiday_is_scaled_to_one_day():
    returns, _ = log_returns(np.exp([[0.0], [0.01], [0.05]]), np.array([1.0, 4.0]), 3)
    np.testing.assert_allclose(returns[:, 0], [0.01, 0.02], rtol=1e-12)


def test_windows_that_contradict_each_other_are_repaired_or_refused():
    """Three pairs, each seen in a window of its own in which they move together, opposed, and together."""
    random = np.random.default_rng(11)
    dates = WEEKDAYS[:303]
    logs = np.full((303, 3), np.nan)
    for k, (i, j, sign) in enumerate(((0, 1, 1.0), (1, 2, 1.0), (0, 2, -1.0))):
        common = np.cumsum(0.01 * random.standard_normal(101))
        logs[101 * k : 101 * (k + 1), i], logs[101 * k : 101 * (k + 1), j] = common, sign * common
    with pytest.raises(CorrelationError):
        estimate(IDS, dates, np.exp(logs))
    found = estimate(IDS, dates, np.exp(logs), limit=1.0)
    assert found.repair is not None and found.repair.largest_change == pytest.approx(0.5, abs=1e-6)
    assert np.linalg.eigvalsh(found.matrix.matrix)[0] > 0.0


def test_what_cannot_be_estimated_is_told():
    dates, levels = history(days=100)
    thin = levels.copy()
    thin[20:, 2] = np.nan
    assert (
        refused(dates, thin) == "EURUSD and ARVENNE share 19 usable returns, fewer than 60 (and 2 other pairs too few)"
    )
    assert refused(dates, np.where(np.arange(3) == 1, 5.0, levels)) == (
        "BELCOR and ARVENNE share 0 usable returns, fewer than 60 (and 2 other pairs too few)"
    )
    bad = levels.copy()
    bad[3, 1] = 0.0
    assert refused(dates, bad) == f"the level of BELCOR on {dates[3]} must be above 0; got 0"
    assert refused(dates[::-1], levels) == f"dates must increase; {dates[-2]} follows {dates[-1]}"
    assert refused(dates[:5], levels) == "levels of shape (100, 3) do not fit 5 dates and 3 ids"
    for rules, message in (
        ({"half_life": 0.0}, "the half-life must be above 0 business days"),
        ({"stale_run": 1}, "a stale run has 2 unchanged days or more"),
        ({"minimum_returns": 1}, "a correlation needs 2 returns or more"),
    ):
        with pytest.raises(ValueError, match=message):
            HistoryRules(**rules)


@pytest.mark.parametrize(
    ("move", "usual", "is_jump"),
    [(0.9, 1.0, True), (0.26, 1.0, True), (0.24, 1.0, False), (-0.4, 1.0, True), (0.3, 3.0, False)],
)
def test_a_move_is_a_jump_only_if_it_is_large_for_any_day_and_far_from_usual(move, usual, is_jump):
    """Daily moves of about 1 % times ``usual``: 12 of them are 12 %, or 36 % where they are 3 %."""
    dates, levels = history(days=200)
    levels = 100.0 * (levels / 100.0) ** usual
    jumping = levels * np.where((np.arange(200) >= 90)[:, None] & (np.arange(3) == 1), np.exp(move), 1.0)
    found = estimate(IDS, dates, jumping)
    assert [(jump.name, jump.earlier, jump.day) for jump in found.jumps] == [("BELCOR", dates[89], dates[90])] * is_jump
    assert found.counts.diagonal().tolist() == [199, 199 - is_jump, 199]
    if is_jump:
        # One return less of 199 moves a correlation by a few hundredths at most.
        assert found.matrix.matrix == pytest.approx(estimate(IDS, dates, levels).matrix.matrix, abs=0.1)
        (jump,) = found.jumps
        assert (jump.before, jump.level) == (jumping[89, 1], jumping[90, 1])


def test_a_level_is_missing_only_where_its_own_calendar_is_open():
    dates, levels = history(days=120)
    holiday = dates.index(date(2026, 1, 19))  # the US market's, not that of TARGET
    levels[holiday, :2] = np.nan
    found = estimate(IDS, dates, levels, calendars={"ARVENNE": "NYSE", "BELCOR": "TARGET"})
    assert found.missing.tolist() == [0, 1, 0]
    assert found.counts.diagonal().tolist() == [117, 117, 119]
