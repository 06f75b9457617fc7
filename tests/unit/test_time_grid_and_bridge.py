"""Grids that hit every date, and bridges with the law of Brownian motion."""

import numpy as np
import pytest

from pricer.simulation import sobol
from pricer.simulation.bridge import Bridge
from pricer.simulation.time_grid import TimeGrid


def test_every_date_ends_an_even_step():
    grid = TimeGrid.of([0.25, 1.0, 1.01, 5.0], steps=32)
    assert grid.times[grid.dates] == pytest.approx([0.25, 1.0, 1.01, 5.0], abs=0)
    assert np.all(grid.dates % 2 == 0) and np.all(grid.lengths > 0.0)
    assert grid.dates[0] == 8  # a quarter of a year is 22 % of the root of five years


def test_every_interval_gets_its_least_steps_and_a_short_ending_of_its_own():
    grid = TimeGrid.of([0.02, 2.0], steps=16, least=8, ending=0.25, every=True)
    assert list(grid.dates) == [8, 22]
    for end in grid.dates:
        last, before = grid.lengths[end - 1], grid.lengths[end - 3]
        assert last == pytest.approx(0.25 * before)


def test_halving_joins_steps_in_pairs_and_keeps_the_dates():
    grid = TimeGrid.of([0.5, 2.0], steps=16, ending=0.25)
    half = grid.halved()
    assert half.n_steps * 2 == grid.n_steps
    assert half.times[half.dates] == pytest.approx([0.5, 2.0], abs=0)
    assert half.lengths[-1] == pytest.approx(0.25 * half.lengths[-2])


def test_a_date_on_an_odd_step_cannot_be_halved():
    with pytest.raises(ValueError, match="a date ends an odd step"):
        TimeGrid(np.array([0.0, 0.5, 1.0]), np.array([1, 2])).halved()


def test_a_short_ending_is_halved_by_joining_the_last_two_steps():
    grid = TimeGrid.with_ending(2.0, 0.125)
    assert grid.times == pytest.approx([0.0, 1.75, 1.875, 2.0], abs=0)
    joined = grid.without_last_cut()
    assert joined.times == pytest.approx([0.0, 1.75, 2.0], abs=0) and list(joined.dates) == [2]
    with pytest.raises(ValueError, match="a date ends the last step but one"):
        TimeGrid(np.array([0.0, 0.5, 1.0]), np.array([1, 2])).without_last_cut()


@pytest.mark.parametrize("dates", [[0.0], [1.0, 1.0], [2.0, 1.0], [np.nan], [-1.0], []])
def test_dates_that_do_not_increase_are_refused(dates):
    with pytest.raises(ValueError, match="dates must be finite, above 0 and increase"):
        TimeGrid.of(dates, steps=4)


@pytest.mark.parametrize("n_steps", [1, 2, 5, 8])
def test_a_bridge_has_the_covariance_of_brownian_motion(n_steps):
    times = np.concatenate([[0.0], np.cumsum(np.linspace(0.1, 0.5, n_steps))])
    walk = Bridge.over(times).walk(np.eye(n_steps))  # row t: loadings of W(t) on the normals
    assert walk @ walk.T == pytest.approx(np.minimum.outer(times[1:], times[1:]), abs=1e-14)


def test_coordinates_go_to_the_end_point_and_the_largest_factor_first():
    bridge = Bridge.over(np.linspace(0.0, 1.0, 5))
    places = bridge.coordinates(np.array([1.0, 0.1]))
    assert sorted(places.ravel()) == list(range(8))
    assert places[3, 0] == 0 and places[1, 0] == 1 and {places[0, 0], places[2, 0]} == {2, 3}
    assert places[3, 1] == 4


@pytest.mark.parametrize("dates", [[8], [2, 8], [1, 2, 5, 8], [3, 4, 5, 6, 8]])
def test_a_bridge_by_way_of_dates_has_the_same_covariance_and_makes_the_dates_first(dates):
    times = np.concatenate([[0.0], np.cumsum(np.linspace(0.1, 0.5, 8))])
    bridge = Bridge.through(times, np.array(dates))
    walk = bridge.walk(np.eye(8))
    assert walk @ walk.T == pytest.approx(np.minimum.outer(times[1:], times[1:]), abs=1e-14)
    assert sorted(bridge.at[: len(dates)] + 1) == dates


def test_weights_bring_early_dates_forward():
    times = np.linspace(0.0, 1.0, 5)
    bridge = Bridge.through(times, np.array([1, 4]))
    places = bridge.coordinates(np.ones(1), 1.0 / np.sqrt(times[1:]))
    assert list(places[[3, 0], 0]) == [0, 1]


def test_coordinates_beyond_the_table_are_as_evenly_spread_as_those_in_it():
    numbers = sobol.extended_directions(1803)
    assert np.array_equal(numbers[:1799], sobol.directions(1799))
    words = sobol.random_words(np.random.default_rng(1), 1, 4)[0]
    points = sobol.scrambled_points(numbers[1799:], words, 0, 1024)
    cells = np.sort(points >> np.uint32(22), axis=1)
    assert np.array_equal(cells, np.broadcast_to(np.arange(1024, dtype=np.uint32), (4, 1024)))
    off = np.corrcoef(points) - np.eye(4)
    assert np.max(np.abs(off)) < 0.12  # independent points: 1/32 each, six pairs
