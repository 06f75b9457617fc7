"""Prices of all strikes from a local volatility table, by Dupire's forward equation: no simulation."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.interpolate import CubicSpline
from scipy.linalg import solve_banded

from pricer.market.black import implied_deviation
from pricer.market.local_vol_surface import LocalVolSurface

Array = NDArray[np.float64]

#: Points in log-strike, dense at the forward; steps per cell of the table; the grid's reach in standard deviations.
POINTS, STEPS, REACH = 1001, 4, 9.0
#: Steps of the first cell, where the calls still have their kink.
FIRST_STEPS = 16


def model_volatilities(
    local: LocalVolSurface, log_moneyness: Sequence[ArrayLike], times: Sequence[float]
) -> tuple[Array, ...]:
    """Implied volatilities of the model at ``log_moneyness`` (n,) of each of the ``times``, arrays (n,).

    Calls on X of strike ``exp(k)`` obey ``c_t = sigma(k, t)^2 / 2 (c_kk - c_k)``, ``c = (1 - exp(k))+`` at
    first (Dupire 1994). Crank-Nicolson in time, the first cell by implicit Euler, which damps the kink (Rannacher
    1984). Raises ValueError unless there are strikes for each time and times increase from above 0.
    """
    if len(log_moneyness) != len(times) or not times or np.any(np.diff((0.0, *times)) <= 0.0):
        raise ValueError("the forward equation needs strikes for each of some increasing times above 0")
    ends = np.union1d(local.times[(local.times > 0.0) & (local.times < times[-1])], times)
    k = _log_strikes(local, times)
    below, above = np.diff(k)[:-1], np.diff(k)[1:]
    # Three-point weights of c_kk - c_k on uneven spacing, exact for parabolas.
    down, up = (2.0 + above) / (below * (below + above)), (2.0 - below) / (above * (below + above))
    calls = np.maximum(-np.expm1(k), 0.0)
    found: dict[float, Array] = {}
    start = 0.0
    for end in ends.tolist():
        steps, implicit = (FIRST_STEPS, 1.0) if start == 0.0 else (STEPS, 0.5)
        rate = 0.5 * local.volatility(k[1:-1], end) ** 2 * (end - start) / steps
        for _ in range(steps):
            calls = _step(calls, rate * down, rate * up, implicit)
        found[end] = calls
        start = end
    out = []
    for strikes, time in zip(log_moneyness, times, strict=True):
        at = np.asarray(strikes, dtype=float)
        out.append(implied_deviation(at, CubicSpline(k, found[float(time)])(at)) / np.sqrt(time))
    return tuple(out)


def _log_strikes(local: LocalVolSurface, times: Sequence[float]) -> Array:
    """Dense within the deviation at the first time, reaching ``REACH`` deviations of the last; 0 is a point."""
    first, last = (float(local.widths[int(local.cell(time))]) for time in (times[0], times[-1]))
    scale = 0.5 * first
    out: Array = scale * np.sinh(np.linspace(-1.0, 1.0, POINTS) * np.arcsinh(REACH * last / scale))
    return out


def _step(calls: Array, down: Array, up: Array, implicit: float) -> Array:
    """One step of the theta scheme; both ends stay at intrinsic value."""
    middle = down + up
    known = calls[1:-1] + (1.0 - implicit) * (down * calls[:-2] - middle * calls[1:-1] + up * calls[2:])
    known[0] += implicit * down[0] * calls[0]
    known[-1] += implicit * up[-1] * calls[-1]
    bands = np.zeros((3, known.size))
    bands[0, 1:], bands[1], bands[2, :-1] = -implicit * up[:-1], 1.0 + implicit * middle, -implicit * down[1:]
    out = calls.copy()
    out[1:-1] = solve_banded((1, 1), bands, known, check_finite=False)
    return out
