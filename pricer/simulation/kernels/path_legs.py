"""One leg along a block of paths, with the common factor of the whole path integrated exactly.

All log-levels of a path move by ``shift(t) w`` with one normal w (see ``simulation.common_steps``).
Given everything else, w alone decides where a leg is stopped: above at the first date whose threshold in w lies below
it, below at the first one whose threshold lies above. So a leg is alive on an interval ``LOW < w < HIGH`` that
shrinks from date to date, and every payment is an integral over an interval of w. Nothing is ever decided by a draw.

Backwards along the path the chain rule carries two numbers, the derivatives by both bounds: each
belongs to the date that set it. All deltas cost about as much as the value, however many assets there are.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

from pricer.simulation.kernels.elementary import normal_distribution
from pricer.simulation.kernels.path_averages import pay_average
from pricer.simulation.kernels.path_memory import add_remembered, pay_remembered
from pricer.simulation.kernels.path_payments import (
    BY_FROM,
    BY_HEIGHT,
    BY_HIGH,
    BY_LOW,
    BY_NEXT_HIGH,
    BY_NEXT_LOW,
    BY_UNTIL,
    FAR,
    FROM,
    HEIGHT,
    HIGH,
    HIGH_DENSITY,
    LOW,
    LOW_DENSITY,
    NEXT_HIGH,
    NEXT_HIGH_DENSITY,
    NEXT_LOW,
    NEXT_LOW_DENSITY,
    PAID,
    PLACE,
    UNDER_HIGH,
    UNDER_LOW,
    UNDER_NEXT_HIGH,
    UNDER_NEXT_LOW,
    UNTIL,
    VALUE,
    density_within,
    held,
    pay_fixed,
    pay_profile,
)
from pricer.simulation.kernels.path_tables import (
    ABOVE,
    ADDED_HIGH,
    ADDED_LOW,
    AVERAGED,
    BELOW,
    COUPON,
    FIRST_EVENT,
    FIRST_PAYMENT,
    HIGH_AT_LOW,
    HIGH_BEFORE,
    HIGH_OWN,
    KEPT_HIGH,
    KEPT_LOW,
    KEPT_NEXT_HIGH,
    KEPT_NEXT_LOW,
    KNOTS,
    LAST_EVENT,
    LAST_PAYMENT,
    LOG_ABOVE,
    LOG_BELOW,
    LOW_AT_HIGH,
    LOW_BEFORE,
    LOW_OWN,
    PARENT_EVENT,
    PROFILE,
    READING,
    STOPPED_ABOVE,
    STOPPED_BELOW,
    SURVIVING,
    WHEN,
    factor_deviation,
    height_of,
    total,
)
from pricer.simulation.kernels.vectors import BLOCK, OPTIONS, SUM_OPTIONS, use_wide_vectors

_F = np.float32


@njit(**OPTIONS)
def _start(parent: int, held_rows: Any, s: Any) -> None:
    use_wide_vectors()
    for p in range(BLOCK):
        s[VALUE + p] = 0.0
        s[HIGH + p] = held_rows[parent, HIGH_BEFORE, p] if parent >= 0 else FAR
        s[LOW + p] = held_rows[parent, LOW_BEFORE, p] if parent >= 0 else -FAR
    for p in range(BLOCK):
        density = density_within(s[HIGH + p])
        s[HIGH_DENSITY + p] = density
        s[UNDER_HIGH + p] = normal_distribution(s[HIGH + p], density)
        density = density_within(s[LOW + p])
        s[LOW_DENSITY + p] = density
        s[UNDER_LOW + p] = normal_distribution(s[LOW + p], density)


@njit(**OPTIONS)
def _stop_above(log_level: float, inverse_v: float, s: Any) -> None:
    use_wide_vectors()
    for p in range(BLOCK):
        bound = held((log_level - s[HEIGHT + p]) * inverse_v)
        bound = max(min(bound, s[HIGH + p]), s[LOW + p])
        density = density_within(bound)
        s[NEXT_HIGH + p] = bound
        s[NEXT_HIGH_DENSITY + p] = density
        s[UNDER_NEXT_HIGH + p] = normal_distribution(bound, density)


@njit(**OPTIONS)
def _stop_below(log_level: float, inverse_v: float, next_high: int, s: Any) -> None:
    """After ``_stop_above``: where both sides cross the one above comes first."""
    use_wide_vectors()
    for p in range(BLOCK):
        s[PLACE + p] = s[next_high + p]
    for p in range(BLOCK):
        bound = held((log_level - s[HEIGHT + p]) * inverse_v)
        bound = min(max(bound, s[LOW + p]), s[PLACE + p])
        density = density_within(bound)
        s[NEXT_LOW + p] = bound
        s[NEXT_LOW_DENSITY + p] = density
        s[UNDER_NEXT_LOW + p] = normal_distribution(bound, density)


@njit(**OPTIONS)
def _share_high(e: int, s: Any, kept: Any) -> None:
    use_wide_vectors()
    for p in range(BLOCK):
        at_low = s[NEXT_HIGH + p] <= s[LOW + p]
        own = s[NEXT_HIGH + p] < s[HIGH + p] and not at_low
        kept[e, HIGH_OWN, p] = _F(1.0) if own else _F(0.0)
        kept[e, HIGH_AT_LOW, p] = _F(1.0) if at_low else _F(0.0)


@njit(**OPTIONS)
def _share_low(e: int, next_high: int, s: Any, kept: Any) -> None:
    use_wide_vectors()
    for p in range(BLOCK):
        s[PLACE + p] = s[next_high + p]
    for p in range(BLOCK):
        at_high = s[NEXT_LOW + p] >= s[PLACE + p]
        own = s[NEXT_LOW + p] > s[LOW + p] and not at_high
        kept[e, LOW_OWN, p] = _F(1.0) if own else _F(0.0)
        kept[e, LOW_AT_HIGH, p] = _F(1.0) if at_high else _F(0.0)


@njit(**OPTIONS)
def _copy_bound(target: int, source: int, s: Any) -> None:
    """A bound with its density and distribution, which lie in the rows after it."""
    use_wide_vectors()
    for p in range(3 * BLOCK):
        s[target + p] = s[source + p]


@njit(**OPTIONS)
def _payment_bounds(when: int, next_high: int, next_low: int, s: Any) -> None:
    """``next_high``, ``next_low`` : rows of the bounds after the date's stops."""
    if when == STOPPED_ABOVE:
        _copy_bound(FROM, next_high, s)
        _copy_bound(UNTIL, HIGH, s)
    elif when == STOPPED_BELOW:
        _copy_bound(FROM, LOW, s)
        _copy_bound(UNTIL, next_low, s)
    elif when == SURVIVING:
        _copy_bound(FROM, next_low, s)
        _copy_bound(UNTIL, next_high, s)
    else:
        _copy_bound(FROM, LOW, s)
        _copy_bound(UNTIL, HIGH, s)


