"""One smile: derivatives, wings, density, jump wings, level-skew-curvature."""

import math

import numpy as np
import pytest
import QuantLib as ql

from pricer.market.black import call
from pricer.market.svi import JumpWings, SviSlice, butterfly
from pricer.market.svi_repair import is_butterfly_free, least_butterfly, repaired

SMILE = SviSlice(0.01, 0.08, -0.45, 0.05, 0.2)
STRIKES = np.linspace(-0.8, 0.8, 17)


def test_total_variance_is_that_of_quantlib():
    section = ql.SviSmileSection(1.0, 1.0, [SMILE.a, SMILE.b, SMILE.sigma, SMILE.rho, SMILE.m])
    wanted = [section.variance(float(np.exp(k))) for k in STRIKES]
    np.testing.assert_allclose(SMILE.total_variance(STRIKES), wanted, rtol=1e-12)


def test_derivatives_are_those_of_total_variance():
    h = 1e-4
    value, slope, curvature = SMILE.derivatives(STRIKES)
    up, down = SMILE.total_variance(STRIKES + h), SMILE.total_variance(STRIKES - h)
    np.testing.assert_allclose(value, SMILE.total_variance(STRIKES), rtol=1e-15)
    np.testing.assert_allclose(slope, (up - down) / (2 * h), atol=1e-8)
    np.testing.assert_allclose(curvature, (up - 2 * value + down) / h**2, atol=1e-6)


def test_g_is_the_density_of_the_level_over_that_of_a_lognormal_with_the_same_deviation():
    """Breeden & Litzenberger (1978): the second derivative of the call price in strike, by finite differences."""
    strikes, h = np.exp(STRIKES), 1e-4

    def price(strike):
        k = np.log(strike)
        return call(k, np.sqrt(SMILE.total_variance(k)))

    density = (price(strikes + h) - 2 * price(strikes) + price(strikes - h)) / h**2
    deviation = np.sqrt(SMILE.total_variance(STRIKES))
    d2 = -STRIKES / deviation - 0.5 * deviation
    lognormal = np.exp(-0.5 * d2 * d2) / (np.sqrt(2 * np.pi) * deviation * strikes)
    np.testing.assert_allclose(density / lognormal, SMILE.butterfly(STRIKES), atol=2e-4)


def test_wings_are_the_slopes_far_out():
    left, right = SMILE.wings
    far = 1e4
    assert (SMILE.total_variance(-far - 1) - SMILE.total_variance(-far)) == pytest.approx(left, rel=1e-6)
    assert (SMILE.total_variance(far + 1) - SMILE.total_variance(far)) == pytest.approx(right, rel=1e-6)


def test_the_minimum_is_the_least_total_variance():
    assert np.min(SMILE.total_variance(np.linspace(-1, 1, 200_001))) == pytest.approx(SMILE.minimum, rel=1e-9)


@pytest.mark.parametrize("m", [0.05, -0.3, 0.0])
def test_jump_wings_and_back_is_the_same_slice(m):
    smile = SviSlice(0.01, 0.08, -0.45, m, 0.2)
    back = SviSlice.from_jump_wings(smile.jump_wings(0.75))
    np.testing.assert_allclose(back.total_variance(STRIKES), smile.total_variance(STRIKES), rtol=1e-10)


def test_jump_wings_of_a_symmetric_slice_and_back():
    """Minimum at the forward's own strike: beta is 0 and m with it (Gatheral & Jacquier 2014, lemma 3.2)."""
    jw = SviSlice(0.01, 0.08, -0.45, 0.0, 0.2).jump_wings(1.0)
    straight = JumpWings(jw.variance, 0.5 * (jw.call_wing - jw.put_wing) / 2, jw.put_wing, jw.call_wing, 0.02, 1.0)
    back = SviSlice.from_jump_wings(straight)
    assert back.m == pytest.approx(0.0, abs=1e-12)
    for name in ("variance", "skew", "put_wing", "call_wing", "minimum_variance"):
        assert getattr(back.jump_wings(1.0), name) == pytest.approx(getattr(straight, name), rel=1e-9)


