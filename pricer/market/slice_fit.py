"""A slice through one expiry's quotes: SVI, and a smooth correction where that misses them."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from pricer.market.corrected_slice import CorrectedSlice, Slice, base_of
from pricer.market.slice_correction import corrected
from pricer.market.slice_order import FINE_GRID, is_free, lifted
from pricer.market.smile_quotes import SmileQuotes
from pricer.market.svi import SviSlice
from pricer.market.svi_fit import LEAST_WEIGHT, fit_svi

Array = NDArray[np.float64]

#: A corrected slice is lifted by up to this share only: 0.004 vol points of a volatility of 20 %.
TINY_LIFT = 4e-4
#: Where it lacks more, its base is raised and the correction drawn anew, up to so many times.
DRAWN_ANEW = 3
#: A quote off the others' slice by up to this (1 vol point) may still be meant; by more it stays left out, and is
#: reported as missed, even where no arbitrage would forbid to meet it.
ODD = 0.01
#: Up to as many standard deviations (a call of 10 or 90 delta lies nearer) quotes are met alike; beyond, less closely.
NEAR = 1.5
#: With fewer quotes a correction would be drawn by nothing; SVI's five numbers are enough for them.
LEAST_QUOTES = 5


def fit_slice(
    quotes: SmileQuotes, time: float, before: Slice | None = None, later: Sequence[tuple[Array, Array]] = ()
) -> Slice:
    """The SVI slice of :func:`fit_svi`, brought to the quotes by a smooth correction where it misses them.

    Quotes that were left out come back if they are off by no more than ``ODD`` and the correction meets all of
    them: they are odd then, but no contradiction.
    See :mod:`pricer.market.slice_correction` for how far a correction may go.
    """
    base, weights = fit_svi(quotes, time, before, later)
    kept = weights > 0.0
    if np.count_nonzero(kept) < LEAST_QUOTES:
        return base
    misses = np.sqrt(base.total_variance(quotes.log_moneyness) / time) - quotes.volatilities
    if not kept.all() and np.max(np.abs(misses[~kept])) <= ODD:
        smile = _corrected(base, quotes, np.ones(kept.size, dtype=bool), time, before)
        errors = np.sqrt(smile.total_variance(quotes.log_moneyness) / time) - quotes.volatilities
        if np.all(np.abs(errors) <= 2.0 * _allowances(quotes, time)):
            return smile
    return _corrected(base, quotes, kept, time, before)


def _corrected(
    base: SviSlice, quotes: SmileQuotes, kept: NDArray[np.bool_], time: float, before: Slice | None
) -> Slice:
    """``base`` corrected to those quotes that are ``kept`` (n,), above ``before``; ``base`` itself if that cannot be.

    The corrected slice's deviation at the forward is another than the base's, and so is the range in which it must
    lie above the slice before. Where it lacks more there than can be added to all strikes unnoticed, the base is
    raised instead and the correction drawn anew, which takes the rise off again where quotes are.
    """
    k, volatilities, allowances = quotes.log_moneyness, quotes.volatilities, _allowances(quotes, time)
    unnoticed = TINY_LIFT * float(base.total_variance(0.0))
    drawn = base
    for _ in range(DRAWN_ANEW + 1):
        smile = corrected(drawn, k[kept], volatilities[kept], allowances[kept], time, before, FINE_GRID)
        raised = lifted(smile, before) if isinstance(smile, CorrectedSlice) else None
        if raised is None:
            break
        rise = base_of(raised).a - drawn.a
        if rise <= unnoticed:
            return raised if is_free(raised) else base
        drawn = replace(drawn, a=drawn.a + 1.1 * rise)
    return base


def _allowances(quotes: SmileQuotes, time: float) -> Array:
    """Errors that need no bend, (n,): those of ``quotes``, and more far from the forward in its own deviations."""
    far = np.maximum(np.abs(quotes.log_moneyness) / (quotes.volatilities * math.sqrt(time)) - NEAR, 0.0)
    out: Array = quotes.allowance / np.maximum(np.exp(-0.25 * far * far), LEAST_WEIGHT)
    return out
