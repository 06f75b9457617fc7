"""Coupons in memory, integrated exactly over the path's common factor.

At an event k the coupon of period j <= k is paid where w lies above k's own coupon threshold and below those of j to
k - 1, and where the leg is alive. In terms of distribution functions U of the thresholds that is

    sum_j amount_j max(min(U_j, ..., U_{k-1}, Phi(HIGH)) - max(U_k, Phi(LOW)), 0)

and every threshold needs one U only: all pairs of periods cost a minimum and a sum each.
"""

from __future__ import annotations

from typing import Any

from numba import njit

from pricer.simulation.kernels.elementary import normal_distribution
from pricer.simulation.kernels.path_payments import (
    BY_HIGH,
    BY_LOW,
    HEIGHT,
    HIGH_DENSITY,
    LOW_DENSITY,
    PAID,
    PLACE,
    SUM,
    UNDER_HIGH,
    UNDER_LOW,
    VALUE,
    density_within,
    held,
)
from pricer.simulation.kernels.path_tables import (
    COUPON,
    COUPON_AMOUNT,
    COUPON_DISCOUNT,
    LOG_COUPON,
    factor_deviation,
    height_of,
)
from pricer.simulation.kernels.vectors import BLOCK, OPTIONS, use_wide_vectors

# Rows kept per event: U, its density, the derivative by U, and the smallest U from here to the date that pays.
UNDER, DENSITY, BY_UNDER, SMALLEST = range(4)
N_MEMORY = 4


@njit(**OPTIONS)
def pay_remembered(
    first: int, e: int, events: Any, event_numbers: Any, readings: Any, degrees: Any, shifts: Any, heights: Any,
    common: Any, with_ratios: bool, s: Any, memory: Any,
) -> None:  # fmt: skip
    """What event ``e`` of a leg that began with event ``first`` pays, its own coupon included, into ``VALUE``.

    ``memory`` : (n_events, N_MEMORY, BLOCK). Derivatives by the bounds of the leg are added, those by thresholds kept.
    """
    use_wide_vectors()
    q = events[e, COUPON]
    inverse_v = 1.0 / factor_deviation(q, readings, degrees, shifts)
    log_level = event_numbers[e, LOG_COUPON]
    height_of(q, readings, degrees, heights, common, s)
    for p in range(BLOCK):
        threshold = held((log_level - s[HEIGHT + p]) * inverse_v)
        density = density_within(threshold)
        u = normal_distribution(threshold, density)
        memory[e, UNDER, p] = u
        memory[e, DENSITY, p] = density
        memory[e, BY_UNDER, p] = 0.0
        memory[e, SMALLEST, p] = s[UNDER_HIGH + p]
        s[PLACE + p] = max(u, s[UNDER_LOW + p])
    df = event_numbers[e, COUPON_DISCOUNT]
    amount = df * event_numbers[e, COUPON_AMOUNT]
    for p in range(BLOCK):
        s[PAID + p] = amount * max(s[UNDER_HIGH + p] - s[PLACE + p], 0.0)
    later = e
    for back in range(e - first):
        j = e - 1 - back
        if events[j, COUPON] < 0:
            continue
        amount = df * event_numbers[j, COUPON_AMOUNT]
        for p in range(BLOCK):
            smallest = min(memory[later, SMALLEST, p], memory[j, UNDER, p])
            memory[j, SMALLEST, p] = smallest
            s[PAID + p] += amount * max(smallest - s[PLACE + p], 0.0)
        later = j
    for p in range(BLOCK):
        s[VALUE + p] += s[PAID + p]
    if not with_ratios:
        return
    for p in range(BLOCK):
        s[SUM + p] = 0.0  # amounts paid up to the period's smallest U, and all of them
        s[PAID + p] = 0.0
    for j in range(first, e + 1):
        if events[j, COUPON] < 0:
            continue
        amount = df * event_numbers[j, COUPON_AMOUNT]
        for p in range(BLOCK):
            paid = amount if memory[j, SMALLEST, p] > s[PLACE + p] else 0.0
            s[SUM + p] += paid
            s[PAID + p] += paid
        if j < e:
            for p in range(BLOCK):
                own = memory[j, SMALLEST, p] == memory[j, UNDER, p]
                memory[j, BY_UNDER, p] += s[SUM + p] if own else 0.0
                s[SUM + p] = 0.0 if own else s[SUM + p]
    for p in range(BLOCK):
        at_low = memory[e, UNDER, p] <= s[UNDER_LOW + p]
        memory[e, BY_UNDER, p] -= 0.0 if at_low else s[PAID + p]
        s[BY_LOW + p] -= s[PAID + p] * s[LOW_DENSITY + p] if at_low else 0.0
        s[BY_HIGH + p] += s[SUM + p] * s[HIGH_DENSITY + p]


@njit(**OPTIONS)
def add_remembered(
    first: int, last: int, events: Any, readings: Any, degrees: Any, shifts: Any, memory: Any, adjoints: Any
) -> None:
    """Hand derivatives by thresholds of a leg's coupons over to their readings, ``adjoints`` (n_readings, BLOCK)."""
    use_wide_vectors()
    for e in range(first, last):
        q = events[e, COUPON]
        if q >= 0:
            inverse_v = 1.0 / factor_deviation(q, readings, degrees, shifts)
            for p in range(BLOCK):
                adjoints[q, p] -= inverse_v * memory[e, DENSITY, p] * memory[e, BY_UNDER, p]
