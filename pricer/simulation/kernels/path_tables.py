"""Tables of the path kernel's legs, and what all who read them need."""

from __future__ import annotations

from typing import Any

from numba import njit

from pricer.simulation.kernels.path_payments import HEIGHT
from pricer.simulation.kernels.readings import SINCE, STEP
from pricer.simulation.kernels.vectors import BLOCK, OPTIONS, SUM_OPTIONS, use_wide_vectors

# Columns of the table of events; -1 stands for none.
ABOVE, BELOW, FIRST_PAYMENT, LAST_PAYMENT, FIXING, COUPON = 0, 1, 2, 3, 4, 5
EVENT_COLUMNS = 6
# and of its numbers
LOG_ABOVE, LOG_BELOW, LOG_SHARE, LOG_COUPON, COUPON_AMOUNT, COUPON_DISCOUNT = 0, 1, 2, 3, 4, 5
EVENT_NUMBERS = 6

# Columns of the table of payments.
READING, WHEN, AVERAGED, PROFILE, KNOTS = 0, 1, 2, 3, 4
PAYMENT_COLUMNS = 5
# WHEN
ALIVE_BEFORE, SURVIVING, STOPPED_ABOVE, STOPPED_BELOW = 0, 1, 2, 3

# Columns of the table of legs.
FIRST_EVENT, LAST_EVENT, PARENT_EVENT = 0, 1, 2
LEG_COLUMNS = 3

# Rows kept per event for the way back, single precision; the last three are shares of the derivative by a
# bound that go to the date's own reading and to the other bound.
KEPT_HIGH, KEPT_LOW, KEPT_NEXT_HIGH, KEPT_NEXT_LOW, HIGH_OWN, HIGH_AT_LOW, LOW_OWN, LOW_AT_HIGH = range(8)
N_KEPT = 8
# and in double: bounds before the event, and what branches add to the derivatives by them
HIGH_BEFORE, LOW_BEFORE, ADDED_HIGH, ADDED_LOW = range(4)
N_HELD = 4


@njit(**OPTIONS)
def height_of(q: int, readings: Any, degrees: Any, heights: Any, common: Any, s: Any) -> None:
    """Logarithm of a reading at ``w = 0``."""
    use_wide_vectors()
    step, since, degree = readings[q, STEP], readings[q, SINCE], degrees[q]
    if since < 0:
        for p in range(BLOCK):
            s[HEIGHT + p] = heights[q, p] + degree * common[step, p]
    else:
        for p in range(BLOCK):
            s[HEIGHT + p] = heights[q, p] + degree * (common[step, p] - common[since, p])


@njit(**OPTIONS)
def factor_deviation(q: int, readings: Any, degrees: Any, shifts: Any) -> float:
    """How far one unit of w moves the logarithm of a reading."""
    since = readings[q, SINCE]
    v = degrees[q] * (shifts[readings[q, STEP]] - (shifts[since] if since >= 0 else 0.0))
    return float(max(v, 1e-9))  # hardly at all: stops are taken as they fall


@njit(**SUM_OPTIONS)
def total(s: Any, row: int, m: int) -> float:
    """Sum of a row over ``m`` paths."""
    use_wide_vectors()
    total = 0.0
    for p in range(m):
        total += s[row + p]
    return total
