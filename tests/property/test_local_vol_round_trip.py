"""Implied surface in, local-volatility paths out, implied volatilities back; and the limits of the surface."""

from datetime import date, timedelta

import numpy as np
import pytest
from scipy.stats import norm

from pricer.core.randomness import Purpose, stream
from pricer.engines.local_vol_problem import FlatVolatility
from pricer.engines.local_vol_vanillas import reprice
from pricer.market.black import deviation_of_time_value, out_of_the_money, vega
from pricer.market.implied_surface import ImpliedSurface
from pricer.market.local_vol_surface import LocalVolSurface
from pricer.market.smile_quotes import SmileParameters
from pricer.market.volatility import VolatilityCurve
from pricer.simulation.local_vol_sampler import local_vol_levels
from pricer.simulation.time_grid import TimeGrid

TODAY = date(2026, 11, 30)
DAYS = (30, 91, 182, 365, 730)
SMILES = {  # volatility at the forward, skew and curvature per expiry
    "equity index": [(0.18, -0.9, 3.0), (0.185, -0.5, 1.5), (0.19, -0.35, 0.8), (0.2, -0.25, 0.4), (0.21, -0.17, 0.2)],
    "single share": [(0.35, -0.3, 2.0), (0.34, -0.2, 1.0), (0.33, -0.15, 0.6), (0.32, -0.1, 0.3), (0.31, -0.08, 0.15)],
    "upward skew": [(0.25, 0.4, 1.5), (0.26, 0.25, 1.0), (0.27, 0.2, 0.5), (0.27, 0.15, 0.3), (0.27, 0.1, 0.15)],
}


def draws() -> np.random.Generator:
    return stream(1, "round trip", Purpose.PRICE, 0)


@pytest.mark.parametrize("name", SMILES)
def test_simulated_options_have_the_surfaces_own_implied_volatilities(name):
    smiles = [SmileParameters(TODAY + timedelta(days=d), *p) for d, p in zip(DAYS, SMILES[name], strict=True)]
    surface = ImpliedSurface.from_quotes(TODAY, smiles)
    local = LocalVolSurface.from_implied(surface)
    roots = np.sqrt(np.array(surface.times))
    deltas = norm.ppf([0.05, 0.1, 0.25, 0.5, 0.75, 0.9, 0.95])
    strikes = [deltas * float(surface.volatility(0.0, t)) * r for t, r in zip(surface.times, roots, strict=True)]
    got = reprice(local, surface.times, strikes, group=name, seed=1)
    assert got.reached and got.paths == 2**19
    assert np.all(np.abs(got.means - 1.0) < 4.0 * got.mean_errors + 3e-6)
    for t, root, k, value, error in zip(surface.times, roots, strikes, got.values, got.errors, strict=True):
        deviation = deviation_of_time_value(k, value)
        off = deviation / root - surface.volatility(k, t)
        # vol points: the issue asks for 0.05 between 10 and 90 delta
        assert np.max(np.abs(off[1:-1])) < 3e-4, 100.0 * off
        assert np.max(np.abs(off)) < 5e-4, 100.0 * off
        sampling = error / (vega(k, deviation) * root)
        assert np.max(sampling[1:-1]) < 1e-4 and np.median(sampling[1:-1]) < 5e-5


def test_a_flat_surface_gives_black_prices_back():
    times, variances = np.array([0.0, 0.5, 2.0]), np.array([0.0, 0.02, 0.14])
    strikes = [np.array([-0.2, 0.0, 0.15]), np.array([-0.5, 0.1]), np.array([0.3])]
    expiries = [0.25, 1.0, 2.0]
    got = reprice(FlatVolatility.of(times, variances), expiries, strikes, group="flat", seed=1, points=1024)
    for time, k, value, error in zip(expiries, strikes, got.values, got.errors, strict=True):
        black = out_of_the_money(k, np.sqrt(np.interp(time, times, variances)))
        assert value.shape == k.shape
        # t of 30 degrees of freedom: beyond 5 standard errors once in 40,000
        assert np.all(np.abs(value - black) < 5.0 * error) and np.max(error) < 1e-4


def test_repricing_repeats_itself_to_the_last_bit_and_refuses_what_does_not_fit():
    flat = FlatVolatility.of(np.array([0.0, 1.0]), np.array([0.0, 0.04]))
    one, two, other = (
        reprice(flat, [1.0], [np.array([0.1])], group=group, seed=1, points=256).values[0][0] for group in "aab"
    )
    assert one == two != other
    with pytest.raises(ValueError, match="1 expiries do not fit 2 rows"):
        reprice(flat, [1.0], [np.zeros(1), np.zeros(1)], group="a", seed=1)
    with pytest.raises(ValueError, match="dates must be finite, above 0 and increase"):
        reprice(flat, [1.0, 1.0], [np.zeros(1), np.zeros(1)], group="a", seed=1)


def test_no_forward_variance_moves_nothing():
    days = [TODAY + timedelta(days=d) for d in (365, 730)]
    curve = VolatilityCurve.from_quotes(TODAY, days, [0.2, 0.2 / np.sqrt(2.0)])
    local = LocalVolSurface.from_implied(ImpliedSurface.flat(curve))
    grid = TimeGrid.of([1.0, 2.0], steps=8)
    levels = local_vol_levels([local], np.eye(1), grid, points=1024, stream=draws(), randomisations=2).astype(float)
    logs = np.log(levels[:, :, 0])
    # the least volatility that paths can have is 1 basis point a year
    assert np.max(np.abs(logs[:, 1] - logs[:, 0])) < 1e-3
    assert logs[:, 0].std() == pytest.approx(0.2, rel=5e-3)


def test_the_higher_the_surface_the_dearer_the_option():
    values = []
    for level in (0.05, 0.2, 0.4, 0.8):
        smile = SmileParameters(TODAY + timedelta(days=365), level, -0.2, 0.3)
        local = LocalVolSurface.from_implied(ImpliedSurface.from_quotes(TODAY, [smile]))
        values.append(reprice(local, [1.0], [np.zeros(1)], group="level", seed=1, points=1024).values[0][0])
        # at the forward to first order: volatility / sqrt(2 pi) (Brenner & Subrahmanyam 1988)
        assert values[-1] == pytest.approx(level / np.sqrt(2.0 * np.pi), rel=0.03)
    assert values == sorted(values)
