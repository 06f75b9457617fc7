"""Arithmetic baskets, of positive and of signed weights, against published values."""

from __future__ import annotations

from pricer.contracts.aggregate import Aggregate
from pricer.engines.closed_form.basket_quadrature import BASKET_QUADRATURE
from pricer.engines.closed_form.lower_bound import LOWER_BOUND
from pricer.engines.closed_form.upper_bound import UPPER_BOUND
from tests.reference.checker import call_or_put, check, numbers, problem_of, read, value_by

ROWS = read("basket_multi_asset.csv")


def basket(row):
    return problem_of(row, Aggregate.weighted_sum(tuple(numbers(row["weights"]))), call_or_put(row))


def test_baskets_by_quadrature_meet_published_values():
    check(ROWS, lambda row: value_by(BASKET_QUADRATURE, basket(row)))


def test_the_quadratures_own_error_covers_the_distance_to_recomputed_values():
    for row in ROWS:
        reference = BASKET_QUADRATURE.reference(basket(row))
        assert abs(reference.value - float(row["recomputed_value"])) <= reference.error, row["case_id"]


def test_the_bounds_enclose_the_published_values():
    for row in ROWS:
        tolerance = float(row["tolerance"])
        assert value_by(LOWER_BOUND, basket(row)) <= float(row["value"]) + tolerance, row["case_id"]
        assert value_by(UPPER_BOUND, basket(row)) >= float(row["value"]) - tolerance, row["case_id"]
