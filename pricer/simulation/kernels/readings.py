"""Readings: what aggregates read on the dates of a path, but for the common factor.

The common factor shifts all log-levels equally, so an aggregate's logarithm is that of the
rest, its *height*, plus its degree times the shift: heights do not depend on who is still
alive, and all legs of a product share them. ``shares`` are a height's derivatives by the
log-levels; of a best or worst of, one row holds the place of the asset that decides.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from pricer.simulation.kernels.elementary import exp2_single, log_double
from pricer.simulation.kernels.payoffs import SCALED, rank_weighted
from pricer.simulation.kernels.vectors import BLOCK, OPTIONS, SUM_OPTIONS, use_wide_vectors

_F = np.float32
_LN2 = 0.6931471805599453

# Kinds of reading.
SUM, BEST, WORST, RANKED, GEOMETRIC = 0, 1, 2, 3, 4

# Columns of the table of readings.
STEP, KIND, SINCE, FIRST_SHARE = 0, 1, 2, 3

#: Base-2 logarithms are kept within this: single precision ends at 126.
_WIDEST = _F(120.0)


@njit(**OPTIONS)
def path_logs(
    loadings: Any, loadings_common: Any, n_rest: int, walks: Any, drives: Any, logs: Any, common: Any
) -> None:
    """Base-2 log-levels without the common factor, and the common shift, at the end of every step.

    ``loadings`` : (n_steps, n, n_rest padded to 4) float32, ``loadings_common`` : (n_steps,), both per
    unit of Brownian motion. ``walks`` : (n_steps * (n_rest + 1), BLOCK), the common factor last of each
    step. ``logs`` : (n_steps * n, BLOCK) float32, ``common`` : (n_steps, BLOCK) double, natural logs.
    ``drives`` : scratch, as many rows as columns of ``loadings``; rows from ``n_rest`` on are 0.
    """
    use_wide_vectors()
    n_steps, n, padded = loadings.shape
    n_factors = n_rest + 1
    for t in range(n_steps):
        for j in range(n_rest):
            end = t * n_factors + j
            if t == 0:
                for p in range(BLOCK):
                    drives[j, p] = walks[end, p]
            else:
                for p in range(BLOCK):
                    drives[j, p] = walks[end, p] - walks[end - n_factors, p]
        end = t * n_factors + n_rest
        c = loadings_common[t]
        if t == 0:
            for p in range(BLOCK):
                common[t, p] = c * float(walks[end, p])
        else:
            for p in range(BLOCK):
                common[t, p] = common[t - 1, p] + c * float(walks[end, p] - walks[end - n_factors, p])
        for i in range(n):
            row = t * n + i
            if t == 0:
                for p in range(BLOCK):
                    logs[row, p] = _F(0.0)
            else:
                for p in range(BLOCK):
                    logs[row, p] = logs[row - n, p]
            for j in range(0, padded, 4):
                a, b, c2, d = loadings[t, i, j], loadings[t, i, j + 1], loadings[t, i, j + 2], loadings[t, i, j + 3]
                for p in range(BLOCK):
                    logs[row, p] += (
                        a * drives[j, p] + b * drives[j + 1, p] + c2 * drives[j + 2, p] + d * drives[j + 3, p]
                    )


@njit(**OPTIONS)
def project(projection: Any, shifts: Any, common: Any, row: Any) -> None:
    """Take the path's common factor off the common moves: ``common -= shifts w``, ``w = projection . moves``.

    ``projection``, ``shifts`` : (n_steps,), see ``simulation.common_steps``; ``row`` : scratch, (>= BLOCK,).
    """
    use_wide_vectors()
    for p in range(BLOCK):
        row[p] = projection[0] * common[0, p]
    for t in range(1, projection.shape[0]):
        a = projection[t]
        for p in range(BLOCK):
            row[p] += a * (common[t, p] - common[t - 1, p])
    for t in range(projection.shape[0]):
        a = shifts[t]
        for p in range(BLOCK):
            common[t, p] -= a * row[p]


@njit(**OPTIONS)
def read(
    table: Any, starts: Any, weights: Any, logs: Any, levels: Any, ranks: Any, paths: Any, heights: Any, shares: Any
) -> None:
    """Heights and shares of every reading.

    ``table`` : (n_readings, 4) STEP, KIND, SINCE (a step, or -1) and FIRST_SHARE. ``starts`` : (n_readings,
    n) float32, base-2 logarithm of what each asset contributes at zero noise. ``weights`` : (n_readings,
    n) float32, per rank or exponents. ``heights`` : (n_readings, BLOCK) natural logs; ``shares`` : (rows, BLOCK)
    float32. Scratch: ``levels``, ``ranks`` (n, BLOCK) float32, ``paths`` as for ``payoffs``.
    """
    use_wide_vectors()
    n = starts.shape[1]
    ones = np.ones(n)
    for q in range(table.shape[0]):
        kind, since, first = table[q, KIND], table[q, SINCE], table[q, FIRST_SHARE]
        for i in range(n):
            row, start = table[q, STEP] * n + i, starts[q, i]
            if since < 0:
                for p in range(BLOCK):
                    levels[i, p] = start + logs[row, p]
            else:
                before = since * n + i
                for p in range(BLOCK):
                    levels[i, p] = start + (logs[row, p] - logs[before, p])
        if kind in (BEST, WORST):
            sign = _F(1.0) if kind == BEST else _F(-1.0)
            for p in range(BLOCK):
                ranks[0, p] = sign * levels[0, p]
                shares[first, p] = _F(0.0)
            for i in range(1, n):
                place = _F(i)
                for p in range(BLOCK):
                    level = sign * levels[i, p]
                    beats = level > ranks[0, p]
                    ranks[0, p] = level if beats else ranks[0, p]
                    shares[first, p] = place if beats else shares[first, p]
            for p in range(BLOCK):
                heights[q, p] = _LN2 * float(sign * ranks[0, p])
        elif kind == GEOMETRIC:
            for p in range(BLOCK):
                heights[q, p] = 0.0
            for i in range(n):
                a = weights[q, i]
                for p in range(BLOCK):
                    heights[q, p] += _LN2 * float(a) * float(levels[i, p])
                    shares[first + i, p] = a
        else:
            for i in range(n):
                for p in range(BLOCK):
                    levels[i, p] = exp2_single(min(max(levels[i, p], -_WIDEST), _WIDEST))
            if kind == RANKED:
                rank_weighted(levels, ones, weights[q], ranks, paths)
            else:
                for p in range(BLOCK):
                    paths[SCALED + p] = 0.0
                for i in range(n):
                    for p in range(BLOCK):
                        paths[SCALED + p] += float(levels[i, p])
            for p in range(BLOCK):
                size = max(paths[SCALED + p], 1e-200)
                heights[q, p] = log_double(size)
                paths[SCALED + p] = 1.0 / size
            for i in range(n):
                for p in range(BLOCK):
                    shares[first + i, p] = _F(float(levels[i, p]) * paths[SCALED + p])


@njit(**SUM_OPTIONS)
def add_deltas(table: Any, shares: Any, adjoints: Any, n: int, m: int, sums: Any) -> None:
    """Add the value's derivatives by the log-levels of each reading: ``sums`` (n_readings * n,).

    ``adjoints`` : (n_readings, BLOCK), derivatives by heights; ``m`` paths count.
    """
    use_wide_vectors()
    for q in range(table.shape[0]):
        kind, first = table[q, KIND], table[q, FIRST_SHARE]
        for i in range(n):
            total = 0.0
            if kind in (BEST, WORST):
                place = _F(i)
                for p in range(m):
                    total += adjoints[q, p] if shares[first, p] == place else 0.0
            else:
                for p in range(m):
                    total += adjoints[q, p] * float(shares[first + i, p])
            sums[q * n + i] += total
