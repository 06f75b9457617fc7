"""Aggregates, and the exact expectation of a payoff over the common factor, block by block.

All quantities per path lie in one flat array of rows of ``BLOCK`` doubles at fixed places,
which lets the compiler see that rows do not overlap.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from pricer.simulation.kernels.elementary import (
    log_double,
    normal_density,
    normal_distribution,
)
from pricer.simulation.kernels.vectors import BLOCK, OPTIONS, use_wide_vectors

_F = np.float32

# Kinds of aggregate; geometric ones leave nothing to sample.
SUM, BEST, WORST, RANKED = 0, 1, 2, 3

# Rows of the per-path array.
SCALED = 0 * BLOCK  # the part of the aggregate that the common factor scales
OUTSIDE = 1 * BLOCK  # the part it does not
VALUE = 2 * BLOCK
BY_SCALED = 3 * BLOCK  # derivatives of the value
BY_FACTOR = 4 * BLOCK
BY_OUTSIDE = 5 * BLOCK
BY_SCALED_TWICE = 6 * BLOCK
BY_OUTSIDE_TWICE = 7 * BLOCK
FACTOR = 8 * BLOCK  # deviation v of the log of the scaled part over the common factor
GROWTH = 9 * BLOCK  # exp(v^2 / 2)
SHRINKAGE = 10 * BLOCK  # exp(-v^2 / 2)
INVERSE_FACTOR = 11 * BLOCK  # 1 / v, 0 where there is no factor
_DISTANCE = 12 * BLOCK
_DENSITY = 13 * BLOCK
_ABOVE = 14 * BLOCK
_ABOVE_WEIGHTED = 15 * BLOCK
_INVERSE = 16 * BLOCK
_LOG = 17 * BLOCK
PATH_ROWS = 18

#: Distances are held within this many deviations; there and beyond the density counts as 0.
_FAR = 37.0
_LOG2_E = 1.4426950408889634


@njit(**OPTIONS)
def weighted_sum(levels: Any, scales: Any, n_common: int, paths: Any) -> None:
    """``SCALED`` = scales . levels over the first ``n_common`` assets, ``OUTSIDE`` over the rest."""
    use_wide_vectors()
    for p in range(BLOCK):
        paths[SCALED + p] = 0.0
        paths[OUTSIDE + p] = 0.0
    for i in range(levels.shape[0]):
        a = scales[i]
        if i < n_common:
            for p in range(BLOCK):
                paths[SCALED + p] += a * levels[i, p]
        else:
            for p in range(BLOCK):
                paths[OUTSIDE + p] += a * levels[i, p]


@njit(**OPTIONS)
def extreme(levels: Any, scales: Any, sign: float, paths: Any) -> None:
    """Best (``sign`` 1) or worst (-1) of ``scales * levels``; all other levels become 0."""
    use_wide_vectors()
    for p in range(BLOCK):
        paths[SCALED + p] = scales[0] * levels[0, p]
        paths[OUTSIDE + p] = 0.0
        paths[_LOG + p] = 0.0
    for i in range(1, levels.shape[0]):
        a = scales[i]
        place = float(i)
        for p in range(BLOCK):
            level = a * levels[i, p]
            beats = sign * (level - paths[SCALED + p]) > 0.0
            paths[SCALED + p] = level if beats else paths[SCALED + p]
            paths[_LOG + p] = place if beats else paths[_LOG + p]
    for i in range(levels.shape[0]):
        place = float(i)
        for p in range(BLOCK):
            levels[i, p] = levels[i, p] if paths[_LOG + p] == place else _F(0.0)


@njit(**OPTIONS)
def rank_weighted(levels: Any, scales: Any, rank_weights: Any, ranks: Any, paths: Any) -> None:
    """Levels times the weight of their rank (best first), and their sum.

    Ranks are counted pair by pair: n^2 / 2 comparisons, but without a branch.
    """
    use_wide_vectors()
    n = levels.shape[0]
    for i in range(n):
        for p in range(BLOCK):
            ranks[i, p] = _F(0.0)
    for i in range(1, n):
        a = _F(scales[i])
        for j in range(i):
            b = _F(scales[j])
            for p in range(BLOCK):
                behind = _F(1.0) if b * levels[j, p] >= a * levels[i, p] else _F(0.0)
                ranks[i, p] += behind
                ranks[j, p] += _F(1.0) - behind
    for p in range(BLOCK):
        paths[SCALED + p] = 0.0
        paths[OUTSIDE + p] = 0.0
    for i in range(n):
        a = scales[i]
        for p in range(BLOCK):
            levels[i, p] *= rank_weights[int(ranks[i, p])]
            paths[SCALED + p] += a * levels[i, p]


@njit(**OPTIONS)
def constant_factor(v: float, paths: Any) -> None:
    """One deviation of the common factor for all paths; 0: there is none."""
    growth = np.exp(0.5 * v * v)
    inverse = 1.0 / v if v > 0.0 else 0.0
    for p in range(BLOCK):
        paths[FACTOR + p] = v
        paths[GROWTH + p] = growth
        paths[SHRINKAGE + p] = 1.0 / growth
        paths[INVERSE_FACTOR + p] = inverse


@njit(**OPTIONS)
def integrate_factor(profile: Any, smooth: bool, with_ratios: bool, paths: Any) -> None:
    """Expectation over ``w ~ N(0, 1)`` of ``f(exp(v w) SCALED + OUTSIDE)`` and its derivatives.

    ``profile`` : (2 + 3 n_knots,): intercept, slope, knots, bends, jumps. v is ``FACTOR``, path by
    path; unless ``smooth`` it is 0 throughout and the result is the payoff itself and its slope.
    Formulas: :mod:`pricer.simulation.conditional`.
    """
    use_wide_vectors()
    n_knots = (profile.shape[0] - 2) // 3
    intercept, slope = profile[0], profile[1]
    for p in range(BLOCK):
        scaled = paths[SCALED + p]
        size = max(abs(scaled), 1e-200)
        paths[VALUE + p] = intercept + slope * (paths[GROWTH + p] * scaled + paths[OUTSIDE + p])
        paths[_INVERSE + p] = 1.0 / size
        paths[_LOG + p] = log_double(size)
    if with_ratios:
        for p in range(BLOCK):
            paths[BY_SCALED + p] = slope * paths[GROWTH + p]
            paths[BY_FACTOR + p] = slope * paths[GROWTH + p] * paths[FACTOR + p]
            paths[BY_OUTSIDE + p] = slope
            paths[BY_SCALED_TWICE + p] = 0.0
            paths[BY_OUTSIDE_TWICE + p] = 0.0
    for j in range(n_knots):
        knot, bend, jump = profile[2 + j], profile[2 + n_knots + j], profile[2 + 2 * n_knots + j]
        if smooth:
            for p in range(BLOCK):
                v, growth, inverse_v = paths[FACTOR + p], paths[GROWTH + p], paths[INVERSE_FACTOR + p]
                scaled = paths[SCALED + p]
                threshold = knot - paths[OUTSIDE + p]
                size = max(abs(threshold), 1e-200)
                negative = scaled < 0.0
                apart = negative != (threshold < 0.0)
                distance = min(max((paths[_LOG + p] - log_double(size)) * inverse_v, -_FAR), _FAR)
                distance = _FAR if apart else distance
                density = normal_density(distance) if abs(distance) < _FAR else 0.0
                # phi(d + v) = phi(d) exp(-v d - v^2 / 2) and exp(-v d) = threshold / scaled
                next_density = density * paths[SHRINKAGE + p] * (size * paths[_INVERSE + p])
                near = normal_distribution(-distance if negative else distance, density)
                far = distance + v
                further = growth * normal_distribution(-far if negative else far, next_density)
                paths[_DISTANCE + p] = distance
                paths[_DENSITY + p] = density
                paths[_ABOVE + p] = near
                paths[_ABOVE_WEIGHTED + p] = further
                paths[VALUE + p] += bend * (scaled * further - threshold * near) + jump * near
        else:
            for p in range(BLOCK):
                excess = paths[SCALED + p] + paths[OUTSIDE + p] - knot
                above = 1.0 if excess > 0.0 else 0.0
                paths[_DISTANCE + p] = 0.0
                paths[_DENSITY + p] = 0.0
                paths[_ABOVE + p] = above
                paths[_ABOVE_WEIGHTED + p] = above
                paths[VALUE + p] += (bend * excess + jump) * above
        if with_ratios:
            for p in range(BLOCK):
                v, inverse_v = paths[FACTOR + p], paths[INVERSE_FACTOR + p]
                size = max(abs(knot - paths[OUTSIDE + p]), 1e-200)
                inverse = paths[_INVERSE + p]
                distance, density = paths[_DISTANCE + p], paths[_DENSITY + p] * inverse_v
                further = paths[_ABOVE_WEIGHTED + p]
                ratio = size * inverse  # threshold / scaled
                landing = jump * density * inverse
                next_density = density * ratio if paths[SCALED + p] > 0.0 else -density * ratio
                paths[BY_SCALED + p] += bend * further + landing
                paths[BY_FACTOR + p] += bend * v * (further + next_density) - distance * landing
                paths[BY_SCALED_TWICE + p] += (bend * next_density - landing * (distance + v) * inverse_v) * inverse
                inverse_size = 1.0 / size  # of a threshold at 0, where the density is 0: does no harm
                landing = jump * density * inverse_size
                paths[BY_OUTSIDE + p] += bend * paths[_ABOVE + p] + landing
                paths[BY_OUTSIDE_TWICE + p] += (bend * density + landing * (v - distance) * inverse_v) * inverse_size
