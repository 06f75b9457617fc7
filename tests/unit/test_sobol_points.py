"""Sobol points against SciPy's table, and what scrambling must keep."""

import numpy as np
import pytest
from scipy.stats import qmc

from pricer.simulation import sobol


def words(seed: int, dimensions: int) -> np.ndarray:
    return sobol.random_words(np.random.default_rng(seed), 1, dimensions)[0]


def test_unscrambled_points_are_scipys():
    # SciPy holds Joe & Kuo's (2008) published table new-joe-kuo-6 itself; order within a power of two differs
    dimensions = 150
    plain = np.zeros((dimensions, sobol.WORDS), dtype=np.uint32)  # unit matrices, no shift
    ours = sobol.scrambled_points(sobol.directions(dimensions), plain, 0, 256) / 2.0**32
    theirs = qmc.Sobol(dimensions, scramble=False, bits=32).random(256).T
    assert np.array_equal(ours[:, np.lexsort(ours)], theirs[:, np.lexsort(theirs)])


def test_direction_numbers_do_not_depend_on_how_many_are_asked_for():
    assert np.array_equal(sobol.directions(200)[:5], sobol.directions(5))


def test_more_dimensions_than_the_table_holds_are_refused():
    with pytest.raises(ValueError, match="at most 1799"):
        sobol.directions(1800)


@pytest.mark.parametrize("seed", range(3))
def test_every_dimension_of_a_scrambled_net_has_one_point_per_cell(seed):
    points = sobol.scrambled_points(sobol.directions(40), words(seed, 40), 0, 1024)
    cells = np.sort(points >> np.uint32(22), axis=1)
    assert np.array_equal(cells, np.broadcast_to(np.arange(1024, dtype=np.uint32), (40, 1024)))


@pytest.mark.parametrize("seed", range(3))
@pytest.mark.parametrize("bits", range(1, 10))
def test_first_two_dimensions_form_a_perfect_net(seed, bits):
    # dimensions 1 and 2 are a (0, m, 2)-net: one point in every 2^-bits by 2^-(10 - bits) box (Sobol 1967)
    points = sobol.scrambled_points(sobol.directions(2), words(seed, 2), 0, 1024)
    box = (points[0] >> np.uint32(32 - bits)) * np.uint32(2 ** (10 - bits)) + (points[1] >> np.uint32(22 + bits))
    assert len(np.unique(box)) == 1024


def test_every_aligned_stretch_is_a_net_too():
    points = sobol.scrambled_points(sobol.directions(8), words(1, 8), 3 * 512, 4 * 512)
    assert all(len(np.unique(row >> np.uint32(23))) == 512 for row in points)


def test_scrambled_points_are_uniform_over_scrambles():
    # one fixed point under many scrambles is uniform: mean 1/2 with deviation 1 / sqrt(12 n); five of them
    first = [sobol.scrambled_points(sobol.directions(3), words(seed, 3), 5, 6)[:, 0] for seed in range(2000)]
    means = np.mean(np.array(first) / 2.0**32, axis=0)
    assert np.all(np.abs(means - 0.5) < 5 / np.sqrt(12 * 2000))


def test_scrambles_of_two_streams_differ_in_every_dimension():
    a, b = (sobol.scrambled_points(sobol.directions(20), words(s, 20), 0, 64) for s in (1, 2))
    assert np.all(np.any(a != b, axis=1))
