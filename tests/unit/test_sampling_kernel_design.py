"""Which factor is integrated exactly."""

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.profile import Profile, ProfileKind
from pricer.market.joint_lognormal import JointLognormal
from pricer.simulation.design import Design

CALL = Profile(ProfileKind.CALL, 1.0).payoff()


def design(deviations, correlation, weights, forwards=None, aggregate=Aggregate.weighted_sum) -> Design:
    s = np.array(deviations)
    law = JointLognormal(np.ones(len(s)) if forwards is None else np.array(forwards), np.outer(s, s) * correlation)
    return Design.of(law, aggregate(tuple(weights)), CALL, triangular=False)


def rebuilt(d: Design) -> np.ndarray:
    """Covariance of the log-levels in the problem's order."""
    place = np.argsort(d.order)
    loadings = d.loadings * np.log(2.0)
    return (loadings @ loadings.T + np.outer(d.direction, d.direction))[np.ix_(place, place)]


def test_like_assets_move_together():
    d = design([0.2, 0.25, 0.3], 0.5 + 0.5 * np.eye(3), [0.3, 0.3, 0.4])
    assert d.n_common == 3
    assert d.direction == pytest.approx(np.full(3, d.factor_deviation))


def test_a_leg_that_moves_far_more_than_all_together_goes_alone():
    # a common factor cannot be wider than the narrow legs let it be
    d = design([0.75, 0.02, 0.02], np.eye(3), [1 / 3, 1 / 3, 1 / 3])
    assert (d.n_common, d.order[0]) == (1, 0)
    assert d.factor_deviation == pytest.approx(0.75)
    assert d.direction == pytest.approx([0.75, 0.0, 0.0])


def test_a_leg_that_moves_a_little_more_than_all_together_does_not():
    # independent: c is 0.196 for both legs, 0.4 and 0.224 for either alone
    d = design([0.4, 0.224], np.eye(2), [0.5, 0.5])
    assert d.n_common == 2


def test_the_wider_side_of_a_spread_is_scaled():
    d = design([0.2, 0.3, 0.3], 0.5 + 0.5 * np.eye(3), [1.0, -2.0, -2.0], forwards=[1.0, 2.0, 2.0])
    assert (d.n_common, set(d.order[:2])) == (2, {1, 2})
    assert np.all(d.weights[:2] > 0.0)  # reflected


@pytest.mark.parametrize("weights", [[0.3, 0.3, 0.4], [1.0, -0.5, 0.2], [2.0, 0.01, 0.01]])
def test_factor_and_loadings_make_up_the_covariance(weights):
    correlation = np.array([[1.0, 0.5, 0.2], [0.5, 1.0, -0.3], [0.2, -0.3, 1.0]])
    s = np.array([0.2, 0.3, 0.6])
    assert rebuilt(design(s, correlation, weights)) == pytest.approx(np.outer(s, s) * correlation, abs=1e-10)


def test_a_geometric_aggregate_is_its_own_factor():
    w, s = np.array([0.3, 0.3, 0.4]), np.array([0.2, 0.3, 0.6])
    correlation = np.array([[1.0, 0.5, 0.2], [0.5, 1.0, -0.3], [0.2, -0.3, 1.0]])
    d = design(s, correlation, w, aggregate=Aggregate.geometric)
    assert (d.kind, d.dimensions) == (AggregateKind.GEOMETRIC, 0)
    assert d.factor_deviation**2 == pytest.approx(w @ (np.outer(s, s) * correlation) @ w)
    assert d.direction @ w == pytest.approx(d.factor_deviation)


def test_a_geometric_aggregate_whose_logs_cancel_has_no_factor():
    d = design([0.2, 0.2], np.array([[1.0, -1.0], [-1.0, 1.0]]), [0.5, 0.5], aggregate=Aggregate.geometric)
    assert (d.factor_deviation, d.dimensions, d.is_smoothed) == (0.0, 0, False)
