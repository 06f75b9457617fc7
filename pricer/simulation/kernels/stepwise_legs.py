"""Legs of one path, integrated over its common factor cell by cell, and their derivatives by readings.

Within a cell readings are straight in the factor, so a trigger cuts it once: where a leg is alive, where a coupon has
been missed and where a payoff has a knot are all intervals of the cell, with their shares of the distribution known.
Nothing has to be monotone across cells. An end of an interval remembers which reading cut it: a payment moves
with that reading by its amount there times the density.
"""

from __future__ import annotations

from typing import Any

from numba import njit

from pricer.simulation.kernels.path_tables import (
    AVERAGED,
    KNOTS,
    PROFILE,
    READING,
    STOPPED_ABOVE,
    STOPPED_BELOW,
    SURVIVING,
    WHEN,
)
from pricer.simulation.kernels.stepwise_cells import (
    KNOT,
    UNCUT,
    above,
    below,
    density,
    higher,
    lower,
    moment_between,
    move,
    share_between,
)
from pricer.simulation.kernels.vectors import OPTIONS

# Columns of an event, and of its numbers.
ABOVE, BELOW, FIRST_PAYMENT, LAST_PAYMENT, FIXING, COUPON, PAYS, STOP_ROW = range(8)
EVENT_COLUMNS = 8
ABOVE_LEVEL, BELOW_LEVEL, SHARE, COUPON_LEVEL, COUPON_AMOUNT, COUPON_DISCOUNT = range(6)
EVENT_NUMBERS = 6


@njit(**OPTIONS)
def _fixed(
    amount: float, c: int, start: float, start_row: int, end: float, end_row: int, readings: Any, mass: Any,
    with_slopes: bool, adjoints: Any,
) -> Any:  # fmt: skip
    """An amount on a part of a cell."""
    if end <= start:
        return 0.0
    if with_slopes:
        if start_row >= 0:
            move(adjoints[start_row], readings[start_row], c, start, -amount * density(mass, c, start))
        if end_row >= 0:
            move(adjoints[end_row], readings[end_row], c, end, amount * density(mass, c, end))
    return amount * share_between(mass, c, start, end)


@njit(**OPTIONS)
def _straight(
    p: float, q: float, line: Any, line_adjoints: Any, c: int, start: float, start_row: int, end: float, end_row: int,
    readings: Any, mass: Any, moment: Any, with_slopes: bool, adjoints: Any,
) -> Any:  # fmt: skip
    """``p + q`` times a straight line on a part of a cell."""
    a, b = line[c], line[c + 1]
    share = share_between(mass, c, start, end)
    first = moment_between(moment, c, start, end) if q != 0.0 else 0.0
    if with_slopes:
        line_adjoints[c] += q * (share - first)
        line_adjoints[c + 1] += q * first
        if start_row != UNCUT:
            moved = -(p + q * (a + (b - a) * start)) * density(mass, c, start)
            if start_row == KNOT:
                move(line_adjoints, line, c, start, moved)
            else:
                move(adjoints[start_row], readings[start_row], c, start, moved)
        if end_row != UNCUT:
            moved = (p + q * (a + (b - a) * end)) * density(mass, c, end)
            if end_row == KNOT:
                move(line_adjoints, line, c, end, moved)
            else:
                move(adjoints[end_row], readings[end_row], c, end, moved)
    return (p + q * a) * share + q * (b - a) * first


