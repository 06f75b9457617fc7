"""Multivariate normal probabilities against tables, orthant formulas and recomputed values."""

from __future__ import annotations

import numpy as np

from pricer.engines.closed_form.multivariate_normal import cdf
from tests.reference.checker import check, correlation, numbers, read

ROWS = read("multivariate_normal_cdf.csv")


def probability(row):
    n, text = int(row["n"]), row["upper_limits"]
    limits = np.full(n, float(text.split()[0])) if text.endswith("each") else numbers(text)
    return cdf(limits, correlation(row["corr_upper"], n))


def test_normal_probabilities_meet_published_values():
    check(ROWS, lambda row: probability(row).value)


def test_the_stated_errors_cover_the_distance_to_the_values():
    # Values are printed to 6 digits at the least and to 13 at the most.
    for row in ROWS:
        found, printed = probability(row), float(row["tolerance"])
        assert abs(found.value - float(row["value"])) <= found.error + printed, row["case_id"]
        assert found.error <= 1e-9, row["case_id"]
