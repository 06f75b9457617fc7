"""Payments at a date of a leg, integrated exactly over the path's common factor between two bounds.

Given everything else, ``A = S exp(v w)`` with ``w ~ N(0, 1)``, or a sum of such terms with their own
S and v (an average over dates). The expectation of a piecewise linear ``f(A)`` on ``lo < w < hi`` is a sum over
its knots of ``P(a < w < hi)`` and ``E[exp(v w); a < w < hi]``, a the place of the knot in w, held
between the bounds (Black & Scholes 1973 per knot).
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from pricer.simulation.kernels.elementary import exp2_double, normal_density, normal_distribution
from pricer.simulation.kernels.vectors import BLOCK, OPTIONS, use_wide_vectors

_LOG2_E = 1.4426950408889634

#: Bounds are held within this many deviations; there and beyond the density counts as 0.
FAR = 37.0

# Rows of the flat scratch array, all of ``BLOCK`` doubles at fixed places.
HEIGHT = 0 * BLOCK  # ln S
HIGH = 1 * BLOCK  # a leg is alive on LOW < w < HIGH; density and distribution there
HIGH_DENSITY = 2 * BLOCK
UNDER_HIGH = 3 * BLOCK
LOW = 4 * BLOCK
LOW_DENSITY = 5 * BLOCK
UNDER_LOW = 6 * BLOCK
NEXT_HIGH = 7 * BLOCK  # the same after the date's stops
NEXT_HIGH_DENSITY = 8 * BLOCK
UNDER_NEXT_HIGH = 9 * BLOCK
NEXT_LOW = 10 * BLOCK
NEXT_LOW_DENSITY = 11 * BLOCK
UNDER_NEXT_LOW = 12 * BLOCK
FROM = 13 * BLOCK  # bounds of one payment
FROM_DENSITY = 14 * BLOCK
UNDER_FROM = 15 * BLOCK
UNTIL = 16 * BLOCK
UNTIL_DENSITY = 17 * BLOCK
UNDER_UNTIL = 18 * BLOCK
PAID = 19 * BLOCK  # its expectation, and derivatives by height and bounds
BY_HEIGHT = 20 * BLOCK
BY_FROM = 21 * BLOCK
BY_UNTIL = 22 * BLOCK
VALUE = 23 * BLOCK  # of the leg
BY_HIGH = 24 * BLOCK  # of what has been paid, or will be, by the bounds
BY_LOW = 25 * BLOCK
BY_NEXT_HIGH = 26 * BLOCK
BY_NEXT_LOW = 27 * BLOCK
WEIGHTED_UNTIL = 28 * BLOCK
_SIZE = 29 * BLOCK
LEVEL_FROM = 30 * BLOCK
LEVEL_UNTIL = 31 * BLOCK
PLACE = 32 * BLOCK  # of a knot
PLACE_DENSITY = 33 * BLOCK  # times the jump, over the slope of A there
SUM = 34 * BLOCK
SLOPE = 35 * BLOCK
ALIVE = 36 * BLOCK
UP = 37 * BLOCK
DOWN = 38 * BLOCK
N_ROWS = 39


@njit(**OPTIONS)
def held(x: Any) -> Any:
    """``x`` within ``FAR`` deviations."""
    return min(max(x, -FAR), FAR)


@njit(**OPTIONS)
def density_within(x: Any) -> Any:
    """Standard normal density, 0 from ``FAR`` on."""
    return normal_density(held(x)) if abs(x) < FAR else 0.0


@njit(**OPTIONS)
def under(x: Any) -> Any:
    """Standard normal distribution function of any number."""
    return normal_distribution(held(x), density_within(x))


@njit(**OPTIONS)
def natural_exp(x: Any) -> Any:
    """``exp(x)``, x held where no double overflows."""
    return exp2_double(_LOG2_E * min(max(x, -600.0), 600.0))


@njit(**OPTIONS)
def pay_fixed(amount: float, s: Any) -> None:
    """``amount`` on ``FROM < w < UNTIL``."""
    use_wide_vectors()
    for p in range(BLOCK):
        s[PAID + p] = amount * (s[UNDER_UNTIL + p] - s[UNDER_FROM + p])
        s[BY_FROM + p] = -amount * s[FROM_DENSITY + p]
        s[BY_UNTIL + p] = amount * s[UNTIL_DENSITY + p]


@njit(**OPTIONS)
def pay_profile(profile: Any, n_knots: int, v: float, s: Any) -> None:
    """``f(A)`` on ``FROM < w < UNTIL``: ``profile`` holds intercept, slope, knots, bends, jumps."""
    use_wide_vectors()
    growth = np.exp(0.5 * v * v)
    inverse_v = 1.0 / v
    intercept, slope = profile[0], profile[1]
    straight = slope == 0.0
    for j in range(n_knots):
        straight = straight and profile[2 + n_knots + j] == 0.0
    for p in range(BLOCK):
        s[PAID + p] = intercept * (s[UNDER_UNTIL + p] - s[UNDER_FROM + p])
        s[BY_HEIGHT + p] = 0.0
        s[BY_FROM + p] = -s[FROM_DENSITY + p] * intercept
        s[BY_UNTIL + p] = s[UNTIL_DENSITY + p] * intercept
    if not straight:
        for p in range(BLOCK):
            size = natural_exp(s[HEIGHT + p])
            s[_SIZE + p] = size * growth
            s[LEVEL_FROM + p] = size * natural_exp(v * s[FROM + p])
            s[LEVEL_UNTIL + p] = size * natural_exp(v * s[UNTIL + p])
        for p in range(BLOCK):
            until = under(s[UNTIL + p] - v) if s[UNTIL + p] < FAR else 1.0
            start = under(s[FROM + p] - v) if s[FROM + p] > -FAR else 0.0
            moved = slope * s[_SIZE + p] * (until - start)
            s[WEIGHTED_UNTIL + p] = until
            s[PAID + p] += moved
            s[BY_HEIGHT + p] += moved
            s[BY_FROM + p] -= s[FROM_DENSITY + p] * slope * s[LEVEL_FROM + p]
            s[BY_UNTIL + p] += s[UNTIL_DENSITY + p] * slope * s[LEVEL_UNTIL + p]
    for j in range(n_knots):
        knot, bend, jump = profile[2 + j], profile[2 + n_knots + j], profile[2 + 2 * n_knots + j]
        log_knot = np.log(knot) if knot > 0.0 else -1e300
        for p in range(BLOCK):
            place = held((log_knot - s[HEIGHT + p]) * inverse_v)
            start = min(max(place, s[FROM + p]), s[UNTIL + p])
            density = density_within(start)
            above = s[UNDER_UNTIL + p] - normal_distribution(start, density)
            s[PLACE + p] = start
            s[SUM + p] = place
            s[PAID + p] += (jump - bend * knot) * above
            inside = place > s[FROM + p] and place < s[UNTIL + p]
            s[BY_HEIGHT + p] += jump * density * inverse_v if inside else 0.0
            over_from = s[FROM_DENSITY + p] if place <= s[FROM + p] else 0.0
            over_until = s[UNTIL_DENSITY + p] if place < s[UNTIL + p] else 0.0
            s[BY_FROM + p] -= over_from * (jump - bend * knot)
            s[BY_UNTIL + p] += over_until * (jump - bend * knot)
        if bend != 0.0:
            for p in range(BLOCK):
                start = s[PLACE + p]
                further = s[WEIGHTED_UNTIL + p] - (under(start - v) if start > -FAR else 0.0)
                moved = bend * s[_SIZE + p] * further
                s[PAID + p] += moved
                s[BY_HEIGHT + p] += moved
                over_from = s[FROM_DENSITY + p] if s[SUM + p] <= s[FROM + p] else 0.0
                over_until = s[UNTIL_DENSITY + p] if s[SUM + p] < s[UNTIL + p] else 0.0
                s[BY_FROM + p] -= over_from * bend * s[LEVEL_FROM + p]
                s[BY_UNTIL + p] += over_until * bend * s[LEVEL_UNTIL + p]


@njit(**OPTIONS)
def pay_known(profile: Any, n_knots: int, s: Any) -> None:
    """``f(A)`` of a known level A, in ``SUM``, into ``PAID``: for paths without conditioning."""
    use_wide_vectors()
    intercept, slope = profile[0], profile[1]
    for p in range(BLOCK):
        s[PAID + p] = intercept + slope * s[SUM + p]
    for j in range(n_knots):
        knot, bend, jump = profile[2 + j], profile[2 + n_knots + j], profile[2 + 2 * n_knots + j]
        for p in range(BLOCK):
            excess = s[SUM + p] - knot
            s[PAID + p] += bend * excess + jump if excess > 0.0 else 0.0
