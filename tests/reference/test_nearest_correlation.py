"""Nearest correlation matrices against published digits and against alternating projections."""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np
import pytest

from pricer.market.nearest_correlation import nearest_correlation

# Columns: input rows separated by ; and entries by |, value = upper triangle of the nearest
# correlation matrix row by row. Every row names its source: Higham (2002) as quoted in
# QuantLib's test suite, or constructed and computed by two independent routes.
with (Path(__file__).parent / "nearest_correlation.csv").open(encoding="utf-8", newline="") as file:
    ROWS = list(csv.DictReader(file))


def given(row):
    return np.array([[float(x) for x in line.split("|")] for line in row["input_matrix_rows"].split(";")])


def alternating_projections(matrix):
    """Higham (2002), algorithm 3.3: projections on both sets in turn, with Dykstra's correction."""
    y, correction = matrix.copy(), np.zeros_like(matrix)
    for _ in range(20_000):
        r = y - correction
        values, vectors = np.linalg.eigh(r)
        x = (vectors * np.maximum(values, 0.0)) @ vectors.T
        correction = x - r
        previous, y = y, x.copy()
        np.fill_diagonal(y, 1.0)
        if np.abs(y - previous).max() < 1e-14:
            break
    return y


@pytest.mark.parametrize("row", ROWS, ids=[row["case_id"] for row in ROWS])
def test_published_nearest_matrices_are_found(row):
    matrix = given(row)
    nearest = nearest_correlation(matrix)
    wanted = [float(x) for x in row["value"].split("|")]
    np.testing.assert_allclose(nearest[np.triu_indices(len(matrix), 1)], wanted, rtol=0, atol=float(row["tolerance"]))
    assert np.linalg.norm(nearest - matrix) == pytest.approx(
        float(row["frobenius_distance"]), abs=float(row["tolerance"])
    )


@pytest.mark.parametrize("row", ROWS, ids=[row["case_id"] for row in ROWS])
def test_newton_and_alternating_projections_agree(row):
    matrix = given(row)
    np.testing.assert_allclose(nearest_correlation(matrix), alternating_projections(matrix), rtol=0, atol=1e-10)


def test_an_answer_known_by_symmetry():
    """All correlations -1 among n: by symmetry the answer is equicorrelated, and -1/(n-1) is the least that can be."""
    for n in (3, 7):
        nearest = nearest_correlation(2.0 * np.eye(n) - np.ones((n, n)))
        np.testing.assert_allclose(nearest, (np.eye(n) * n - 1.0) / (n - 1.0), atol=1e-10)
