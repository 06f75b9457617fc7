"""Prices of all strikes from a local volatility table, by Dupire's forward equation: no simulation."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike, NDArray

from pricer.market.black import implied_deviation
from pricer.market.local_vol_surface import LocalVolSurface

Array = NDArray[np.float64]

#: Points in log-strike, dense at the forward; steps per cell of the table.
POINTS, STEPS = 1001, 4
#: The grid's reach in standard deviations of the last time. Steep put wings are worth something that far out: with 9
#: they came back 0.03 vol points off at 10 delta.
REACH = 20.0
#: Steps of the first cell, where the calls still have their kink.
FIRST_STEPS = 64


def model_volatilities(
    local: LocalVolSurface, log_moneyness: Sequence[ArrayLike], times: Sequence[float]
) -> tuple[Array, ...]:
    """Implied volatilities of the model at ``log_moneyness`` (n,) of each of the ``times``, arrays (n,).

    Raises as :func:`model_calls`.
    """
    strikes = [np.asarray(k, dtype=float) for k in log_moneyness]
    return tuple(
        implied_deviation(k, calls) / np.sqrt(time)
        for k, calls, time in zip(strikes, model_calls(local, strikes, times), times, strict=True)
    )


def model_calls(
    local: LocalVolSurface, log_moneyness: Sequence[ArrayLike], times: Sequence[float]
) -> tuple[Array, ...]:
    """Calls on X of strikes ``exp(log_moneyness)`` (n,) at each of the ``times`` under the model, arrays (n,).

    Calls of strike ``exp(k)`` obey ``c_t = sigma(k, t)^2 / 2 (c_kk - c_k)``, ``c = (1 - exp(k))+`` at
    first (Dupire 1994). Crank-Nicolson in time, the first cell by implicit Euler, which damps the kink (Rannacher
    1984). Raises ValueError unless there are strikes for each time and times increase from above 0.
    """
    from pricer.market.forward_kernel import march  # numba is needed only from here on

    if len(log_moneyness) != len(times) or not times or np.any(np.diff((0.0, *times)) <= 0.0):
        raise ValueError("the forward equation needs strikes for each of some increasing times above 0")
    ends = np.union1d(local.times[(local.times > 0.0) & (local.times < times[-1])], times)
    scale, places = _places(local, times)
    k = scale * np.sinh(places)
    below, above = np.diff(k)[:-1], np.diff(k)[1:]
    # Three-point weights of c_kk - c_k on uneven spacing, exact for parabolas.
    down, up = np.zeros(k.size), np.zeros(k.size)
    down[1:-1], up[1:-1] = (2.0 + above) / (below * (below + above)), (2.0 - below) / (above * (below + above))
    cells = local.cell(ends)
    found = np.empty((ends.size, k.size))
    table = local.values[cells], local.lowest[cells], local.spacing[cells]
    march(np.maximum(-np.expm1(k), 0.0), k, down, up, *table, np.diff(ends, prepend=0.0), FIRST_STEPS, STEPS, found)
    rows = found[np.searchsorted(ends, times)]
    return tuple(
        _between(row, (np.arcsinh(np.asarray(strikes, dtype=float) / scale) - places[0]) / (places[1] - places[0]))
        for row, strikes in zip(rows, log_moneyness, strict=True)
    )


def _places(local: LocalVolSurface, times: Sequence[float]) -> tuple[float, Array]:
    """Even places u of log-strikes ``scale sinh(u)``: dense within half a deviation at the first time."""
    first, last = (float(local.widths[int(local.cell(time))]) for time in (times[0], times[-1]))
    scale = 0.5 * first
    edge = float(np.arcsinh(REACH * last / scale))
    return scale, np.linspace(-edge, edge, POINTS)


def _between(values: Array, x: Array) -> Array:
    """The cubic through the four of even ``values`` (n,) around each index ``x``, which lies within them."""
    j = np.clip(x.astype(np.intp), 1, values.size - 3)
    u = x - j
    a, b, c, d = (values[j + step] for step in (-1, 0, 1, 2))
    out: Array = (
        b * (u + 1.0) * (1.0 - u) * (2.0 - u) / 2.0
        + c * (u + 1.0) * u * (2.0 - u) / 2.0
        - u * (1.0 - u) * (a * (2.0 - u) + d * (u + 1.0)) / 6.0
    )
    return out
