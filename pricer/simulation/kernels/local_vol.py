"""Local-volatility paths, one block of paths at a time.

The state of an asset is its *volatility coordinate* ``q = integral of dk / sigma(k)`` from 0 to
the log-level, in which its noise has unit size whatever its level. All else that
happens in a step, drift and change of the surface, is one table of q per step and asset (see
``simulation.local_vol_tables``), so that a step is

    q <- q + dB,    q <- q + table(q),    tangent <- tangent (1 + table'(q)).

Tables are linear between ``n_nodes`` equidistant nodes and beyond them. A node is one 64-bit word:
the value there in its low half, the rise to the next node in its high half, both single
precision. Looking up is split in three loops: where, fetch, interpolate. Compilers do not vectorise a
loop that reads from computed places and writes to others; so only the fetch, one word a
path, is left unvectorised. Measured: 0.7 ns a point against 2.2 in one loop.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from pricer.simulation.kernels.elementary import exp2_double, exp2_single, log_double
from pricer.simulation.kernels.payoffs import (
    BY_FACTOR,
    BY_SCALED,
    FACTOR,
    GROWTH,
    INVERSE_FACTOR,
    OUTSIDE,
    SCALED,
    SHRINKAGE,
)
from pricer.simulation.kernels.vectors import BLOCK, OPTIONS, single_from_bits, use_wide_vectors

_F = np.float32
_I = np.int32
_U = np.uint32
_L = np.uint64
_LOG2_E = 1.4426950408889634

#: Base-2 logarithms are kept within this: single precision ends at 126. Levels near 0 stay where no payoff sees them.
_WIDEST = _F(60.0)


@njit(**OPTIONS)
def walk(at: Any, left: Any, right: Any, weights: Any, n: int, walks: Any) -> None:
    """Turn normals into ``n`` independent Brownian motions by a bridge, in place.

    ``walks`` : (n_times * n, BLOCK), row ``t * n + j`` is factor j at time t; ``weights`` : (n_times, 3)
    float32 as before, after, deviation of ``bridge.Bridge``.
    """
    use_wide_vectors()
    for m in range(at.shape[0]):
        before, after, deviation = weights[m, 0], weights[m, 1], weights[m, 2]
        for j in range(n):
            row = at[m] * n + j
            if right[m] < 0:
                for p in range(BLOCK):
                    walks[row, p] *= deviation
            elif left[m] < 0:
                other = right[m] * n + j
                for p in range(BLOCK):
                    walks[row, p] = deviation * walks[row, p] + after * walks[other, p]
            else:
                one, other = left[m] * n + j, right[m] * n + j
                for p in range(BLOCK):
                    walks[row, p] = deviation * walks[row, p] + (before * walks[one, p] + after * walks[other, p])


@njit(**OPTIONS)
def increments(walks: Any, n: int, start: int, end: int, out: Any) -> None:
    """Differences of the Brownian motions between two times (``start`` -1: time 0): rows 0 to n of ``out``."""
    use_wide_vectors()
    for j in range(n):
        b = end * n + j
        if start < 0:
            for p in range(BLOCK):
                out[j, p] = walks[b, p]
        else:
            a = start * n + j
            for p in range(BLOCK):
                out[j, p] = walks[b, p] - walks[a, p]


@njit(**OPTIONS)
def _value(word: Any) -> Any:
    return single_from_bits(_I(word & _L(0xFFFFFFFF)))


@njit(**OPTIONS)
def _rise(word: Any) -> Any:
    return single_from_bits(_I(word >> _L(32)))


@njit(**OPTIONS)
def _fetch(table: Any, places: Any, words: Any) -> None:
    for p in range(BLOCK):
        words[p] = table[places[p]]


@njit(**OPTIONS)
def evolve(
    tables: Any,
    lowest: Any,
    per_node: Any,
    noise: Any,
    states: Any,
    tangents: Any,
    with_ratios: bool,
    places: Any,
    words: Any,
) -> None:
    """One step of all assets: ``states`` (n, BLOCK) from before it to before the next one.

    ``tables`` : (n, n_nodes) uint64; ``lowest``, ``per_node`` : (n,) first node, nodes per unit;
    ``noise`` : (n, BLOCK) correlated increments, overwritten. Scratch ``places``, ``words`` : (BLOCK,)
    uint32 and uint64.
    """
    use_wide_vectors()
    top = _F(tables.shape[1] - 2)
    for i in range(states.shape[0]):
        low, scale = lowest[i], per_node[i]
        for p in range(BLOCK):
            q = states[i, p] + noise[i, p]
            x = (q - low) * scale
            whole = _I(min(max(x, _F(0.0)), top))
            places[p] = _U(whole)
            noise[i, p] = x - _F(whole)
            states[i, p] = q
        _fetch(tables[i], places, words)
        if with_ratios:
            for p in range(BLOCK):
                rise = _rise(words[p])
                states[i, p] += _value(words[p]) + rise * noise[i, p]
                tangents[i, p] *= _F(1.0) + rise * scale
        else:
            for p in range(BLOCK):
                states[i, p] += _value(words[p]) + _rise(words[p]) * noise[i, p]


@njit(**OPTIONS)
def look_up(table: Any, low: Any, scale: Any, states: Any, values: Any, slopes: Any, places: Any, words: Any) -> None:
    """``values`` and ``slopes`` (BLOCK,) of one table (n_nodes,) at ``states`` (BLOCK,)."""
    use_wide_vectors()
    top = _F(table.shape[0] - 2)
    for p in range(BLOCK):
        x = (states[p] - low) * scale
        whole = _I(min(max(x, _F(0.0)), top))
        places[p] = _U(whole)
        values[p] = x - _F(whole)
    _fetch(table, places, words)
    for p in range(BLOCK):
        rise = _rise(words[p])
        values[p] = _value(words[p]) + rise * values[p]
        slopes[p] = rise * scale


@njit(**OPTIONS)
def add(noise: Any, states: Any) -> None:
    """``states += noise``, both (n, BLOCK)."""
    use_wide_vectors()
    for i in range(states.shape[0]):
        for p in range(BLOCK):
            states[i, p] += noise[i, p]


@njit(**OPTIONS)
def split_factor(
    inverse: Any, n_common: int, degree: float, noise: Any, precisions: Any, rows: Any, paths: Any
) -> None:
    """Per path, the common factor of the last step: its size into ``paths``, what it moves into ``rows``.

    Given the state before it, the last step moves log-levels by ``eps_i = s_i g_i`` of covariance
    ``S = diag(s) R diag(s)``. The largest factor w that moves the first ``n_common`` of them
    equally has deviation ``c = (1' S^-1 1)^-1/2`` in each; ``w = c 1' S^-1 eps``, and ``eps - c w``
    is independent of it. With ``u = 1 / s`` and ``v = R^-1 u``: ``c^2 = 1 / (u . v)`` and
    ``c w = (v . g) / (u . v)``.

    ``inverse`` : R^-1, square; ``noise`` : as many rows, (., BLOCK), g of unit size, exchange rates after the
    assets: w does not move them. ``precisions`` : (n, BLOCK) u, double.
    ``rows`` : (3, BLOCK) double; on return row 0 holds ``c w``, row 1 ``c``.
    """
    use_wide_vectors()
    for p in range(BLOCK):
        rows[0, p] = 0.0
        rows[1, p] = 0.0
    for i in range(noise.shape[0]):
        for p in range(BLOCK):
            rows[2, p] = 0.0
        for j in range(n_common):
            a = inverse[i, j]
            for p in range(BLOCK):
                rows[2, p] += a * precisions[j, p]
        for p in range(BLOCK):
            rows[0, p] += rows[2, p] * float(noise[i, p])
        if i < n_common:
            for p in range(BLOCK):
                rows[1, p] += rows[2, p] * precisions[i, p]
    for p in range(BLOCK):
        square = 1.0 / rows[1, p]
        c = np.sqrt(square)
        v = degree * c
        rows[0, p] *= square
        rows[1, p] = c
        paths[FACTOR + p] = v
        growth = exp2_double(0.5 * _LOG2_E * v * v)
        paths[GROWTH + p] = growth
        paths[SHRINKAGE + p] = 1.0 / growth
        paths[INVERSE_FACTOR + p] = 1.0 / v


@njit(**OPTIONS)
def last_levels(deviations: Any, noise: Any, drifts: Any, shift: Any, n_common: int, starts: Any, levels: Any) -> None:
    """``levels = starts exp(s (g - drift) - s^2 / 2 - c w)`` (n, BLOCK) over the forwards.

    ``drifts`` : (n,) of the unit noise; ``shift`` : (BLOCK,) c w.
    """
    use_wide_vectors()
    for i in range(levels.shape[0]):
        inside = 1.0 if i < n_common else 0.0
        drift = drifts[i]
        for p in range(BLOCK):
            s = deviations[i, p]
            move = _F(_LOG2_E) * (s * (noise[i, p] - drift) - _F(0.5) * s * s - _F(inside * shift[p]))
            levels[i, p] = starts[i, p] * exp2_single(min(max(move, -_WIDEST), _WIDEST))


@njit(**OPTIONS)
def convert(exposures: Any, drop: float, deviations: Any, noise: Any, logs: Any, levels: Any) -> None:
    """``levels *= 2^(sum of a_j b_j h_j / log 2 - drop)``, an exchange rate's last step, if any exposure a_j is not 0.

    ``exposures``, ``deviations`` (m,) and ``noise`` (m, BLOCK) of the factors of rates; scratch ``logs`` (BLOCK,).
    """
    use_wide_vectors()
    converted = False
    for j in range(exposures.shape[0]):
        if exposures[j] == _F(0.0):
            continue
        if not converted:
            logs[:] = -drop
            converted = True
        slope = _F(_LOG2_E) * deviations[j] * exposures[j]
        for p in range(BLOCK):
            logs[p] += slope * noise[j, p]
    if converted:
        for p in range(BLOCK):
            levels[p] *= exp2_single(min(max(logs[p], -_WIDEST), _WIDEST))


@njit(**OPTIONS)
def geometric(levels: Any, weights: Any, log2_scale: float, paths: Any) -> None:
    """``SCALED`` = 2^log2_scale times the product of ``levels ** weights``."""
    use_wide_vectors()
    for p in range(BLOCK):
        paths[SCALED + p] = log2_scale
        paths[OUTSIDE + p] = 0.0
    for i in range(levels.shape[0]):
        a = _LOG2_E * weights[i]
        for p in range(BLOCK):
            paths[SCALED + p] += a * log_double(float(levels[i, p]))
    for p in range(BLOCK):
        paths[SCALED + p] = exp2_double(paths[SCALED + p])


@njit(**OPTIONS)
def level_free(levels: Any, paths: Any) -> None:
    """A geometric aggregate moves by its own level, whichever asset moves: levels become 1."""
    use_wide_vectors()
    for i in range(levels.shape[0]):
        for p in range(BLOCK):
            levels[i, p] = _F(1.0)
    for p in range(BLOCK):
        scaled = paths[SCALED + p]
        paths[BY_SCALED + p] *= scaled
        paths[BY_FACTOR + p] *= scaled