def test_jump_wings_that_no_slice_has_are_refused():
    with pytest.raises(ValueError, match="no slice has the skew and wings"):
        SviSlice.from_jump_wings(JumpWings(0.04, 0.9, 0.5, 0.5, 0.03, 1.0))


@pytest.mark.parametrize(
    ("level", "slope", "curvature"), [(0.04, -0.03, 0.06), (0.02, 0.01, 0.2), (0.3, -0.2, 0.15), (0.04, 0.0, 0.05)]
)
def test_level_slope_and_curvature_at_the_forward_are_met(level, slope, curvature):
    found = SviSlice.from_forward(level, slope, curvature).derivatives(0.0)
    np.testing.assert_allclose(found, (level, slope, curvature), rtol=1e-10, atol=1e-15)


def test_without_a_curvature_the_slice_meets_level_and_slope_and_never_falls_below_zero():
    smile = SviSlice.from_forward(0.04, -0.05)
    value, slope, _ = smile.derivatives(0.0)
    assert (float(value), float(slope)) == pytest.approx((0.04, -0.05), rel=1e-12)
    assert smile.minimum > 0.0


def test_no_slope_and_no_curvature_is_flat():
    assert SviSlice.from_forward(0.04, 0.0) == SviSlice.flat(0.04)
    np.testing.assert_array_equal(SviSlice.flat(0.04).total_variance(STRIKES), 0.04)
    np.testing.assert_array_equal(SviSlice.flat(0.04).butterfly(STRIKES), 1.0)


def test_a_concave_quote_gets_the_least_curvature_there_is():
    _, slope, curvature = SviSlice.from_forward(0.04, -0.03, -0.5).derivatives(0.0)
    assert slope == pytest.approx(-0.03, rel=1e-10)
    assert 0.0 < curvature < 0.001


@pytest.mark.parametrize(
    "numbers",
    [(0.01, -0.1, 0, 0, 1), (0.01, 0.1, 1.1, 0, 1), (0.01, 0.1, 0, 0, 0), (math.nan, 0.1, 0, 0, 1), (-1, 0.1, 0, 0, 1)],
)
def test_parameters_that_make_no_smile_are_refused(numbers):
    with pytest.raises(ValueError, match=r"slice needs|must not be negative"):
        SviSlice(*numbers)


def test_without_variance_g_is_one():
    np.testing.assert_array_equal(butterfly(np.array([0.0, 1.0]), np.zeros(2), np.zeros(2), np.zeros(2)), 1.0)


def test_the_least_g_is_found_between_the_points_searched():
    smile = SviSlice(0.002, 0.12, 0.4, 0.3, 0.1)
    k, g = least_butterfly(smile, 1.5)
    dense = smile.butterfly(np.linspace(-1.5, 1.5, 400_001))
    assert g == pytest.approx(dense.min(), abs=1e-8)
    assert smile.butterfly(k) == pytest.approx(g, abs=1e-12)


def test_a_sound_slice_is_not_repaired():
    assert repaired(SMILE, 1.0, 2.0) is SMILE


@pytest.mark.parametrize(
    "smile",
    [
        SviSlice(0.0, 2.0, -0.5, 0.0, 0.1),
        SviSlice(-0.041, 0.1331, 0.306, 0.3586, 0.4153),
        SviSlice(0.001, 0.3, -0.6, 0.4, 0.05),
    ],
)
def test_a_repaired_slice_has_no_butterfly_arbitrage_and_the_level_it_had(smile):
    assert not is_butterfly_free(smile, 3.0)
    found = repaired(smile, 1.0, 3.0)
    assert is_butterfly_free(found, 3.0)
    assert float(found.total_variance(0.0)) == pytest.approx(float(smile.total_variance(0.0)), rel=1e-9)
