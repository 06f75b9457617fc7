"""Invented smiles for the tests of surfaces."""

from __future__ import annotations

from datetime import date, timedelta

import numpy as np

from pricer.market.smile_quotes import SmileQuotes

TODAY = date(2026, 11, 30)
#: One week to five years.
DAYS = (7, 30, 61, 91, 182, 365, 730, 1826)


def day(days):
    return TODAY + timedelta(days=days)


def smiles(seed, *, index=True, n=9, noise=0.0, days=DAYS):
    """Quotes like an index's (strong skew) or a single name's: quadratic in standard deviations, skew fading with time.

    ``noise`` : standard deviation of an error on each volatility.
    """
    rng = np.random.default_rng(seed)
    short = rng.uniform(0.12, 0.22) if index else rng.uniform(0.2, 0.5)
    long = short * rng.uniform(0.9, 1.2)
    skew = rng.uniform(0.08, 0.16) if index else rng.uniform(0.02, 0.15)
    bend = rng.uniform(0.02, 0.05)
    out = []
    for count in days:
        t = count / 365
        level = long + (short - long) * np.exp(-2.0 * t)
        z = np.linspace(-2.2, 1.8, n)
        volatilities = level * (1.0 - skew / (1.0 + 0.15 * t) * z + bend / (1.0 + 0.5 * t) * z * z)
        volatilities = volatilities + noise * rng.normal(size=n)
        out.append(SmileQuotes.of(day(count), z * level * np.sqrt(t), volatilities))
    return out
