"""Legs with nothing integrated: every path is stopped or not. The yardstick for what smoothing gains."""

from __future__ import annotations

from typing import Any

from numba import njit

from pricer.simulation.kernels.path_payments import (
    ALIVE,
    DOWN,
    HEIGHT,
    LEVEL_FROM,
    LEVEL_UNTIL,
    PAID,
    SUM,
    UP,
    VALUE,
    natural_exp,
    pay_known,
)
from pricer.simulation.kernels.path_tables import (
    ABOVE,
    AVERAGED,
    BELOW,
    COUPON,
    COUPON_AMOUNT,
    COUPON_DISCOUNT,
    FIRST_EVENT,
    FIRST_PAYMENT,
    FIXING,
    HIGH_BEFORE,
    KNOTS,
    LAST_EVENT,
    LAST_PAYMENT,
    LOG_ABOVE,
    LOG_BELOW,
    LOG_COUPON,
    LOG_SHARE,
    PARENT_EVENT,
    PROFILE,
    READING,
    STOPPED_ABOVE,
    STOPPED_BELOW,
    SURVIVING,
    WHEN,
    height_of,
    total,
)
from pricer.simulation.kernels.vectors import BLOCK, OPTIONS, use_wide_vectors


@njit(**OPTIONS)
def plain(
    leg: int, legs: Any, first_sums: Any, events: Any, event_numbers: Any, payments: Any, profiles: Any, readings: Any,
    degrees: Any, heights: Any, common: Any, m: int, s: Any, held_rows: Any, sums: Any,
) -> None:  # fmt: skip
    """As ``forward`` with nothing integrated, ``common`` whole: every path is stopped or not. The yardstick."""
    use_wide_vectors()
    n_legs, n_events = legs.shape[0], events.shape[0]
    parent = legs[leg, PARENT_EVENT]
    for p in range(BLOCK):
        s[VALUE + p] = 0.0
        s[LEVEL_FROM + p] = first_sums[leg]  # the running sum
        s[LEVEL_UNTIL + p] = 0.0  # coupons missed
        s[ALIVE + p] = held_rows[parent, HIGH_BEFORE, p] if parent >= 0 else 1.0
    for e in range(legs[leg, FIRST_EVENT], legs[leg, LAST_EVENT]):
        for p in range(BLOCK):
            held_rows[e, HIGH_BEFORE, p] = s[ALIVE + p]
            s[UP + p] = 0.0
            s[DOWN + p] = 0.0
        above, below = events[e, ABOVE], events[e, BELOW]
        if above >= 0:
            level = event_numbers[e, LOG_ABOVE]
            height_of(above, readings, degrees, heights, common, s)
            for p in range(BLOCK):
                s[UP + p] = s[ALIVE + p] if s[HEIGHT + p] > level else 0.0
        if below >= 0:
            level = event_numbers[e, LOG_BELOW]
            height_of(below, readings, degrees, heights, common, s)
            for p in range(BLOCK):
                s[DOWN + p] = s[ALIVE + p] - s[UP + p] if s[HEIGHT + p] < level else 0.0
        if events[e, FIXING] >= 0:
            share = event_numbers[e, LOG_SHARE]
            height_of(events[e, FIXING], readings, degrees, heights, common, s)
            for p in range(BLOCK):
                s[LEVEL_FROM + p] += natural_exp(s[HEIGHT + p] + share)
        for k in range(events[e, FIRST_PAYMENT], events[e, LAST_PAYMENT]):
            q, when, start = payments[k, READING], payments[k, WHEN], payments[k, PROFILE]
            n_knots = payments[k, KNOTS]
            if q < 0:
                for p in range(BLOCK):
                    s[PAID + p] = profiles[start]
            else:
                height_of(q, readings, degrees, heights, common, s)
                if payments[k, AVERAGED]:
                    for p in range(BLOCK):
                        s[SUM + p] = s[LEVEL_FROM + p]
                else:
                    for p in range(BLOCK):
                        s[SUM + p] = natural_exp(s[HEIGHT + p])
                pay_known(profiles[start : start + 2 + 3 * n_knots], n_knots, s)
            for p in range(BLOCK):
                stopped = s[UP + p] + s[DOWN + p]
                chosen = s[ALIVE + p] - stopped if when == SURVIVING else s[ALIVE + p]
                chosen = s[UP + p] if when == STOPPED_ABOVE else chosen
                chosen = s[DOWN + p] if when == STOPPED_BELOW else chosen
                s[VALUE + p] += chosen * s[PAID + p]
        if events[e, COUPON] >= 0:
            level, amount = event_numbers[e, LOG_COUPON], event_numbers[e, COUPON_AMOUNT]
            df = event_numbers[e, COUPON_DISCOUNT]
            height_of(events[e, COUPON], readings, degrees, heights, common, s)
            for p in range(BLOCK):
                missed = s[LEVEL_UNTIL + p] + amount
                pays = s[HEIGHT + p] > level
                s[VALUE + p] += s[ALIVE + p] * df * missed if pays else 0.0
                s[LEVEL_UNTIL + p] = 0.0 if pays else missed
        sums[n_legs + e] += total(s, UP, m)
        sums[n_legs + n_events + e] += total(s, DOWN, m)
        for p in range(BLOCK):
            s[ALIVE + p] -= s[UP + p] + s[DOWN + p]
    sums[leg] += total(s, VALUE, m)
