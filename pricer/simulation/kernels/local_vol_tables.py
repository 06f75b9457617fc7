"""Tables of one step of local volatility for each asset: built once, read on every path.

Within a step of length h the surface is held at its mean over the step, sigma(k). In
Stratonovich form ``dk = a(k) dt + sigma(k) o dB`` with ``a = -(sigma^2 + sigma sigma') / 2``. The step

    p = G(k),   q = p + dB,   k' = H(q) = flow of a over h/2, after q -> k along dk/dq = sigma(k)

is Strang's splitting (1968) with exact flows, of weak order 2 (for Brownian motion: Ninomiya & Victoir
2008), if G is the inverse of the second map and the other half of the drift. Here G is instead
whatever makes the price an exact martingale, ``E[exp H(G(k) + dB)] = exp k``; it differs by the
splitting's own error, of order h^3, so the order is kept and forwards are exact at any h.

Two neighbouring steps meet in one function of q, ``G_next(H(q))``: the table of the step.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
from numba import njit

from pricer.core.stored_code import digest_of, stored_under

_OPTIONS: dict[str, Any] = {"nogil": True, "error_model": "numpy"}

#: Noise within this many deviations is integrated, which also holds prices that it multiplies by exp(2 deviations).
_TAIL = 8.0
_HIGHEST = 300.0  # of a log-price: its square is still a double


@njit(**_OPTIONS)
def _centred_slopes(values: Any, spacing: float, out: Any) -> None:
    """Slopes of a smooth function from its neighbours, of fourth order inside."""
    n = len(values)
    for j in range(n):
        if 2 <= j < n - 2:
            out[j] = (8.0 * (values[j + 1] - values[j - 1]) - values[j + 2] + values[j - 2]) / (12.0 * spacing)
        elif 1 <= j < n - 1:
            out[j] = (values[j + 1] - values[j - 1]) / (2.0 * spacing)
    out[0] = (values[1] - values[0]) / spacing
    out[n - 1] = (values[n - 1] - values[n - 2]) / spacing


@njit(**_OPTIONS)
def _volatility_slopes(values: Any, spacing: float, out: Any) -> None:
    """Slopes of a positive function at equidistant nodes, of fourth order where it is smooth.

    Elsewhere limited to three times the lesser of the neighbouring rises (Hyman 1983), and to a value
    per spacing: the cubic then stays close to its nodes and positive.
    """
    _centred_slopes(values, spacing, out)
    n = len(values)
    out[0] = out[n - 1] = 0.0  # flat beyond
    for j in range(1, n - 1):
        least = min(abs(values[j] - values[j - 1]), abs(values[j + 1] - values[j]))
        most = min(3.0 * least, values[j]) / spacing
        out[j] = min(max(out[j], -most), most)


@njit(**_OPTIONS)
def _cubic(values: Any, slopes: Any, low: float, spacing: float, x: float) -> Any:
    """Value and slope at ``x`` of a cubic Hermite curve; a straight line beyond its ends."""
    n = len(values)
    t = (x - low) / spacing
    if t <= 0.0:
        return values[0] + slopes[0] * t * spacing, slopes[0]
    if t >= n - 1.0:
        return values[n - 1] + slopes[n - 1] * (t - (n - 1)) * spacing, slopes[n - 1]
    j = int(t)
    t -= j
    rise = values[j + 1] - values[j]
    a, b = slopes[j] * spacing - rise, rise - slopes[j + 1] * spacing
    bump = a + (b - a) * t
    value = values[j] + t * rise + t * (1.0 - t) * bump
    return value, (rise + (1.0 - 2.0 * t) * bump + t * (1.0 - t) * (b - a)) / spacing


@njit(**_OPTIONS)
def _drift(row: Any, slopes: Any, low: float, spacing: float, k: float) -> Any:
    sigma, slope = _cubic(row, slopes, low, spacing, k)
    return -0.5 * sigma * (sigma + slope)


@njit(**_OPTIONS)
def _to_log_level(
    row: Any, slopes: Any, low: float, spacing: float, h: float, edge: float, step: float, out: Any
) -> None:
    """H at equidistant q from ``edge``: out along dk/dq = sigma from k = 0 at q = 0, then half the drift (RK4)."""
    n = len(out)
    zero = int(np.floor(-edge / step + 0.5))  # q = 0 is a node
    for way in (1, -1):
        k = 0.0
        dq = way * step
        j = zero
        while 0 <= j < n:
            out[j] = k
            a = _cubic(row, slopes, low, spacing, k)[0]
            b = _cubic(row, slopes, low, spacing, k + 0.5 * dq * a)[0]
            c = _cubic(row, slopes, low, spacing, k + 0.5 * dq * b)[0]
            d = _cubic(row, slopes, low, spacing, k + dq * c)[0]
            k += dq * (a + 2.0 * b + 2.0 * c + d) / 6.0
            j += way
    for j in range(n):
        k = out[j]
        # where volatility is huge the flow is stiff: enough steps that none moves k by much
        parts = 1 + int(min(4.0 * h * abs(_drift(row, slopes, low, spacing, k)), 1e4))
        t = 0.5 * h / parts
        for _ in range(parts):
            a = _drift(row, slopes, low, spacing, k)
            b = _drift(row, slopes, low, spacing, k + 0.5 * t * a)
            c = _drift(row, slopes, low, spacing, k + 0.5 * t * b)
            d = _drift(row, slopes, low, spacing, k + t * c)
            k += t * (a + 2.0 * b + 2.0 * c + d) / 6.0
        out[j] = k


@njit(**_OPTIONS)
def _log_means(level: Any, slopes: Any, edge: float, step: float, h: float, nodes: Any, weights: Any, out: Any) -> None:
    """``log E[exp(m H(q + dB))]`` for m = 1 and 2 at equidistant q: ``out`` (2, n).

    By the trapezoidal rule on the nodes themselves, which for a normal density at least as wide as
    their distance is exact to 3e-9 where H is smooth and forgives the corners of a surface; for steps too
    short for that, by Gauss and Hermite's rule.
    """
    n = level.shape[0]
    root = np.sqrt(h)
    centre = level[n // 2]
    if root >= step:
        reach = int(_TAIL * root / step) + 1
        taps = np.empty(2 * reach + 1)
        for i in range(len(taps)):
            z = (i - reach) * step / root
            taps[i] = np.exp(-0.5 * z * z)
        taps /= taps.sum()
        prices = np.empty(n + 2 * reach)
        for j in range(len(prices)):
            node = min(max(j - reach, 0), n - 1)
            prices[j] = np.exp(min(level[node] + slopes[node] * (j - reach - node) * step - centre, _HIGHEST))
        for j in range(n):
            one = two = 0.0
            for i in range(len(taps)):
                price = prices[j + i]
                one += taps[i] * price
                two += taps[i] * price * price
            out[0, j] = centre + np.log(one)
            out[1, j] = 2.0 * centre + np.log(two)
    else:
        for j in range(n):
            q = edge + j * step
            one = two = 0.0
            for i in range(len(nodes)):
                price = np.exp(_cubic(level, slopes, edge, step, q + root * nodes[i])[0] - level[j])
                one += weights[i] * price
                two += weights[i] * price * price
            out[0, j] = level[j] + np.log(one)
            out[1, j] = 2.0 * level[j] + np.log(two)


@njit(**_OPTIONS)
def _inverse(values: Any, slopes: Any, edge: float, step: float, target: float, near: int) -> Any:
    """Where an increasing curve takes the value ``target``; ``near`` is the node to search from."""
    n = len(values)
    j = min(max(near, 0), n - 2)
    while j < n - 2 and values[j + 1] < target:
        j += 1
    while j > 0 and values[j] > target:
        j -= 1
    lo, hi = edge + j * step, edge + (j + 1) * step
    if target < values[0]:
        return edge + (target - values[0]) / slopes[0], 0
    if target > values[n - 1]:
        return hi + (target - values[n - 1]) / slopes[n - 1], n - 2
    x = lo + step * (target - values[j]) / (values[j + 1] - values[j])
    for _ in range(60):
        value, slope = _cubic(values, slopes, edge, step, x)
        if value > target:
            hi = x
        else:
            lo = x
        move = (target - value) / slope if slope > 0.0 else 0.0
        following = x + move
        if not lo <= following <= hi or slope <= 0.0:
            following = 0.5 * (lo + hi)
        if abs(following - x) <= 1e-13 * step or hi - lo <= 1e-13 * step:
            return following, j
        x = following
    return x, j


@njit(**_OPTIONS)
def _straightened(values: Any) -> None:
    """Node values for straight pieces whose mean error over a cell vanishes, to fourth order."""
    before = values[0]
    for j in range(1, len(values) - 1):
        here = values[j]
        values[j] -= (before - 2.0 * here + values[j + 1]) / 12.0
        before = here


def _build(
    rows: Any,
    lows: Any,
    spacings: Any,
    lengths: Any,
    edges: Any,
    steps: Any,
    nodes: Any,
    weights: Any,
    moves: Any,
    levels: Any,
    deviations: Any,
    starts: Any,
) -> None:
    """All tables of one asset.

    ``rows`` : (n_steps, n_k) volatility over each step at log-levels ``lows + j spacings``.
    ``lengths`` : (n_steps,) years. ``edges``, ``steps`` : (n_steps,) first node and distance of the nodes
    in q of each step; q = 0 is one. ``nodes``, ``weights`` : of the normal distribution.
    Results at the nodes: ``moves`` (n_steps - 1, n) G_next(H(q)) - q; ``levels`` (n_steps, n) H(q);
    ``deviations`` (n_steps - 1, n) at the nodes of each step but the last, of the lognormal price with the second
    moment of the step after it (``n_steps`` > 1); ``starts`` (3,): G(0), G'(0) of the first step,
    and the deviation of a single step from k = 0.
    """
    n_steps, n = levels.shape
    slopes = np.empty(rows.shape[1])
    level_slopes = np.empty((n_steps, n))
    means = np.empty((n_steps, 2, n))
    mean_slopes = np.empty((n_steps, 2, n))
    for s in range(n_steps):
        _volatility_slopes(rows[s], spacings[s], slopes)
        _to_log_level(rows[s], slopes, lows[s], spacings[s], lengths[s], edges[s], steps[s], levels[s])
        _centred_slopes(levels[s], steps[s], level_slopes[s])
        _log_means(levels[s], level_slopes[s], edges[s], steps[s], lengths[s], nodes, weights, means[s])
        for m in range(2):
            _centred_slopes(means[s, m], steps[s], mean_slopes[s, m])
    start, _ = _inverse(means[0, 0], mean_slopes[0, 0], edges[0], steps[0], 0.0, n // 2)
    slope = _cubic(means[0, 0], mean_slopes[0, 0], edges[0], steps[0], start)[1]
    starts[0], starts[1] = start, 1.0 / slope
    second = _cubic(means[0, 1], mean_slopes[0, 1], edges[0], steps[0], start)[0]
    starts[2] = np.sqrt(max(second, 1e-12 * lengths[0]))
    for s in range(n_steps - 1):
        near = 0
        for j in range(n):
            k = levels[s, j]
            q, near = _inverse(means[s + 1, 0], mean_slopes[s + 1, 0], edges[s + 1], steps[s + 1], k, near)
            moves[s, j] = q - (edges[s] + j * steps[s])
            second = _cubic(means[s + 1, 1], mean_slopes[s + 1, 1], edges[s + 1], steps[s + 1], q)[0]
            deviations[s, j] = np.sqrt(max(second - 2.0 * k, 1e-12 * lengths[s + 1]))
        _straightened(moves[s])
    for s in range(n_steps):
        _straightened(levels[s])
    for s in range(n_steps - 1):
        _straightened(deviations[s])


#: Kernels import from each other: a change in any of their files renews those on disk.
build = njit(cache=True, **_OPTIONS)(stored_under(digest_of(Path(__file__).parent.glob("*.py")), _build))
