"""Implied surface in, local-volatility paths out, implied volatilities back; and the limits of the surface."""

from datetime import date, timedelta

import numpy as np
import pytest
from scipy.stats import norm

from pricer.core.randomness import Purpose, stream
from pricer.market.black import implied_deviation
from pricer.market.implied_surface import ImpliedSurface
from pricer.market.local_vol_surface import LocalVolSurface
from pricer.market.smile_quotes import SmileParameters
from pricer.market.volatility import VolatilityCurve
from pricer.simulation.local_vol_sampler import local_vol_levels

TODAY = date(2026, 11, 30)
DAYS = (30, 91, 182, 365, 730)
SMILES = {  # volatility at the forward, skew and curvature per expiry
    "equity index": [(0.18, -0.9, 3.0), (0.185, -0.5, 1.5), (0.19, -0.35, 0.8), (0.2, -0.25, 0.4), (0.21, -0.17, 0.2)],
    "single share": [(0.35, -0.3, 2.0), (0.34, -0.2, 1.0), (0.33, -0.15, 0.6), (0.32, -0.1, 0.3), (0.31, -0.08, 0.15)],
    "upward skew": [(0.25, 0.4, 1.5), (0.26, 0.25, 1.0), (0.27, 0.2, 0.5), (0.27, 0.15, 0.3), (0.27, 0.1, 0.15)],
}


def streams(n: int = 16) -> list[np.random.Generator]:
    return [stream(1, "round trip", Purpose.PRICE, r) for r in range(n)]


@pytest.mark.parametrize("name", SMILES)
def test_simulated_options_have_the_surfaces_own_implied_volatilities(name):
    smiles = [SmileParameters(TODAY + timedelta(days=d), *p) for d, p in zip(DAYS, SMILES[name], strict=True)]
    surface = ImpliedSurface.from_quotes(TODAY, smiles)
    local = LocalVolSurface.from_implied(surface)
    levels = local_vol_levels([local], np.eye(1), surface.times, steps=40, points=2**14, streams=streams()).astype(
        float
    )
    off = []
    for date_, time in enumerate(surface.times):
        k = norm.ppf([0.1, 0.25, 0.5, 0.75, 0.9]) * float(surface.volatility(0.0, time)) * np.sqrt(time)
        x = levels[:, date_, 0].ravel()
        puts = np.array([np.maximum(np.exp(a) - x, 0.0).mean() for a in k])
        calls = puts + 1.0 - np.exp(k)
        off.append(implied_deviation(k, calls) / np.sqrt(time) - surface.volatility(k, time))
    assert np.max(np.abs(off)) < 5e-4, f"in vol points:\n{100.0 * np.round(off, 6)}"


def test_no_forward_variance_moves_nothing():
    days = [TODAY + timedelta(days=d) for d in (365, 730)]
    curve = VolatilityCurve.from_quotes(TODAY, days, [0.2, 0.2 / np.sqrt(2.0)])
    local = LocalVolSurface.from_implied(ImpliedSurface.flat(curve))
    levels = local_vol_levels([local], np.eye(1), [1.0, 2.0], steps=8, points=1024, streams=streams(2)).astype(float)
    logs = np.log(levels[:, :, 0])
    # the least volatility that paths can have is 1 basis point a year
    assert np.max(np.abs(logs[:, 1] - logs[:, 0])) < 1e-3
    assert logs[:, 0].std() == pytest.approx(0.2, rel=5e-3)


def test_the_higher_the_surface_the_dearer_the_option():
    values = []
    for level in (0.05, 0.2, 0.4, 0.8):
        smile = SmileParameters(TODAY + timedelta(days=365), level, -0.2, 0.3)
        local = LocalVolSurface.from_implied(ImpliedSurface.from_quotes(TODAY, [smile]))
        levels = local_vol_levels([local], np.eye(1), [1.0], steps=8, points=4096, streams=streams(4)).astype(float)
        values.append(np.maximum(levels - 1.0, 0.0).mean())
        # at the forward to first order: volatility / sqrt(2 pi) (Brenner & Subrahmanyam 1988)
        assert values[-1] == pytest.approx(level / np.sqrt(2.0 * np.pi), rel=0.03)
    assert values == sorted(values)
