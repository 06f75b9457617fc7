from dataclasses import replace

import numpy as np
import pytest

from pricer.engines.closed_form.lognormal import black
from pricer.engines.early_exercise.certificate import CertificateSettings
from pricer.engines.early_exercise.deltas import early_exercise_deltas
from pricer.engines.early_exercise.engine import early_exercise_value
from pricer.engines.early_exercise.problem import Right
from tests.unit.early_exercise_cases import QUICK, best_of_call, put

SURE = 4.0


def test_the_delta_of_an_option_with_one_date_is_known():
    problem = best_of_call(1, np.array([1.0]), payoff=put(100.0))
    deltas = early_exercise_deltas(problem, QUICK)

    def value(spot):
        return float(np.exp(-0.05) * black(spot * np.exp(-0.05), 100.0, 0.2, -1))

    wanted = (value(100.01) - value(99.99)) / 0.02
    assert deltas.values[0] == pytest.approx(wanted, abs=SURE * deltas.errors[0] + 1e-4)  # bumps of 0.2 %
    assert deltas.errors[0] < 0.01


@pytest.mark.long
def test_deltas_are_those_of_revaluing_with_common_draws():
    problem = best_of_call(3, correlation=0.3, volatilities=np.array([0.15, 0.25, 0.35]))
    deltas = early_exercise_deltas(problem, QUICK, assets=(2,))
    ends = []
    for bump in (1.01, 0.99):
        spots = problem.spots * np.array([1.0, 1.0, bump])
        ends.append(early_exercise_value(replace(problem, spots=spots), QUICK).value)
    revalued = (ends[0] - ends[1]) / 2.0
    # the revaluation fits each rule anew: its own noise is of the size of the deltas'
    assert deltas.assets == (2,)
    assert deltas.values[0] == pytest.approx(revalued, abs=2.0 * SURE * deltas.errors[0])
    assert deltas.errors[0] < 0.02 * deltas.values[0]


def test_the_martingale_takes_most_of_the_noise():
    deltas = early_exercise_deltas(best_of_call(2), QUICK)
    # four times in error is sixteen times in variance; trials saw 22 to 39
    assert np.all(deltas.errors * 3.0 < deltas.raw_errors)
    assert np.ptp(deltas.values) < 2.0 * SURE * np.max(deltas.errors)  # assets are alike


def test_the_issuers_deltas_have_the_opposite_sign_of_the_holders_of_the_opposite():
    mine = best_of_call(2, np.array([0.5, 1.0]))
    theirs = replace(mine, payoffs=tuple(f.scaled(-1.0) for f in mine.payoffs), right=Right.ISSUER)
    small = replace(QUICK, certificate=CertificateSettings(8, 128, 16))
    assert np.array_equal(early_exercise_deltas(theirs, small).values, -early_exercise_deltas(mine, small).values)


def test_a_first_date_at_time_0_is_refused():
    with pytest.raises(ValueError, match="take it off first"):
        early_exercise_deltas(best_of_call(1, np.array([0.0, 1.0])), QUICK)
