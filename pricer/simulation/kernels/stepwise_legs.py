"""Legs of one path, integrated over its common factor cell by cell.

Within a cell readings are straight in the factor, so a trigger cuts it once: where a leg is alive, where a coupon has
been missed and where a payoff has a knot are all intervals of the cell, with their shares of the distribution known.
Nothing has to be monotone across cells.
"""

from __future__ import annotations

from typing import Any

from numba import njit

from pricer.simulation.kernels.vectors import OPTIONS

# Columns of an event, and of its numbers.
ABOVE, BELOW, FIRST_PAYMENT, LAST_PAYMENT, FIXING, COUPON, PAYS, STOP_ROW = range(8)
EVENT_COLUMNS = 8
ABOVE_LEVEL, BELOW_LEVEL, SHARE, COUPON_LEVEL, COUPON_AMOUNT, COUPON_DISCOUNT = range(6)
EVENT_NUMBERS = 6

# Columns of a payment.
READING, WHEN, AVERAGED, PROFILE, KNOTS = range(5)
PAYMENT_COLUMNS = 5

# On which paths a payment is made.
ALIVE, SURVIVING, STOPPED_ABOVE, STOPPED_BELOW = range(4)


@njit(**OPTIONS)
def _beyond(a: float, b: float, level: float) -> Any:
    """Where a line from ``a`` at 0 to ``b`` at 1 lies above ``level``: an interval, empty if its end comes first."""
    if a > level:
        return (0.0, 1.0) if b > level else (0.0, (a - level) / (a - b))
    return ((level - a) / (b - a), 1.0) if b > level else (1.0, 0.0)


@njit(**OPTIONS)
def _below(a: float, b: float, level: float) -> Any:
    """The rest."""
    if a > level:
        return (1.0, 0.0) if b > level else ((a - level) / (a - b), 1.0)
    return (0.0, (level - a) / (b - a)) if b > level else (0.0, 1.0)


@njit(**OPTIONS)
def _left(mass: Any, c: int, s: float) -> Any:
    return s * (mass[c, 0] + s * (mass[c, 1] + s * (mass[c, 2] + s * mass[c, 3])))


@njit(**OPTIONS)
def _share(mass: Any, c: int, start: float, end: float) -> Any:
    """Of the distribution between two places of a cell."""
    if end <= start:
        return 0.0
    out = _left(mass, c, end)
    return out if start <= 0.0 else out - _left(mass, c, start)


@njit(**OPTIONS)
def _moment(moment: Any, c: int, start: float, end: float) -> Any:
    return end * _left(moment, c, end) - start * _left(moment, c, start)


@njit(**OPTIONS)
def _pay(profile: Any, first: int, knots: int, a: float, b: float, c: int, start: float, end: float,
         mass: Any, moment: Any) -> Any:  # fmt: skip
    """Integral of a payoff of a straight reading over a part of a cell."""
    if end <= start:
        return 0.0
    intercept, slope = profile[first], profile[first + 1]
    out = (intercept + slope * a) * _share(mass, c, start, end)
    if slope != 0.0:
        out += slope * (b - a) * _moment(moment, c, start, end)
    for k in range(knots):
        knot = profile[first + 2 + k]
        bend, jump = profile[first + 2 + knots + k], profile[first + 2 + 2 * knots + k]
        here, there = _beyond(a, b, knot)
        here, there = max(here, start), min(there, end)
        if there <= here:
            continue
        out += (jump + bend * (a - knot)) * _share(mass, c, here, there)
        if bend != 0.0:
            out += bend * (b - a) * _moment(moment, c, here, there)
    return out


