"""Order of slices in time: where one expiry's total variance lies above the next one's, and how to mend it."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from pricer.market.corrected_slice import CorrectedSlice, Slice, base_of
from pricer.market.svi import SviSlice
from pricer.market.svi_repair import is_butterfly_free

Array = NDArray[np.float64]
_Either = TypeVar("_Either", SviSlice, CorrectedSlice)

#: Bounds are kept, and calendar order is promised, this many standard deviations of the log-level from the forward.
RANGE = 8.0
#: Points in standard deviations within it where slices are checked, dense near the forward.
FINE_GRID: Array = RANGE * np.sinh(np.linspace(-3.0, 3.0, 361)) / math.sinh(3.0)
#: Slices apart by this share of the variance at the forward on all of ``FINE_GRID`` do not cross between its points:
#: the narrowest slices bend by a fiftieth of that over its steps.
CLEARLY_APART = 0.02


def is_admissible(smile: Slice, before: Slice | None, next_deviation: float = 0.0) -> bool:
    """Free of butterfly arbitrage (see :func:`reach`), and within ``RANGE`` nowhere below the slice ``before``."""
    return is_free(smile, next_deviation) and (before is None or excess(before, smile)[1] <= 0.0)


def excess(before: Slice, later: Slice) -> tuple[float, float]:
    """(k, amount) where the earlier slice lies furthest above the later one, within RANGE of the later.

    Found to the grid's spacing only, where they are clearly apart.
    """
    k = spread(later)
    apart = -CLEARLY_APART * float(later.total_variance(0.0))
    for _ in range(3):  # closing in: between the points of the grid two hyperbolas may still cross
        lack = before.total_variance(k) - later.total_variance(k)
        i = int(np.argmax(lack))
        at, most = float(k[i]), float(lack[i])
        if most < apart:
            break
        k = np.linspace(k[max(i - 1, 0)], k[min(i + 1, k.size - 1)], 21)
    return at, most


def lifted(later: _Either, before: Slice | None) -> _Either | None:
    """``later`` raised at all strikes by what it lacks to lie above ``before``; None where wings cross far out."""
    for _ in range(12):  # a higher slice is also compared further out
        lack = 0.0 if before is None else excess(before, later)[1]
        if lack <= 0.0:
            return later
        base = base_of(later)
        higher = replace(base, a=base.a + 1.01 * lack + 1e-10)
        later = replace(later, base=higher) if isinstance(later, CorrectedSlice) else higher
    return None


def stretched(before: SviSlice, variance: float) -> SviSlice:
    """``before`` carried on to a later time: the same smile in standard deviations, never below it."""
    ratio = max(variance / float(before.total_variance(0.0)), 1.0)
    root = math.sqrt(ratio)
    return SviSlice(ratio * before.a, root * before.b, before.rho, root * before.m, root * before.sigma)


def is_free(smile: Slice, next_deviation: float = 0.0) -> bool:
    """Whether it has no butterfly arbitrage within :func:`reach`."""
    return is_butterfly_free(smile, reach(smile, next_deviation))


def reach(smile: Slice, next_deviation: float = 0.0) -> float:
    """Log-moneyness a little beyond ``RANGE``, so that lifting a slice a little leaves it checked.

    ``next_deviation`` : that of the next expiry at the forward. Between the two, total variance is part of this
    slice's wherever the next one matters, and has no density there if this one has none.
    """
    return 1.05 * RANGE * max(math.sqrt(float(smile.total_variance(0.0))), next_deviation)


def spread(smile: Slice) -> Array:
    """Log-moneyness of ``FINE_GRID`` in the slice's own deviations."""
    out: Array = FINE_GRID * math.sqrt(float(smile.total_variance(0.0)))
    return out
