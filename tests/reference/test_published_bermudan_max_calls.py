"""Bermudan best-of calls of Broadie & Glasserman (1997), Andersen & Broadie (2004), Becker, Cheridito & Jentzen (2019).

Exact values where a grid reaches (two to five assets), published 95 % intervals beyond.
"""

import pytest

from pricer.engines.early_exercise.engine import early_exercise_value
from tests.reference.checker import read
from tests.reference.early_exercise_rows import BRIEF, MODEST, bermudan_max_call, brackets, check_brackets

ROWS = read("bermudan_max_call.csv")
GRIDS = [row for row in ROWS if "grid" in row["recomputed_by"]]
PUBLISHED = [row for row in ROWS if row["published_ci_low"]]


def grid(row):
    value, tolerance = float(row["recomputed_value"]), float(row["tolerance"])
    return value - tolerance, value + tolerance


def interval(row):
    return float(row["published_ci_low"]), float(row["published_ci_high"])


def named(*cases: str):
    return [row for row in ROWS if row["case_id"] in cases]


def test_intervals_hold_the_values_of_grids():
    check_brackets(named("BM-S-2-100", "BM-A-5-100"), bermudan_max_call, grid, widest=4e-3)


@pytest.mark.long
def test_twenty_assets_lie_in_the_published_interval_and_are_known_better():
    (row,) = named("BM-S-20-100")
    value = early_exercise_value(bermudan_max_call(row), BRIEF)
    low, high = interval(row)
    assert low < value.lower < value.upper < high
    assert value.upper + 2.0 * value.upper_error - (value.lower - 2.0 * value.lower_error) < 0.5 * (high - low)


@pytest.mark.long
def test_every_grid_value_lies_in_its_interval():
    check_brackets(GRIDS, bermudan_max_call, grid, MODEST, widest=2e-3)


@pytest.mark.long
@pytest.mark.parametrize("row", PUBLISHED, ids=lambda row: row["case_id"])
def test_every_published_interval_is_met_and_narrowed(row):
    value = early_exercise_value(bermudan_max_call(row), MODEST)
    low, high = interval(row)
    assert brackets(value, low, high)
    assert value.gap < high - low