@njit(**OPTIONS)
def _add(row: int, part: int, s: Any) -> None:
    use_wide_vectors()
    for p in range(BLOCK):
        s[row + p] += s[part + p]


@njit(**OPTIONS)
def _collect(when: int, s: Any) -> None:
    """Add one payment's derivatives by its bounds to those of the date."""
    if when == STOPPED_ABOVE:
        _add(BY_NEXT_HIGH, BY_FROM, s)
        _add(BY_HIGH, BY_UNTIL, s)
    elif when == STOPPED_BELOW:
        _add(BY_LOW, BY_FROM, s)
        _add(BY_NEXT_LOW, BY_UNTIL, s)
    elif when == SURVIVING:
        _add(BY_NEXT_LOW, BY_FROM, s)
        _add(BY_NEXT_HIGH, BY_UNTIL, s)
    else:
        _add(BY_LOW, BY_FROM, s)
        _add(BY_HIGH, BY_UNTIL, s)


@njit(**SUM_OPTIONS)
def _difference(s: Any, row: int, less: int, m: int) -> float:
    use_wide_vectors()
    total = 0.0
    for p in range(m):
        total += s[row + p] - s[less + p]
    return total


@njit(**OPTIONS)
def forward(
    leg: int, legs: Any, first_sums: Any, events: Any, event_numbers: Any, payments: Any, profiles: Any, readings: Any,
    degrees: Any, shifts: Any, heights: Any, common: Any, with_ratios: bool, m: int, s: Any, kept: Any,
    held_rows: Any, memory: Any, adjoints: Any, sums: Any,
) -> None:  # fmt: skip
    """Along one leg: adds its value and its stop probabilities to ``sums``, keeps what ``backward`` needs.

    ``sums`` : (n_legs + 2 n_events, ...) values of the legs, then per event the probabilities of being stopped
    above and below there. ``shifts`` : (n_steps,) by one unit of w; ``common`` : (n_steps, BLOCK) what is left of the
    common moves. ``kept``, ``held_rows`` : (n_events, N_KEPT or N_HELD, BLOCK). ``adjoints`` : (n_readings, BLOCK).
    """
    use_wide_vectors()
    n_legs, n_events = legs.shape[0], events.shape[0]
    _start(legs[leg, PARENT_EVENT], held_rows, s)
    for e in range(legs[leg, FIRST_EVENT], legs[leg, LAST_EVENT]):
        for p in range(BLOCK):
            held_rows[e, HIGH_BEFORE, p] = s[HIGH + p]
            held_rows[e, LOW_BEFORE, p] = s[LOW + p]
        above, below = events[e, ABOVE], events[e, BELOW]
        if above >= 0:
            height_of(above, readings, degrees, heights, common, s)
            _stop_above(event_numbers[e, LOG_ABOVE], 1.0 / factor_deviation(above, readings, degrees, shifts), s)
            sums[n_legs + e] += _difference(s, UNDER_HIGH, UNDER_NEXT_HIGH, m)
        if below >= 0:
            height_of(below, readings, degrees, heights, common, s)
            next_high = NEXT_HIGH if above >= 0 else HIGH
            _stop_below(
                event_numbers[e, LOG_BELOW], 1.0 / factor_deviation(below, readings, degrees, shifts), next_high, s
            )
            sums[n_legs + n_events + e] += _difference(s, UNDER_NEXT_LOW, UNDER_LOW, m)
        if with_ratios:
            for p in range(BLOCK):
                held_rows[e, ADDED_HIGH, p] = 0.0
                held_rows[e, ADDED_LOW, p] = 0.0
                s[BY_HIGH + p] = 0.0
                s[BY_LOW + p] = 0.0
                s[BY_NEXT_HIGH + p] = 0.0
                s[BY_NEXT_LOW + p] = 0.0
        for k in range(events[e, FIRST_PAYMENT], events[e, LAST_PAYMENT]):
            q, when, start = payments[k, READING], payments[k, WHEN], payments[k, PROFILE]
            n_knots = payments[k, KNOTS]
            profile = profiles[start : start + 2 + 3 * n_knots]
            _payment_bounds(when, NEXT_HIGH if above >= 0 else HIGH, NEXT_LOW if below >= 0 else LOW, s)
            if q < 0:
                pay_fixed(profiles[start], s)
            elif payments[k, AVERAGED]:
                pay_average(
                    profile, n_knots, first_sums[leg], legs[leg, FIRST_EVENT], e + 1, events, event_numbers, readings,
                    degrees, shifts, heights, common, with_ratios, s, adjoints,
                )  # fmt: skip
            else:
                height_of(q, readings, degrees, heights, common, s)
                pay_profile(profile, n_knots, factor_deviation(q, readings, degrees, shifts), s)
                if with_ratios:
                    for p in range(BLOCK):
                        adjoints[q, p] += s[BY_HEIGHT + p]
            _add(VALUE, PAID, s)
            if with_ratios:
                _collect(when, s)
        if events[e, COUPON] >= 0:
            pay_remembered(
                legs[leg, FIRST_EVENT], e, events, event_numbers, readings, degrees, shifts, heights, common,
                with_ratios, s, memory,
            )  # fmt: skip
        if with_ratios:
            for p in range(BLOCK):
                kept[e, KEPT_HIGH, p] = _F(s[BY_HIGH + p])
                kept[e, KEPT_LOW, p] = _F(s[BY_LOW + p])
            for p in range(BLOCK):
                kept[e, KEPT_NEXT_HIGH, p] = _F(s[BY_NEXT_HIGH + p])
                kept[e, KEPT_NEXT_LOW, p] = _F(s[BY_NEXT_LOW + p])
            if above >= 0:
                _share_high(e, s, kept)
            if below >= 0:
                _share_low(e, NEXT_HIGH if above >= 0 else HIGH, s, kept)
        if above >= 0:
            _copy_bound(HIGH, NEXT_HIGH, s)
        if below >= 0:
            _copy_bound(LOW, NEXT_LOW, s)
    sums[leg] += total(s, VALUE, m)
    if with_ratios:
        first, last = legs[leg, FIRST_EVENT], legs[leg, LAST_EVENT]
        add_remembered(first, last, events, readings, degrees, shifts, memory, adjoints)


