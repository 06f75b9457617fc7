"""Payments on an average over dates, integrated exactly over the path's common factor."""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from pricer.simulation.kernels.elementary import log_double, normal_distribution
from pricer.simulation.kernels.path_payments import (
    BY_FROM,
    BY_HEIGHT,
    BY_UNTIL,
    FAR,
    FROM,
    FROM_DENSITY,
    HEIGHT,
    LEVEL_FROM,
    LEVEL_UNTIL,
    PAID,
    PLACE,
    PLACE_DENSITY,
    SLOPE,
    SUM,
    UNDER_FROM,
    UNDER_UNTIL,
    UNTIL,
    UNTIL_DENSITY,
    density_within,
    held,
    natural_exp,
    under,
)
from pricer.simulation.kernels.path_tables import (
    FIXING,
    LOG_SHARE,
    factor_deviation,
    height_of,
)
from pricer.simulation.kernels.vectors import BLOCK, OPTIONS, use_wide_vectors

#: Newton steps to where an average passes a knot: its logarithm is nearly linear in w.
_NEWTON = 7


@njit(**OPTIONS)
def _average_at(
    row: int, first: int, last: int, events: Any, event_numbers: Any, readings: Any, degrees: Any, shifts: Any,
    heights: Any, common: Any, s: Any,
) -> None:  # fmt: skip
    """Sum of a leg's fixings, and its slope in w, at the w of ``row``: into ``SUM`` and ``SLOPE``."""
    use_wide_vectors()
    for p in range(BLOCK):
        s[SUM + p] = 0.0
        s[SLOPE + p] = 0.0
    for e in range(first, last):
        q = events[e, FIXING]
        if q >= 0:
            v, share = factor_deviation(q, readings, degrees, shifts), event_numbers[e, LOG_SHARE]
            height_of(q, readings, degrees, heights, common, s)
            for p in range(BLOCK):
                level = natural_exp(s[HEIGHT + p] + share + v * s[row + p])
                s[SUM + p] += level
                s[SLOPE + p] += v * level


@njit(**OPTIONS)
def pay_average(
    profile: Any, n_knots: int, so_far: float, first: int, last: int, events: Any, event_numbers: Any, readings: Any,
    degrees: Any, shifts: Any, heights: Any, common: Any, with_ratios: bool, s: Any, adjoints: Any,
) -> None:  # fmt: skip
    """``f(so_far + sum of fixings)`` on ``FROM < w < UNTIL``; derivatives by heights go to ``adjoints`` at once."""
    use_wide_vectors()
    intercept, slope = profile[0] + profile[1] * so_far, profile[1]
    _average_at(FROM, first, last, events, event_numbers, readings, degrees, shifts, heights, common, s)
    for p in range(BLOCK):
        s[LEVEL_FROM + p] = s[SUM + p]
    _average_at(UNTIL, first, last, events, event_numbers, readings, degrees, shifts, heights, common, s)
    for p in range(BLOCK):
        s[LEVEL_UNTIL + p] = s[SUM + p]
        s[PAID + p] = intercept * (s[UNDER_UNTIL + p] - s[UNDER_FROM + p])
        s[BY_FROM + p] = -s[FROM_DENSITY + p] * (intercept + slope * s[LEVEL_FROM + p])
        s[BY_UNTIL + p] = s[UNTIL_DENSITY + p] * (intercept + slope * s[LEVEL_UNTIL + p])
    for j in range(-1, n_knots):
        bend, jump = slope, 0.0
        for p in range(BLOCK):
            s[PLACE + p] = s[FROM + p]
            s[PLACE_DENSITY + p] = 0.0
        if j >= 0:
            knot = profile[2 + j] - so_far
            bend, jump = profile[2 + n_knots + j], profile[2 + 2 * n_knots + j]
            if knot > 0.0:
                log_knot = np.log(knot)
                for p in range(BLOCK):
                    s[PLACE + p] = 0.0
                for _ in range(_NEWTON):
                    _average_at(
                        PLACE, first, last, events, event_numbers, readings, degrees, shifts, heights, common, s
                    )
                    for p in range(BLOCK):
                        gap = log_double(max(s[SUM + p], 1e-250)) - log_knot
                        s[PLACE + p] = held(s[PLACE + p] - gap * s[SUM + p] / max(s[SLOPE + p], 1e-250))
                _average_at(PLACE, first, last, events, event_numbers, readings, degrees, shifts, heights, common, s)
            for p in range(BLOCK):
                place = s[PLACE + p]
                start = min(max(place, s[FROM + p]), s[UNTIL + p])
                density = density_within(start)
                above = s[UNDER_UNTIL + p] - normal_distribution(start, density)
                inside = place > s[FROM + p] and place < s[UNTIL + p]
                over_from = s[FROM_DENSITY + p] if place <= s[FROM + p] else 0.0
                over_until = s[UNTIL_DENSITY + p] if place < s[UNTIL + p] else 0.0
                s[PLACE + p] = start
                s[PLACE_DENSITY + p] = jump * density / max(s[SLOPE + p], 1e-250) if inside else 0.0
                s[PAID + p] += (jump - bend * knot) * above
                s[BY_FROM + p] -= over_from * (jump + bend * (s[LEVEL_FROM + p] - knot))
                s[BY_UNTIL + p] += over_until * (jump + bend * (s[LEVEL_UNTIL + p] - knot))
        for e in range(first, last):
            q = events[e, FIXING]
            if q < 0:
                continue
            v, share = factor_deviation(q, readings, degrees, shifts), event_numbers[e, LOG_SHARE]
            growth = np.exp(0.5 * v * v)
            height_of(q, readings, degrees, heights, common, s)
            for p in range(BLOCK):
                size = natural_exp(s[HEIGHT + p] + share)
                until = under(s[UNTIL + p] - v) if s[UNTIL + p] < FAR else 1.0
                start = under(s[PLACE + p] - v) if s[PLACE + p] > -FAR else 0.0
                moved = bend * size * growth * max(until - start, 0.0)
                s[PAID + p] += moved
                s[BY_HEIGHT + p] = moved + s[PLACE_DENSITY + p] * size * natural_exp(v * s[PLACE + p])
            if with_ratios:
                for p in range(BLOCK):
                    adjoints[q, p] += s[BY_HEIGHT + p]
