"""The normal factor split off a path, and the cells on which it is integrated."""

import numpy as np
import pytest
from scipy.stats import norm

from pricer.simulation.stepwise_cells import REACH, FactorCells
from pricer.simulation.stepwise_factor import PathFactor

LENGTHS = np.array([0.1, 0.15, 0.5, 0.25])
CORRELATION = np.array([[1.0, 0.6, 0.2, 0.1], [0.6, 1.0, -0.3, 0.0], [0.2, -0.3, 1.0, 0.3], [0.1, 0.0, 0.3, 1.0]])
VOLATILITIES = np.array([[0.2, 0.3, 0.25], [0.22, 0.31, 0.2], [0.25, 0.28, 0.2], [0.2, 0.3, 0.3]])


def factor(correlation=CORRELATION, signs=(1.0, 1.0, 1.0)):
    return PathFactor.of(LENGTHS, correlation, VOLATILITIES, np.array(signs))


@pytest.mark.parametrize("signs", [(1.0, 1.0, 1.0), (1.0, -1.0, 1.0)])
def test_the_factor_is_a_unit_normal_independent_of_what_is_left(signs):
    found = factor(signs=signs)
    assert (found.projection**2).sum(axis=1) @ LENGTHS == pytest.approx(1.0, abs=1e-12)
    with_factor = np.einsum("id,sd,s->si", found.loadings, found.projection, LENGTHS)
    assert with_factor == pytest.approx(found.directions, abs=1e-12)


def test_loadings_give_the_correlation_back():
    found = factor()
    assert found.loadings @ found.loadings.T == pytest.approx(CORRELATION, abs=1e-12)


def test_log_levels_move_alike_and_exchange_rates_do_not():
    found = factor(signs=(1.0, -1.0, 1.0))
    moves = found.directions[:, :3] * VOLATILITIES
    assert moves[:, 0] == pytest.approx(-moves[:, 1], abs=1e-12)
    assert moves[:, 0] == pytest.approx(moves[:, 2], abs=1e-12)
    assert np.all(moves[:, 0] > 0.0)
    assert np.abs(found.directions[:, 3]).max() < 1e-12


def test_tied_motions_are_moved_as_far_as_the_tie_allows():
    tied = np.array([[1.0, 1.0, 0.3], [1.0, 1.0, 0.3], [0.3, 0.3, 1.0]])
    found = factor(tied)
    assert found.directions[:, 0] == pytest.approx(found.directions[:, 1], abs=1e-10)
    assert (found.projection**2).sum(axis=1) @ LENGTHS == pytest.approx(1.0, abs=1e-10)


@pytest.mark.parametrize("rate", [0.05, 0.3, -0.5])
def test_straight_pieces_keep_the_mean_of_a_smooth_price(rate):
    """Up to 50 % a deviation; the 3e-6 of the distribution beyond each side count with the last cell."""
    cells = FactorCells.of(36)
    prices = np.exp(rate * cells.nodes) @ cells.weights
    mass, moment = cells.mass.sum(axis=1), cells.moment.sum(axis=1)
    mean = prices[:-1] @ mass + np.diff(prices) @ moment
    assert mean == pytest.approx(np.exp(0.5 * rate**2), rel=2e-5)


def test_shares_of_a_cell_are_those_of_the_normal_distribution():
    cells = FactorCells.of(18)
    ends = np.linspace(-REACH, REACH, 19)
    for s in (0.1, 0.5, 0.9):
        left = cells.mass @ s ** np.arange(1.0, 5.0)
        exact = norm.cdf(ends[:-1] + 0.5 * s) - norm.cdf(ends[:-1])
        assert left[1:-1] == pytest.approx(exact[1:-1], abs=2e-6)
    assert cells.mass.sum() == pytest.approx(1.0, abs=1e-12)
