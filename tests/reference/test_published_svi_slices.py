"""The slices, arbitrage and repairs that Gatheral & Jacquier (2014) print, and test values of the same slice.

``svi_slices.csv`` names the source of every row. "Vogt" is the smile of their example 3.1, which is
arbitrageable; t is 1 year.
"""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import brentq

from pricer.market.svi import JumpWings, SviSlice
from pricer.market.svi_repair import is_butterfly_free, least_butterfly, repaired
from tests.reference.checker import check, read

ROWS = read("svi_slices.csv")
VOGT = SviSlice(-0.041, 0.1331, 0.306, 0.3586, 0.4153)


def slice_of(row):
    return SviSlice(*(float(row[name]) for name in ("a", "b", "rho", "m", "sigma")))


def rows(word):
    return [row for row in ROWS if word in row["measure"]]


def at(row):
    return float(row["measure"].partition("k=")[2].rstrip(")"))


JUMP_WINGS = {
    "SVI-JW v": lambda jw: jw.variance,
    "SVI-JW psi": lambda jw: jw.skew,
    "SVI-JW p": lambda jw: jw.put_wing,
    "SVI-JW v_tilde": lambda jw: jw.minimum_variance,
    "repair c' = p + 2 psi": lambda jw: jw.put_wing + 2.0 * jw.skew,
}


def value_of(row):
    smile, measure = slice_of(row), row["measure"]
    if measure in JUMP_WINGS:
        return JUMP_WINGS[measure](smile.jump_wings(float(row["t"])))
    if measure.startswith("total variance"):
        return float(smile.total_variance(at(row)))
    if measure.startswith("g("):
        return float(smile.butterfly(at(row)))
    if measure.startswith("min over k"):
        return least_butterfly(smile, 3.0)[1]
    if measure.startswith("right end"):
        return brentq(lambda k: float(smile.butterfly(k)), least_butterfly(smile, 3.0)[0], 3.0, xtol=1e-12)
    raise AssertionError(f"no test for {measure}")


def test_every_row_is_met():
    check(ROWS, value_of)


def test_the_repairs_printed_in_example_5_1_are_reached_from_their_jump_wings():
    """(c, v~) of the two repairs as printed; the raw parameters in the table were found by inverting them."""
    jw = VOGT.jump_wings(1.0)
    for case, call_wing, least in (
        ("SV-Vfix-ming", 0.3493158, 0.01548182),
        ("SV-Vopt-ming", 0.8564763, 0.0116249),
    ):
        printed = JumpWings(jw.variance, jw.skew, jw.put_wing, call_wing, least, 1.0)
        smile = SviSlice.from_jump_wings(printed)
        row = next(row for row in ROWS if row["case_id"] == case)
        k = np.linspace(-1.5, 1.5, 31)
        # Seven printed digits of c and v~ leave about six of the total variance.
        np.testing.assert_allclose(smile.total_variance(k), slice_of(row).total_variance(k), rtol=0, atol=2e-7)
        assert is_butterfly_free(smile, 3.0)


def test_our_repair_moves_the_smile_no_further_than_the_published_optimum():
    """Distance: squares of total variance within two standard deviations; the paper minimises another one."""
    ours = repaired(VOGT, 1.0, 3.0)
    theirs = slice_of(next(row for row in ROWS if row["case_id"] == "SV-Vopt-ming"))
    near = np.linspace(-2.0, 2.0, 41) * np.sqrt(float(VOGT.total_variance(0.0)))
    moved = [float(np.sum((s.total_variance(near) - VOGT.total_variance(near)) ** 2)) for s in (ours, theirs)]
    assert is_butterfly_free(ours, 3.0) and not is_butterfly_free(VOGT, 3.0)
    assert moved[0] <= moved[1] * 1.0001
    before, after = VOGT.jump_wings(1.0), ours.jump_wings(1.0)
    for name in ("variance", "skew", "put_wing"):
        assert getattr(after, name) == pytest.approx(getattr(before, name), rel=1e-10)
