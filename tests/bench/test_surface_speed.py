"""Fifty underlyings, eight expiries, nine strikes: seconds to fit, check and turn into local volatility.

Run alone: ``python -m pytest -m bench -s tests/bench/test_surface_speed.py``.
"""

from __future__ import annotations

import time

import numpy as np
import pytest

from pricer.market.arbitrage import quote_violations, surface_violations
from pricer.market.implied_surface import ImpliedSurface
from pricer.market.local_vol_surface import LocalVolSurface
from tests.unit.smiles import TODAY, smiles

pytestmark = pytest.mark.bench


@pytest.mark.parametrize("noise", [0.0, 0.002])
def test_the_surfaces_of_fifty_underlyings_are_built_in_two_seconds(noise):
    quotes = [smiles(seed, index=seed % 2 == 0, noise=noise) for seed in range(50)]
    ImpliedSurface.from_quotes(TODAY, quotes[0])  # compiled once
    marks = [time.perf_counter()]
    surfaces = [ImpliedSurface.from_quotes(TODAY, smile) for smile in quotes]
    marks.append(time.perf_counter())
    local = [LocalVolSurface.from_implied(surface) for surface in surfaces]
    marks.append(time.perf_counter())
    found = [(*quote_violations(TODAY, s.quotes), *surface_violations(s)) for s in surfaces]
    marks.append(time.perf_counter())
    fit, dupire, check = np.diff(marks)
    errors = 100.0 * np.abs(np.concatenate([e for surface in surfaces for e in surface.fit_errors()]))
    print(
        f"\nnoise {100 * noise:.1f} vol points: fit {fit:.2f} s, local volatility {dupire:.2f} s, "
        f"checks {check:.2f} s; "
        f"error in vol points: median {np.median(errors):.3f}, largest {errors.max():.3f}; "
        f"{sum(map(len, found))} violations; table {local[0].values.shape}"
    )
    assert fit + dupire <= 2.0
