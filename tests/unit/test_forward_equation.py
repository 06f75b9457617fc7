"""Vanillas repriced from the local volatility table without simulation, and Black's formula backwards."""

import numpy as np
import pytest
from scipy.stats import norm

from pricer.market.black import call, implied_deviation, vega
from pricer.market.forward_equation import model_volatilities
from pricer.market.implied_surface import ImpliedSurface
from pricer.market.local_vol_surface import LocalVolSurface
from pricer.market.volatility import VolatilityCurve
from tests.unit.smiles import TODAY, day, smiles


def strikes(surface, time, deltas=(0.1, 0.25, 0.4, 0.5, 0.6, 0.75, 0.9)):
    """Log-strikes of these call deltas under the surface's own volatilities, by fixed point."""
    k = np.zeros(len(deltas))
    for _ in range(50):
        s = surface.volatility(k, time) * np.sqrt(time)
        k = s * (0.5 * s - norm.ppf(deltas))
    return k


def worst(surface):
    """Largest difference between model and surface of 10 to 90 delta, in volatility, over all expiries."""
    k = [strikes(surface, time) for time in surface.times]
    found = model_volatilities(LocalVolSurface.from_implied(surface), k, surface.times)
    return max(np.abs(v - surface.volatility(x, t)).max() for v, x, t in zip(found, k, surface.times, strict=True))


def test_constant_volatility_comes_back():
    curve = VolatilityCurve.from_quotes(TODAY, [day(7), day(365), day(1826)], [0.2, 0.2, 0.2])
    assert worst(ImpliedSurface.flat(curve)) < 5e-5


def test_a_term_structure_comes_back():
    curve = VolatilityCurve.from_quotes(TODAY, [day(7), day(30), day(365), day(1826)], [0.5, 0.4, 0.25, 0.3])
    assert worst(ImpliedSurface.flat(curve)) < 1e-4


@pytest.mark.parametrize("noise", [0.0, 0.001])
@pytest.mark.parametrize("index", [True, False])
@pytest.mark.parametrize("seed", range(4))
def test_skewed_surfaces_from_a_week_to_five_years_come_back_within_0_03_vol_points(seed, index, noise):
    assert worst(ImpliedSurface.from_quotes(TODAY, smiles(seed, index=index, noise=noise))) < 3e-4


@pytest.mark.parametrize("days", [(7,), (365,), (1826,), (91, 3652)])
def test_single_expiries_come_back_as_well(days):
    assert worst(ImpliedSurface.from_quotes(TODAY, smiles(1, days=days))) < 3e-4


def test_beyond_the_last_expiry_the_extrapolated_smile_comes_back():
    surface = ImpliedSurface.from_quotes(TODAY, smiles(2, days=(91, 365)))
    k = strikes(surface, 2.0)
    found = model_volatilities(LocalVolSurface.from_implied(surface, horizon=2.0), [k], [2.0])[0]
    np.testing.assert_allclose(found, surface.volatility(k, 2.0), atol=3e-4)


def test_times_that_do_not_increase_are_refused():
    local = LocalVolSurface.from_implied(ImpliedSurface.from_quotes(TODAY, smiles(1, days=(91,))))
    for k, times in (([], []), ([[0.0]], [0.0]), ([[0.0], [0.0]], [1.0, 1.0]), ([[0.0]], [0.5, 1.0])):
        with pytest.raises(ValueError, match="increasing times above 0"):
            model_volatilities(local, k, times)


def test_implied_deviations_invert_prices_and_vega_is_their_slope():
    k = np.array([-0.5, -0.1, 0.0, 0.2, 0.6])
    deviations = np.array([0.3, 0.1, 0.02, 0.4, 0.5])
    np.testing.assert_allclose(implied_deviation(k, call(k, deviations)), deviations, rtol=1e-9)
    slope = (call(k, deviations + 1e-6) - call(k, deviations - 1e-6)) / 2e-6
    np.testing.assert_allclose(vega(k, deviations), slope, atol=1e-8)


def test_prices_outside_the_bounds_have_no_volatility():
    assert np.all(np.isnan(implied_deviation([0.0, -0.1, 0.1], [1.0, 0.05, -0.01])))