@njit(**OPTIONS)
def _payoff(
    profile: Any, first: int, knots: int, line: Any, line_adjoints: Any, c: int, start: float, start_row: int,
    end: float, end_row: int, readings: Any, mass: Any, moment: Any, with_slopes: bool, adjoints: Any,
) -> Any:  # fmt: skip
    """A piecewise linear payoff of a straight line on a part of a cell."""
    out = 0.0
    if profile[first] != 0.0 or profile[first + 1] != 0.0:
        out += _straight(
            profile[first], profile[first + 1], line, line_adjoints, c, start, start_row, end, end_row, readings, mass,
            moment, with_slopes, adjoints,
        )  # fmt: skip
    for k in range(knots):
        knot = profile[first + 2 + k]
        bend, jump = profile[first + 2 + knots + k], profile[first + 2 + 2 * knots + k]
        here, there = above(line[c], line[c + 1], knot)
        low, low_row = higher(start, start_row, here, KNOT)
        high, high_row = lower(end, end_row, there, KNOT)
        if high > low:
            out += _straight(
                jump - bend * knot, bend, line, line_adjoints, c, low, low_row, high, high_row, readings, mass, moment,
                with_slopes, adjoints,
            )  # fmt: skip
    return out


@njit(**OPTIONS)
def value_leg(
    first: int, last: int, sum_so_far: float, events: Any, numbers: Any, payments: Any, profiles: Any, readings: Any,
    mass: Any, moment: Any, alive: Any, cuts: Any, running: Any, missed: Any, missed_cuts: Any, stopped: Any,
    pending: Any, with_slopes: bool, adjoints: Any, of_running: Any,
) -> Any:  # fmt: skip
    """Expected discounted payments of the leg of events ``first`` to ``last`` over the path's factor.

    ``readings`` (n_readings, cells + 1); probabilities of stops are added to ``stopped`` (n_stops, 2), above and
    below, and derivatives by readings to ``adjoints`` (n_readings, cells + 1). Scratch: ``alive`` (cells, 2) and
    ``cuts`` (cells, 2) integers; ``running`` (cells + 1,), ``of_running`` (n_events, cells + 1); ``missed`` (n_events,
    cells, 2), ``missed_cuts`` and ``pending`` (cells,) integers: the first event whose coupon may still be missed.
    """
    cells = len(mass)
    for c in range(cells):
        alive[c, 0], alive[c, 1] = 0.0, 1.0
        cuts[c, 0] = cuts[c, 1] = UNCUT
        running[c] = sum_so_far
        pending[c] = first
    running[cells] = sum_so_far
    fixes = False
    from_cell, to_cell = 0, cells
    value = 0.0
    done = first
    for e in range(first, last):
        up, down, fixing, coupon = events[e, ABOVE], events[e, BELOW], events[e, FIXING], events[e, COUPON]
        if fixing >= 0:
            fixes = True
            for f in range(cells + 1):
                running[f] += numbers[e, SHARE] * readings[fixing, f]
                of_running[e, f] = 0.0
        while from_cell < to_cell and alive[from_cell, 1] <= alive[from_cell, 0]:
            from_cell += 1
        while to_cell > from_cell and alive[to_cell - 1, 1] <= alive[to_cell - 1, 0]:
            to_cell -= 1
        if from_cell == to_cell:
            break
        done = e + 1
        if coupon >= 0:
            for c in range(from_cell, to_cell):
                missed[e, c, 0], missed[e, c, 1] = 0.0, 1.0
                missed_cuts[e, c, 0] = missed_cuts[e, c, 1] = UNCUT
        for c in range(from_cell, to_cell):
            start, end, start_row, end_row = alive[c, 0], alive[c, 1], cuts[c, 0], cuts[c, 1]
            if end <= start:
                continue
            low, high, low_row, high_row = start, end, start_row, end_row  # where the leg survives
            up_from, up_to, up_from_row, up_to_row = 1.0, 0.0, UNCUT, UNCUT
            down_from, down_to, down_from_row, down_to_row = 1.0, 0.0, UNCUT, UNCUT
            if up >= 0:
                a, b, level = readings[up, c], readings[up, c + 1], numbers[e, ABOVE_LEVEL]
                here, there = above(a, b, level)
                up_from, up_from_row = higher(start, start_row, here, up)
                up_to, up_to_row = lower(end, end_row, there, up)
                here, there = below(a, b, level)
                low, low_row = higher(low, low_row, here, up)
                high, high_row = lower(high, high_row, there, up)
            if down >= 0:
                a, b, level = readings[down, c], readings[down, c + 1], numbers[e, BELOW_LEVEL]
                here, there = below(a, b, level)
                down_from, down_from_row = higher(low, low_row, here, down)
                down_to, down_to_row = lower(high, high_row, there, down)
                here, there = above(a, b, level)
                low, low_row = higher(low, low_row, here, down)
                high, high_row = lower(high, high_row, there, down)
            if events[e, PAYS]:
                for p in range(events[e, FIRST_PAYMENT], events[e, LAST_PAYMENT]):
                    when, row, profile = payments[p, WHEN], payments[p, READING], payments[p, PROFILE]
                    here, here_row, there, there_row = start, start_row, end, end_row
                    if when == SURVIVING:
                        here, here_row, there, there_row = low, low_row, high, high_row
                    elif when == STOPPED_ABOVE:
                        here, here_row, there, there_row = up_from, up_from_row, up_to, up_to_row
                    elif when == STOPPED_BELOW:
                        here, here_row, there, there_row = down_from, down_from_row, down_to, down_to_row
                    if there <= here:
                        continue
                    if row < 0:
                        value += _fixed(
                            profiles[profile], c, here, here_row, there, there_row, readings, mass, with_slopes,
                            adjoints,
                        )  # fmt: skip
                    elif payments[p, AVERAGED]:
                        value += _payoff(
                            profiles, profile, payments[p, KNOTS], running, of_running[e], c, here, here_row, there,
                            there_row, readings, mass, moment, with_slopes, adjoints,
                        )  # fmt: skip
                    else:
                        value += _payoff(
                            profiles, profile, payments[p, KNOTS], readings[row], adjoints[row], c, here, here_row,
                            there, there_row, readings, mass, moment, with_slopes, adjoints,
                        )  # fmt: skip
                if events[e, STOP_ROW] >= 0:
                    stopped[events[e, STOP_ROW], 0] += share_between(mass, c, up_from, up_to)
                    stopped[events[e, STOP_ROW], 1] += share_between(mass, c, down_from, down_to)
                if coupon >= 0:
                    a, b, level = readings[coupon, c], readings[coupon, c + 1], numbers[e, COUPON_LEVEL]
                    if a <= level and b <= level:
                        continue_from = pending[c]  # nothing is paid, and all is missed
                    else:
                        continue_from = e + 1 if a > level and b > level else pending[c]
                        here, there = above(a, b, level)
                        paid_from, paid_from_row = higher(start, start_row, here, coupon)
                        paid_to, paid_to_row = lower(end, end_row, there, coupon)
                        missed_from, missed_to = below(a, b, level)
                        for j in range(pending[c], e + 1):
                            if events[j, COUPON] < 0:
                                continue
                            since, until = missed[j, c, 0], missed[j, c, 1]
                            if until <= since:
                                continue
                            since_row, until_row = missed_cuts[j, c, 0], missed_cuts[j, c, 1]
                            here, here_row = higher(paid_from, paid_from_row, since, since_row)
                            there, there_row = lower(paid_to, paid_to_row, until, until_row)
                            value += _fixed(
                                numbers[j, COUPON_AMOUNT] * numbers[e, COUPON_DISCOUNT], c, here, here_row, there,
                                there_row, readings, mass, with_slopes, adjoints,
                            )  # fmt: skip
                            missed[j, c, 0], missed_cuts[j, c, 0] = higher(since, since_row, missed_from, coupon)
                            missed[j, c, 1], missed_cuts[j, c, 1] = lower(until, until_row, missed_to, coupon)
                    pending[c] = continue_from
            alive[c, 0], alive[c, 1] = low, high
            cuts[c, 0], cuts[c, 1] = low_row, high_row
    if with_slopes and fixes:
        for f in range(cells + 1):
            later = 0.0
            for back in range(done - first):
                e = done - 1 - back
                if events[e, FIXING] >= 0:
                    later += of_running[e, f]
                    adjoints[events[e, FIXING], f] += numbers[e, SHARE] * later
    return value
