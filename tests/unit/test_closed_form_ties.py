"""A known level that equals the strike is at it, however its sum was rounded."""

from __future__ import annotations

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import TIE, PiecewiseLinear, ProfileKind, is_above
from pricer.engines.closed_form import best_exact, references
from pricer.engines.closed_form.family import expectation
from pricer.engines.closed_form.known_level import KnownLevel
from tests.unit.closed_form_cases import equal_correlation, law, problem

SPOTS = [100.0, 100.0, 100.0]
CALL, PUT = ProfileKind.CASH_DIGITAL_CALL, ProfileKind.CASH_DIGITAL_PUT


@pytest.mark.parametrize(
    "aggregate",
    [
        Aggregate.weighted_sum((0.3, 0.3, 0.4)),
        Aggregate.geometric((0.3, 0.3, 0.4)),  # 100.00000000000001 in double precision
        Aggregate.best_of(3),
        Aggregate.worst_of(3),
        Aggregate.kth_best(2, 3),
        Aggregate.rank_weighted((0.3, 0.3, 0.4)),
    ],
    ids=lambda aggregate: aggregate.kind,
)
@pytest.mark.parametrize("nudge", [0.0, 3e-14, -3e-14])
def test_a_digital_struck_at_the_known_level_is_not_above_it(aggregate, nudge):
    joint = law(np.array(SPOTS) * (1.0 + nudge), [0.2, 0.3, 0.25], equal_correlation(3, 0.5), years=0.0)
    for kind, pays in ((CALL, 0.0), (PUT, 1.0)):
        known = references(problem(joint, aggregate, kind, 100.0))
        assert known
        assert [r.value for r in known] == [pytest.approx(pays, abs=1e-12)] * len(known)


def test_legs_that_cancel_are_at_a_strike_of_zero():
    joint = law([100.0, 100.0, 100.0], [0.2] * 3, equal_correlation(3, 1.0), years=1.0)
    for years_law in (joint, law(SPOTS, [0.2] * 3, equal_correlation(3, 0.5), years=0.0)):
        case = problem(years_law, Aggregate.weighted_sum((0.1, 0.2, -0.3)), CALL, 0.0)  # 0.1 + 0.2 - 0.3 = 5.6e-17
        assert best_exact(references(case)).value == 0.0


def test_a_level_without_variance_ties_with_the_strike_of_an_extreme():
    joint = law([1.0 + 2e-16, 1.5], [0.0, 0.01], np.eye(2))
    at = problem(joint, Aggregate.worst_of(2), CALL, 1.0)
    assert best_exact(references(at)).value == 0.0


def test_a_level_beyond_the_tie_is_above():
    assert not is_above(100.0 * (1.0 + 0.5 * TIE), 100.0)
    assert is_above(100.0 * (1.0 + 4.0 * TIE), 100.0)
    assert not is_above(1e-14, 0.0, gross=1.0)
    assert is_above(1e-14, 0.0)
    assert is_above(np.array([-1.0, 0.0, 2.0]), 0.0).tolist() == [False, False, True]


def test_the_payoff_of_a_known_level_differs_from_the_plain_one_at_ties_only():
    payoff = PiecewiseLinear(1.0, 0.5, (100.0, 120.0), (1.0, -2.0), (3.0, 4.0))
    levels = np.array([90.0, 100.0 + 1e-11, 100.1, 120.0 + 1e-11, 130.0])
    plain = payoff(levels)
    known = np.array([expectation(payoff, KnownLevel(level, 0.0)).value for level in levels])
    assert (plain - known).tolist() == [0.0, 3.0, 0.0, 4.0, 0.0]
