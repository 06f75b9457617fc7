"""Numbers for unknown correlations: they leave the known ones alone, and hold together wherever these do."""

from __future__ import annotations

import numpy as np
import pytest

from pricer.core.randomness import Purpose, stream
from pricer.market.correlation import checked
from pricer.market.correlation_completion import completed


def with_unknown(matrix, *pairs):
    out = np.array(matrix, dtype=float)
    for i, j in pairs:
        out[i, j] = out[j, i] = np.nan
    return out


def test_a_matrix_that_is_known_in_full_stays_as_it_is():
    matrix = np.array([[1.0, 0.9, -0.9], [0.9, 1.0, 0.9], [-0.9, 0.9, 1.0]])
    assert (completed(matrix) == matrix).all()


def test_an_unknown_pair_lies_where_the_two_known_ones_allow():
    """With 0.9 and 0.9, the third correlation of three lies in 0.81 -+ 0.19 (elementary: the determinant)."""
    out = completed(with_unknown(np.full((3, 3), 0.9) + 0.1 * np.eye(3), (0, 1)))
    assert 0.62 - 1e-9 <= out[0, 1] <= 1.0
    assert (out[2] == [0.9, 0.9, 1.0]).all()
    assert checked(["A", "B", "C"], out)[1] is None


@pytest.mark.parametrize("seed", range(8))
@pytest.mark.parametrize("size", [4, 12])
def test_a_matrix_with_gaps_needs_no_repair_if_it_came_from_one_without(seed, size):
    rng = stream(seed, "completion", Purpose.FIT, 0)
    sample = rng.standard_normal((size + 3, size)) + 2.0 * rng.standard_normal((size + 3, 1))
    whole = np.corrcoef(sample, rowvar=False)
    whole = np.tril(whole, -1) + np.tril(whole, -1).T + np.eye(size)
    gaps = [(0, 1), (0, size - 1), (1, 2), (size - 2, size - 1)]
    given = with_unknown(whole, *gaps)
    out = completed(given)
    known = ~np.isnan(given)
    assert (out[known] == given[known]).all() and (out == out.T).all()
    assert checked([str(i) for i in range(size)], out)[1] is None


def test_known_correlations_that_contradict_each_other_are_moved_and_not_the_unknown_one():
    impossible = np.array(
        [[1.0, 0.9, -0.85, 0.0], [0.9, 1.0, -0.4, 0.0], [-0.85, -0.4, 1.0, 0.0], [0.0, 0.0, 0.0, 1.0]]
    )
    _, repair = checked(list("ABCD"), completed(with_unknown(impossible, (0, 3))))
    assert repair is not None and repair.pair != ("A", "D")
