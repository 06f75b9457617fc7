"""Correlation matrices are checked once, repaired within a limit, and refused beyond it."""

import pickle

import numpy as np
import pytest

from pricer.market.correlation import CorrelationError, CorrelationMatrix, checked
from pricer.market.nearest_correlation import nearest_correlation

IDS = ("A", "B", "C")


def matrix(ab, ac, bc):
    return np.array([[1.0, ab, ac], [ab, 1.0, bc], [ac, bc, 1.0]])


def test_a_good_matrix_is_kept_to_the_bit():
    given = matrix(0.5, 0.3, -0.2)
    kept, repair = checked(IDS, given)
    assert repair is None
    np.testing.assert_array_equal(kept.matrix, given)


@pytest.mark.parametrize("given", [matrix(1.0, 1.0, 1.0), matrix(1.0, -1.0, -1.0)])
def test_perfect_correlation_is_no_fault(given):
    assert checked(IDS, given)[1] is None


def test_a_slightly_impossible_matrix_is_repaired_and_told():
    given = matrix(0.9, 0.7, 0.3)
    kept, repair = checked(IDS, given)
    # Row NC-X1 of tests/reference/nearest_correlation.csv.
    np.testing.assert_allclose(
        kept.matrix[np.triu_indices(3, 1)], [0.8945752920, 0.6966207666, 0.3025436001], atol=1e-8
    )
    assert repair.smallest_eigenvalue == pytest.approx(-0.007352, abs=1e-6)
    assert repair.distance == pytest.approx(0.00972795734, abs=1e-8)
    assert repair.pair == ("A", "B")
    assert (repair.before, repair.after) == (0.9, kept.matrix[0, 1])
    assert repair.largest_change == pytest.approx(0.0054247080, abs=1e-8)


def test_a_repaired_matrix_can_be_factored():
    kept, _ = checked(IDS, matrix(0.9, 0.7, 0.3))
    assert np.linalg.eigvalsh(kept.matrix)[0] >= 1e-10
    np.linalg.cholesky(kept.matrix)
    np.testing.assert_array_equal(np.diag(kept.matrix), 1.0)
    np.testing.assert_array_equal(kept.matrix, kept.matrix.T)


def test_a_matrix_too_far_from_any_is_refused_with_the_repair():
    with pytest.raises(CorrelationError) as caught:
        checked(IDS, matrix(0.9, 0.8, -0.7))
    assert str(caught.value) == (
        "the correlations contradict each other (smallest eigenvalue -0.6028): the nearest correlation matrix moves "
        "A / B from 0.9000 to 0.5808, more than the limit of 0.1"
    )
    assert caught.value.repair.largest_change == pytest.approx(0.3191544, abs=1e-7)
    assert str(pickle.loads(pickle.dumps(caught.value))) == str(caught.value)


def test_the_limit_decides():
    given = matrix(0.9, 0.7, 0.3)
    change = checked(IDS, given)[1].largest_change
    assert checked(IDS, given, limit=change * 1.001)[1] is not None
    with pytest.raises(CorrelationError):
        checked(IDS, given, limit=change * 0.999)


@pytest.mark.parametrize(
    ("entry", "value", "message"),
    [
        ((0, 1), 0.4, "the correlation of B with A is 0.5, but that of A with B 0.4"),
        ((1, 1), 0.9, "the correlation of B with itself must be 1; got 0.9"),
        ((0, 2), np.nan, "the correlation of C with A is not a finite number"),
    ],
)
def test_a_malformed_matrix_is_refused_with_the_pair(entry, value, message):
    given = matrix(0.5, 0.3, 0.2)
    given[entry] = value
    with pytest.raises(ValueError) as caught:
        checked(IDS, given)
    assert str(caught.value) == message


def test_entries_beyond_one_and_wrong_shapes_are_refused():
    with pytest.raises(ValueError, match=r"the correlation of B with A must lie between -1 and 1; got 1\.2"):
        checked(IDS, matrix(1.2, 0.0, 0.0))
    with pytest.raises(ValueError, match=r"shape \(3, 3\) does not hold the correlations of 2 ids"):
        checked(IDS[:2], matrix(0.5, 0.3, 0.2))
    with pytest.raises(ValueError, match="1 different ids"):
        CorrelationMatrix(("A", "A"), np.eye(2))


def test_a_submatrix_has_the_order_asked_for():
    kept, _ = checked(IDS, matrix(0.5, 0.3, -0.2))
    np.testing.assert_array_equal(kept.sub(("C", "A")), [[1.0, 0.3], [0.3, 1.0]])
    assert "C" in kept and "D" not in kept
    with pytest.raises(KeyError, match="does not hold D, E"):
        kept.sub(("A", "D", "E"))


def test_a_checked_matrix_cannot_be_changed_nor_changes_what_was_given():
    given = matrix(0.5, 0.3, -0.2)
    kept, _ = checked(IDS, given)
    with pytest.raises(ValueError, match="read-only"):
        kept.matrix[0, 1] = 0.9
    given[0, 1] = 0.9
    assert kept.matrix[0, 1] == 0.5


def test_the_nearest_matrix_needs_a_symmetric_one():
    for bad in (np.array([[1.0, 0.5], [0.4, 1.0]]), np.ones((2, 3)), np.array([[np.nan]])):
        with pytest.raises(ValueError, match="square, symmetric, finite"):
            nearest_correlation(bad)


def test_the_answer_for_two_hundred_underlyings_is_optimal():
    """The optimality conditions of the nearest matrix (Higham 2002, theorem 2.4), on a noisy one-factor matrix."""
    rng = np.random.default_rng(200)
    loads = rng.uniform(0.3, 0.9, 200)
    noise = 0.05 * rng.standard_normal((200, 200))
    given = np.clip(np.outer(loads, loads) + noise + noise.T, -1.0, 1.0)
    np.fill_diagonal(given, 1.0)
    nearest = nearest_correlation(given)
    assert np.linalg.eigvalsh(nearest)[0] > -1e-12
    # X = (A + diag y)+ means that S = X - A - diag y is positive semi-definite and X S = 0;
    # the diagonal of X S = 0 gives y.
    slack = nearest - given - np.diag(np.diag(nearest @ (nearest - given)))
    assert np.linalg.eigvalsh(slack)[0] > -1e-9
    assert np.abs(nearest @ slack).max() < 1e-9
