"""The implied surface between, before and beyond its expiries, and what it keeps of its quotes."""

from datetime import date, timedelta

import numpy as np
import pytest

from pricer.market.arbitrage import surface_violations
from pricer.market.implied_surface import ImpliedSurface
from pricer.market.smile_quotes import SmileParameters, SmileQuotes
from pricer.market.svi import SviSlice
from pricer.market.volatility import VolatilityCurve
from tests.unit.smiles import TODAY, day, smiles

SURFACE = ImpliedSurface.from_quotes(TODAY, smiles(3, days=(30, 182, 730)))
K = np.linspace(-0.4, 0.4, 9)


def test_at_an_expiry_the_surface_is_that_expirys_slice():
    for time, smile in zip(SURFACE.times, SURFACE.slices, strict=True):
        np.testing.assert_allclose(SURFACE.total_variance(K, time), smile.total_variance(K), rtol=1e-14)


def test_total_variance_is_linear_in_time_between_expiries_at_fixed_log_moneyness():
    (s, t), (early, late) = SURFACE.times[:2], SURFACE.slices[:2]
    wanted = 0.3 * early.total_variance(K) + 0.7 * late.total_variance(K)
    np.testing.assert_allclose(SURFACE.total_variance(K, s + 0.7 * (t - s)), wanted, rtol=1e-13)


def test_before_the_first_expiry_each_strike_keeps_its_volatility():
    first = SURFACE.volatility(K, SURFACE.times[0])
    for time in (0.0, 1e-6, 0.5 * SURFACE.times[0]):
        np.testing.assert_allclose(SURFACE.volatility(K, time), first, rtol=1e-12)


def test_after_the_last_expiry_the_smile_keeps_its_shape_in_standard_deviations():
    last = SURFACE.times[-1]
    np.testing.assert_allclose(SURFACE.volatility(2.0 * K, 4.0 * last), SURFACE.volatility(K, last), rtol=1e-12)
    assert SURFACE.volatility(0.0, 3.0 * last) == pytest.approx(float(SURFACE.volatility(0.0, last)), rel=1e-12)


@pytest.mark.parametrize("time", [0.02, 0.3, 1.5, 2.5, 6.0])
def test_derivatives_are_those_of_total_variance(time):
    h, at = 1e-4, SURFACE.derivatives(K, time)
    up, mid, down = (SURFACE.total_variance(K + x, time) for x in (h, 0.0, -h))
    np.testing.assert_allclose(at.variance, mid, rtol=1e-15)
    np.testing.assert_allclose(at.slope, (up - down) / (2 * h), atol=1e-7)
    np.testing.assert_allclose(at.curvature, (up - 2 * mid + down) / h**2, atol=1e-5)
    h = 1e-6
    later, earlier = SURFACE.total_variance(K, time + h), SURFACE.total_variance(K, time - h)
    np.testing.assert_allclose(at.speed, (later - earlier) / (2 * h), rtol=1e-6)


def test_shapes_broadcast():
    at = SURFACE.derivatives(K, np.array([[0.1], [1.0], [5.0]]))
    assert all(values.shape == (3, K.size) for values in at)
    assert SURFACE.butterfly(K, np.array([[0.1], [1.0]])).shape == (2, K.size)
    assert SURFACE.total_variance(0.0, 1.0).shape == ()
    np.testing.assert_array_equal(at.variance[1], SURFACE.total_variance(K, 1.0))


def test_the_flat_surface_is_the_curve_at_every_strike():
    dates = [date(2026, 12, 18), date(2027, 6, 18), date(2028, 12, 15)]
    curve = VolatilityCurve.from_quotes(TODAY, dates, [0.24, 0.21, 0.22])
    flat = ImpliedSurface.flat(curve)
    for time in (0.01, 0.049, 0.3, 1.0, 2.0, 7.0):
        np.testing.assert_allclose(flat.total_variance(K, time), curve.variance_at(time), rtol=1e-13)
    assert flat.dates == curve.dates and flat.last_date == curve.last_date and flat.fit_errors() == ()
    assert not flat.is_extrapolated(dates[-1]) and flat.is_extrapolated(dates[-1] + timedelta(days=1))


@pytest.mark.parametrize("index", [True, False])
@pytest.mark.parametrize("seed", range(3))
def test_smooth_smiles_from_a_week_to_five_years_are_met_to_a_tenth_of_a_vol_point(seed, index):
    surface = ImpliedSurface.from_quotes(TODAY, smiles(seed, index=index))
    assert max(np.abs(errors).max() for errors in surface.fit_errors()) < 1.5e-3  # 2.2 deviations out
    assert max(np.abs(errors[2:-1]).max() for errors in surface.fit_errors()) < 1e-3  # within 1.3 deviations
    assert surface_violations(surface) == ()


def test_fit_errors_are_surface_less_quote():
    for quote, time, errors in zip(SURFACE.quotes, SURFACE.times, SURFACE.fit_errors(), strict=True):
        np.testing.assert_array_equal(errors, SURFACE.volatility(quote.log_moneyness, time) - quote.volatilities)


def test_parameters_without_arbitrage_are_taken_as_they_are():
    given = [SmileParameters(day(91), 0.2, -0.2, 0.5), SmileParameters(day(365), 0.21, -0.12, 0.2)]
    surface = ImpliedSurface.from_quotes(TODAY, given)
    for smile, time, found in zip(given, surface.times, surface.slices, strict=True):
        assert found == smile.slice(time)


def test_parameters_that_fall_in_time_are_raised():
    given = [SmileParameters(day(182), 0.3, -0.2, 0.5), SmileParameters(day(365), 0.18, -0.12, 0.2)]
    surface = ImpliedSurface.from_quotes(TODAY, given)
    assert surface.volatility(0.0, surface.times[1]) == pytest.approx(0.3 * np.sqrt(182 / 365), abs=2e-3)
    assert surface_violations(surface) == ()


def test_one_expiry_with_one_quote_is_enough():
    surface = ImpliedSurface.from_quotes(TODAY, [SmileQuotes.of(day(365), 0.1, 0.25)])
    np.testing.assert_allclose(surface.volatility(K, np.array([[0.1], [1.0], [9.0]])), 0.25, rtol=1e-14)


@pytest.mark.parametrize("days", [(0,), (30, 30), (60, 30)])
def test_expiries_that_do_not_increase_after_the_valuation_date_are_refused(days):
    with pytest.raises(ValueError, match="expiry dates must increase and lie after the valuation date 2026-11-30"):
        ImpliedSurface.from_quotes(TODAY, [SmileQuotes.of(day(d), 0.0, 0.2) for d in days])


def test_a_surface_without_expiries_is_refused():
    with pytest.raises(ValueError, match="at least one expiry"):
        ImpliedSurface.from_quotes(TODAY, [])
    with pytest.raises(ValueError, match="do not fit"):
        ImpliedSurface(TODAY, (day(1),), (1 / 365,), ())
    with pytest.raises(ValueError, match="must increase"):
        ImpliedSurface(TODAY, (day(2), day(1)), (2 / 365, 1 / 365), (SviSlice.flat(0.1), SviSlice.flat(0.2)))


def test_time_before_the_valuation_date_is_refused():
    with pytest.raises(ValueError, match="before the valuation date"):
        SURFACE.total_variance(0.0, -0.1)
