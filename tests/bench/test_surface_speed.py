"""Fifty underlyings, eight expiries, nine strikes: seconds to fit, check and turn into local volatility.

Run alone: ``python -m pytest -m bench -s tests/bench/test_surface_speed.py``.
"""

from __future__ import annotations

import subprocess
import sys
import time

import numpy as np
import pytest
from scipy.optimize import least_squares

from pricer.market.arbitrage import quote_violations, surface_violations
from pricer.market.checked_surface import VolatilityQuote, build_surface
from pricer.market.dividends import CashDividend
from pricer.market.implied_surface import ImpliedSurface
from pricer.market.local_vol_surface import LocalVolSurface
from tests.unit.smiles import TODAY, day, smiles
from tests.unit.surface_cases import price

pytestmark = pytest.mark.bench

UNDERLYINGS = 50
CASH = tuple(CashDividend(day(150 + 365 * i), 2.0) for i in range(5))


def quotes_of(seed, noise):
    return smiles(seed, index=seed % 2 == 0, noise=noise)


def on_price(quotes):
    return [
        VolatilityQuote(q.expiry_date, float(v), relative_strike=float(np.exp(k)))
        for q in quotes
        for k, v in zip(q.log_moneyness, q.volatilities, strict=True)
    ]


def plain_fit(quotes):
    """Side by side: raw SVI by SciPy's least squares, one start per slice, no arbitrage bounds, no checks."""
    for quote in quotes:
        time_ = (quote.expiry_date - TODAY).days / 365
        k, w = quote.log_moneyness, quote.volatilities**2 * time_
        s = float(np.sqrt(np.interp(0.0, k, w)))

        def residuals(p, k=k, w=w, s=s):
            a, b, rho, m, sigma = p
            return (s * s * (a + b * (rho * (k / s - m) + np.sqrt((k / s - m) ** 2 + sigma**2))) - w) / s

        bounds = ([-1.0, 0.0, -0.999, -5.0, 0.05], [2.0, 3.0, 0.999, 5.0, 5.0])
        least_squares(residuals, [0.5, 0.2, -0.3, 0.0, 1.0], bounds=bounds)


def seconds(work, items):
    start = time.perf_counter()
    made = [work(item) for item in items]
    return time.perf_counter() - start, made


@pytest.mark.parametrize("cash", [(), CASH])
@pytest.mark.parametrize("noise", [0.0, 0.002])
def test_fifty_checked_surfaces_take_no_longer_than_bare_least_squares(noise, cash):
    smiles_ = [quotes_of(seed, noise) for seed in range(UNDERLYINGS)]
    asked = [on_price(quotes) for quotes in smiles_]
    build_surface("A", price(cash), TODAY, asked[0])  # compiled, or read from disk, once
    # Turn and turn about in five parts: another process's work falls on both alike.
    ours, theirs, surfaces = [], [], []
    for part in range(0, UNDERLYINGS, 10):
        spent, made = seconds(lambda quotes: build_surface("A", price(cash), TODAY, quotes), asked[part : part + 10])
        surfaces += made
        ours.append(spent)
        theirs.append(5.0 * seconds(plain_fit, smiles_[part : part + 2])[0])
    errors = 100.0 * np.abs([fit.error for s in surfaces for fit in s.quotes if fit.in_the_middle])
    print(
        f"\nnoise {100 * noise:.1f} vol points, {len(cash)} cash dividends: {sum(ours):.2f} s built and checked, "
        f"{sum(theirs):.2f} s bare least squares, ratio {sum(ours) / sum(theirs):.2f}; error between 10 and 90 delta "
        f"in vol points: median {np.median(errors):.4f}, largest {errors.max():.4f}; "
        f"{sum(not s.passes for s in surfaces)} fail, {sum(len(s.violations) for s in surfaces)} violations"
    )
    assert sum(ours) < sum(theirs)


@pytest.mark.parametrize("noise", [0.0, 0.002])
def test_where_the_time_goes(noise):
    quotes = [quotes_of(seed, noise) for seed in range(UNDERLYINGS)]
    ImpliedSurface.from_quotes(TODAY, quotes[0])
    fit, surfaces = seconds(lambda q: ImpliedSurface.from_quotes(TODAY, q), quotes)
    dupire, local = seconds(LocalVolSurface.from_implied, surfaces)
    check, found = seconds(lambda s: (*quote_violations(TODAY, s.quotes), *surface_violations(s)), surfaces)
    print(
        f"\nnoise {100 * noise:.1f} vol points: fit {fit:.2f} s, local volatility {dupire:.2f} s, "
        f"checks {check:.2f} s; {sum(map(len, found))} violations; table {local[0].values.shape}"
    )
    assert all(np.all(np.isfinite(table.values)) for table in local)


def test_importing_surfaces_loads_no_compiler():
    """And the first fit of a fresh process, whose kernel is read from disk after the first time ever."""
    script = (
        "import sys, time; a = time.perf_counter(); import pricer.market.checked_surface; b = time.perf_counter();"
        "loaded = 'numba' in sys.modules; from tests.unit.smiles import smiles, TODAY;"
        "from pricer.market.implied_surface import ImpliedSurface; c = time.perf_counter();"
        "ImpliedSurface.from_quotes(TODAY, smiles(1)); d = time.perf_counter(); print(int(loaded), b - a, d - c)"
    )
    for _ in range(2):
        done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True)
        loaded, importing, first = map(float, done.stdout.split())
        print(f"\nimport {importing:.2f} s, first surface of the process {first:.2f} s")
    assert not loaded
