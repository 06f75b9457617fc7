"""Expected variance of a continuous level by replication: a strip of options that adds up to its logarithm.

For a positive X of mean 1 that moves without jumps, the variance it is expected to realise is

    -2 E[log X] = 2 int_0^1 put(K) / K^2 dK + 2 int_1^inf call(K) / K^2 dK

(Neuberger 1994; Demeterfi, Derman, Kamal & Zou 1999): whatever its dynamics, as long as they are continuous. With
K = exp(k) the strip is an integral of option values over their strikes.
"""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray
from scipy.special import log_ndtr, ndtr

from pricer.engines.closed_form.family import AggregateLaw, Estimate
from pricer.engines.closed_form.quadrature import integrate
from pricer.market.implied_surface import ImpliedSurface

Array = NDArray[np.float64]

_NEGLIGIBLE = 1e-13  # of the integrand, where a wing is cut
_WIDEST = 2_000.0  # of log-strikes; a wing still worth something there is told in the error
_TOLERANCE = 1e-12


def variance_of_surface(surface: ImpliedSurface, years: float) -> Estimate:
    """Expected variance, from today to ``years``, of the pure martingale of an implied volatility surface.

    Total, not annualised. It is the fair level of a continuously observed variance swap on a level without cash
    dividends: where known cash is paid out, the price's own returns differ from the martingale's, and this is only
    near. Includes the wings as the surface extrapolates them.
    """
    return variance_of_smile(lambda k: surface.total_variance(k, years))


def variance_of_smile(total_variance: Callable[[Array], Array]) -> Estimate:
    """The same from total variance (m,) at log-strikes (m,) relative to the forward."""

    def strip(k: Array) -> Array:
        deviation = np.sqrt(total_variance(k))
        d1 = -k / deviation + 0.5 * deviation
        d2 = d1 - deviation
        puts = ndtr(-d2) - np.exp(np.minimum(-k + log_ndtr(-d1), 0.0))
        calls = np.exp(-np.maximum(k, 0.0)) * ndtr(d1) - ndtr(d2)
        return np.asarray(2.0 * np.maximum(np.where(k < 0.0, puts, calls), 0.0))

    return _whole(strip, math.sqrt(float(total_variance(np.zeros(1))[0])))


def variance_of_aggregate(law: AggregateLaw, deviation: float) -> Estimate | None:
    """The same for a positive aggregate whose options are known; ``deviation`` is about that of its log.

    For a basket of levels that all grow at one rate: the variance expected of the basket itself, whose weights
    move with the levels. None where the law lacks an option.
    """
    mean = law.mean()
    if mean is None:
        return None
    largest, known = 0.0, True

    def strip(k: Array) -> Array:
        nonlocal largest, known
        out = np.zeros_like(k)
        for i, log_strike in enumerate(k):
            strike = mean.value * math.exp(float(log_strike))
            option = law.option(strike, 1 if log_strike >= 0.0 else -1)
            if option is None:
                known = False
                return out
            out[i] = 2.0 * option.value / strike
            largest = max(largest, 2.0 * option.error / strike)
        return out

    found = _whole(strip, deviation, tolerance=1e-9, negligible=1e-9)
    return Estimate(found.value, found.error + 20.0 * deviation * largest) if known else None


def _whole(
    strip: Callable[[Array], Array], deviation: float, tolerance: float = _TOLERANCE, negligible: float = _NEGLIGIBLE
) -> Estimate:
    """Both wings of the strip, each cut where nothing is left; the error holds an estimate of what was cut."""
    total = Estimate(0.0)
    for side in (-1.0, 1.0):
        edges = [0.0, 0.5 * deviation, deviation]
        cut = 0.0
        while edges[-1] < _WIDEST:
            edges.append(edges[-1] * 1.5)
            before, cut = strip(side * np.array(edges[-2:]))
            if cut <= negligible:
                break
        # Beyond the cut the strip falls at least as fast as over the last panel, or a power of it is left.
        fall = math.log(before / cut) / (edges[-1] - edges[-2]) if 0.0 < cut < before else 0.0
        left = cut / fall if fall > 0.0 else float(cut) * edges[-1]
        wing = integrate(lambda x, side=side: strip(side * x), np.array(edges), tolerance * deviation)  # type: ignore[misc]
        total = total + Estimate(wing.value, float(wing.error + left))
    return total