@njit(**OPTIONS)
def _to_reading(q: int, by_bound: int, inverse_v: float, e: int, own: int, s: Any, kept: Any, adjoints: Any) -> None:
    use_wide_vectors()
    for p in range(BLOCK):
        adjoints[q, p] -= inverse_v * s[by_bound + p] * float(kept[e, own, p])


@njit(**OPTIONS)
def backward(
    leg: int, legs: Any, events: Any, readings: Any, degrees: Any, shifts: Any, s: Any, kept: Any, held_rows: Any,
    adjoints: Any,
) -> None:  # fmt: skip
    """Back along one leg, after all legs that branch off it: adds derivatives by heights to ``adjoints``."""
    use_wide_vectors()
    for p in range(BLOCK):
        s[BY_HIGH + p] = 0.0
        s[BY_LOW + p] = 0.0
    for back in range(legs[leg, LAST_EVENT] - legs[leg, FIRST_EVENT]):
        e = legs[leg, LAST_EVENT] - 1 - back
        above, below = events[e, ABOVE], events[e, BELOW]
        for p in range(BLOCK):
            s[BY_NEXT_HIGH + p] = s[BY_HIGH + p] + float(kept[e, KEPT_NEXT_HIGH, p])
            s[BY_NEXT_LOW + p] = s[BY_LOW + p] + float(kept[e, KEPT_NEXT_LOW, p])
        if below >= 0:
            _to_reading(
                below,
                BY_NEXT_LOW,
                1.0 / factor_deviation(below, readings, degrees, shifts),
                e,
                LOW_OWN,
                s,
                kept,
                adjoints,
            )
            for p in range(BLOCK):
                low, at_high = s[BY_NEXT_LOW + p], float(kept[e, LOW_AT_HIGH, p])
                s[BY_NEXT_HIGH + p] += at_high * low
                s[BY_NEXT_LOW + p] = (1.0 - float(kept[e, LOW_OWN, p]) - at_high) * low
        if above >= 0:
            _to_reading(
                above,
                BY_NEXT_HIGH,
                1.0 / factor_deviation(above, readings, degrees, shifts),
                e,
                HIGH_OWN,
                s,
                kept,
                adjoints,
            )
            for p in range(BLOCK):
                high, at_low = s[BY_NEXT_HIGH + p], float(kept[e, HIGH_AT_LOW, p])
                s[BY_NEXT_LOW + p] += at_low * high
                s[BY_NEXT_HIGH + p] = (1.0 - float(kept[e, HIGH_OWN, p]) - at_low) * high
        for p in range(BLOCK):
            s[BY_HIGH + p] = s[BY_NEXT_HIGH + p] + float(kept[e, KEPT_HIGH, p]) + held_rows[e, ADDED_HIGH, p]
            s[BY_LOW + p] = s[BY_NEXT_LOW + p] + float(kept[e, KEPT_LOW, p]) + held_rows[e, ADDED_LOW, p]
    parent = legs[leg, PARENT_EVENT]
    if parent >= 0:
        for p in range(BLOCK):
            held_rows[parent, ADDED_HIGH, p] += s[BY_HIGH + p]
            held_rows[parent, ADDED_LOW, p] += s[BY_LOW + p]
