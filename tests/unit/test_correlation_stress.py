"""The stress dial by hand."""

import numpy as np
import pytest

from pricer.market.correlation import checked
from pricer.market.correlation_stress import stressed
from tests.unit.markets import CORRELATION, IDS

MATRIX = checked(IDS, CORRELATION)[0]


def test_towards_one_and_towards_zero():
    np.testing.assert_allclose(
        stressed(MATRIX, towards_one=0.2).matrix, [[1.0, 0.6, 0.44], [0.6, 1.0, 0.52], [0.44, 0.52, 1.0]], rtol=1e-14
    )
    np.testing.assert_allclose(
        stressed(MATRIX, towards_zero=0.2).matrix, [[1.0, 0.4, 0.24], [0.4, 1.0, 0.32], [0.24, 0.32, 1.0]], rtol=1e-14
    )


def test_the_whole_way():
    np.testing.assert_array_equal(stressed(MATRIX, towards_one=1.0).matrix, np.ones((3, 3)))
    np.testing.assert_array_equal(stressed(MATRIX, towards_zero=1.0).matrix, np.eye(3))


def test_a_stress_among_some_weakens_their_ties_to_the_others():
    found = stressed(MATRIX, towards_one=0.36, ids=IDS[:2]).matrix
    np.testing.assert_allclose(found, [[1.0, 0.68, 0.24], [0.68, 1.0, 0.32], [0.24, 0.32, 1.0]], rtol=1e-14)


def test_what_is_no_stress_is_refused():
    for shares, message in (
        ({}, "a stress goes either towards one or towards zero"),
        ({"towards_one": 0.5, "towards_zero": 0.5}, "either towards one or towards zero"),
        ({"towards_one": 1.5}, r"towards_one must be a share from 0 to 1; got 1\.5"),
        ({"towards_zero": float("nan")}, "towards_zero must be a share from 0 to 1; got nan"),
        ({"towards_one": 0.5, "ids": ["NOBODY"]}, "the correlation matrix does not hold NOBODY"),
    ):
        with pytest.raises(ValueError, match=message):
            stressed(MATRIX, **shares)
