"""The table of fixings."""

from datetime import date

import numpy as np
import pytest

from pricer.contracts.fixings import Fixing, Fixings

MONDAY, TUESDAY = date(2026, 1, 5), date(2026, 1, 6)


def test_levels_are_found_by_name_and_day_and_missing_ones_are_nan():
    fixings = Fixings.from_rows([Fixing("VESKA", TUESDAY, 51.0), Fixing("ORLUMA", MONDAY, 99.0)])
    np.testing.assert_equal(fixings.matrix(("ORLUMA", "VESKA"), (MONDAY, TUESDAY)), [[99.0, np.nan], [np.nan, 51.0]])
    assert fixings.matrix(("ORLUMA",), ()).shape == (0, 1)


def test_a_currency_pair_is_found_either_way_round():
    fixings = Fixings.from_rows([Fixing("EURUSD", MONDAY, 1.25)])
    assert fixings.level("USDEUR", MONDAY) == 0.8
    assert fixings.level("EURUSD", MONDAY) == 1.25
    assert fixings.level("USDEUR", TUESDAY) is None


def test_a_reason_is_kept_until_the_fixing_comes():
    disrupted = Fixing("ORLUMA", MONDAY, None, "market disruption")
    assert Fixings.from_rows([disrupted]).reason("ORLUMA", MONDAY) == "market disruption"
    assert Fixings.from_rows([disrupted, Fixing("ORLUMA", MONDAY, 98.0)]).reason("ORLUMA", MONDAY) == ""


def test_two_different_levels_of_one_day_are_refused_and_a_repeated_one_is_not():
    twice = [Fixing("ORLUMA", MONDAY, 98.0), Fixing("ORLUMA", MONDAY, 98.0)]
    assert Fixings.from_rows(twice).level("ORLUMA", MONDAY) == 98.0
    with pytest.raises(ValueError, match=r"ORLUMA on 2026-01-05 is given as 97\.0 and as 98\.0"):
        Fixings.from_rows([*twice, Fixing("ORLUMA", MONDAY, 97.0)])


@pytest.mark.parametrize("level", [0.0, -1.0, float("nan"), float("inf")])
def test_a_level_that_no_price_can_have_is_refused(level):
    with pytest.raises(ValueError, match="above 0"):
        Fixing("ORLUMA", MONDAY, level)
