"""Averaging-in: options struck at an average and performances against one."""

from __future__ import annotations

import math

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import Profile, ProfileKind
from pricer.engines.closed_form import best_exact, references
from pricer.engines.closed_form.average_strike import price_less_average, price_over_average
from pricer.engines.closed_form.fixing_law import FixingLaw, arithmetic_average, forward_start
from pricer.engines.problem import ReferenceKind

VARIANCES = np.array([0.005, 0.02, 0.03, 0.09])
FORWARDS = np.array([1.01, 1.0, 1.02, 1.05])
LAW = FixingLaw(FORWARDS[:, None], VARIANCES[:, None, None])
DATES = FixingLaw(FORWARDS[:3, None], VARIANCES[:3, None, None])
WEIGHTS = np.array([0.3, 0.2, 0.25])
CALL = Profile(ProfileKind.CALL, 0.0).payoff()


def simulated(n=1_000_000):
    z = np.random.default_rng(8).standard_normal((n // 2, 4)) * np.sqrt(np.diff(VARIANCES, prepend=0.0))
    return FORWARDS * np.exp(np.cumsum(np.concatenate((z, -z)), axis=1) - 0.5 * VARIANCES)


@pytest.mark.parametrize("fixed", [0.0, 0.22])
def test_both_forms_equal_a_simulation(fixed):
    levels = simulated()
    average = fixed + levels[:, :3] @ WEIGHTS
    performance = Profile(ProfileKind.CALL, 1.3, cap=0.5).payoff()
    for found, paid in (
        (price_over_average(DATES, WEIGHTS, 1.05, 0.09, performance, fixed), performance(levels[:, 3] / average)),
        (price_less_average(DATES, WEIGHTS, 1.05, 0.09, 1, fixed), np.maximum(levels[:, 3] - average, 0.0)),
        (price_less_average(DATES, WEIGHTS, 1.05, 0.09, -1, fixed), np.maximum(average - levels[:, 3], 0.0)),
    ):
        # Four standard errors of a fixed seed.
        assert found.value == pytest.approx(paid.mean(), abs=4.0 * paid.std() / math.sqrt(paid.size))
        assert found.error < 1e-11


def test_an_average_strike_lies_between_the_bounds_on_a_signed_sum_and_keeps_parity():
    signed = np.append(-WEIGHTS, 1.0)[:, None]
    refs = references(arithmetic_average(LAW, signed, CALL, 1.0))
    call, put = (price_less_average(DATES, WEIGHTS, 1.05, 0.09, side).value for side in (1, -1))
    lower = max(r.value for r in refs if r.kind is ReferenceKind.LOWER_BOUND)
    exact = best_exact(refs)
    assert lower - 1e-12 <= call
    assert call == pytest.approx(exact.value, abs=exact.error)
    assert call - put == pytest.approx(1.05 - WEIGHTS @ FORWARDS[:3], abs=1e-12)


def test_one_date_is_a_forward_start():
    one = FixingLaw(FORWARDS[1:2, None], VARIANCES[1:2, None, None])
    payoff = Profile(ProfileKind.STRADDLE, 1.02).payoff()
    start = forward_start(LAW, 1, 3, Aggregate.weighted_sum((1.0,)), payoff, 1.0)
    found = price_over_average(one, np.ones(1), 1.05, 0.09, payoff)
    assert found.value == pytest.approx(best_exact(references(start)).value, abs=1e-13)


def test_dates_up_to_the_payment_itself_are_refused():
    with pytest.raises(ValueError, match="variance must increase from date to date and to the end"):
        price_over_average(LAW, np.ones(4), 1.05, 0.09, CALL)
    with pytest.raises(ValueError, match="one underlying and 2 dates"):
        price_less_average(LAW, np.ones(2), 1.05, 0.09, 1)