@njit(**OPTIONS)
def value_leg(
    first: int, last: int, sum_so_far: float, events: Any, numbers: Any, payments: Any, profiles: Any, readings: Any,
    mass: Any, moment: Any, alive: Any, running: Any, missed: Any, stopped: Any,
) -> Any:  # fmt: skip
    """Expected discounted payments of the leg of events ``first`` to ``last`` over the path's factor.

    ``readings`` (n_readings, cells + 1); ``alive`` (cells, 2), ``running`` (cells + 1,) and ``missed`` (n_events,
    cells, 2) scratch; probabilities of stops are added to ``stopped`` (n_stops, 2), above and below.
    """
    cells = len(mass)
    for c in range(cells):
        alive[c, 0], alive[c, 1] = 0.0, 1.0
        running[c] = sum_so_far
    running[cells] = sum_so_far
    from_cell, to_cell = 0, cells
    value = 0.0
    for e in range(first, last):
        up, down, fixing, coupon = events[e, ABOVE], events[e, BELOW], events[e, FIXING], events[e, COUPON]
        if fixing >= 0:
            for f in range(cells + 1):
                running[f] += numbers[e, SHARE] * readings[fixing, f]
        while from_cell < to_cell and alive[from_cell, 1] <= alive[from_cell, 0]:
            from_cell += 1
        while to_cell > from_cell and alive[to_cell - 1, 1] <= alive[to_cell - 1, 0]:
            to_cell -= 1
        if from_cell == to_cell:
            return value
        if coupon >= 0:
            for c in range(from_cell, to_cell):
                missed[e, c, 0], missed[e, c, 1] = 0.0, 1.0
        for c in range(from_cell, to_cell):
            start, end = alive[c, 0], alive[c, 1]
            if end <= start:
                continue
            low, high = start, end  # where the leg survives
            above_from, above_to, below_from, below_to = 1.0, 0.0, 1.0, 0.0
            if up >= 0:
                a, b, level = readings[up, c], readings[up, c + 1], numbers[e, ABOVE_LEVEL]
                above_from, above_to = _beyond(a, b, level)
                above_from, above_to = max(above_from, start), min(above_to, end)
                here, there = _below(a, b, level)
                low, high = max(low, here), min(high, there)
            if down >= 0:
                a, b, level = readings[down, c], readings[down, c + 1], numbers[e, BELOW_LEVEL]
                here, there = _below(a, b, level)
                below_from, below_to = max(low, here), min(high, there)
                here, there = _beyond(a, b, level)
                low, high = max(low, here), min(high, there)
            if events[e, PAYS]:
                for p in range(events[e, FIRST_PAYMENT], events[e, LAST_PAYMENT]):
                    when, row = payments[p, WHEN], payments[p, READING]
                    here, there = start, end
                    if when == SURVIVING:
                        here, there = low, high
                    elif when == STOPPED_ABOVE:
                        here, there = above_from, above_to
                    elif when == STOPPED_BELOW:
                        here, there = below_from, below_to
                    if there <= here:
                        continue
                    profile = payments[p, PROFILE]
                    if row < 0:
                        value += profiles[profile] * _share(mass, c, here, there)
                        continue
                    if payments[p, AVERAGED]:
                        a, b = running[c], running[c + 1]
                    else:
                        a, b = readings[row, c], readings[row, c + 1]
                    value += _pay(profiles, profile, payments[p, KNOTS], a, b, c, here, there, mass, moment)
                if events[e, STOP_ROW] >= 0:
                    stopped[events[e, STOP_ROW], 0] += _share(mass, c, above_from, above_to)
                    stopped[events[e, STOP_ROW], 1] += _share(mass, c, below_from, below_to)
                if coupon >= 0:
                    a, b, level = readings[coupon, c], readings[coupon, c + 1], numbers[e, COUPON_LEVEL]
                    here, there = _beyond(a, b, level)
                    paid_from, paid_to = max(here, start), min(there, end)
                    missed_from, missed_to = _below(a, b, level)
                    for j in range(first, e + 1):
                        if events[j, COUPON] < 0 or not events[j, PAYS]:
                            continue
                        since, until = missed[j, c, 0], missed[j, c, 1]
                        if until <= since:
                            continue
                        value += (
                            numbers[j, COUPON_AMOUNT]
                            * numbers[e, COUPON_DISCOUNT]
                            * _share(mass, c, max(paid_from, since), min(paid_to, until))
                        )
                        missed[j, c, 0], missed[j, c, 1] = max(since, missed_from), min(until, missed_to)
            alive[c, 0], alive[c, 1] = low, high
    return value
