"""In which pieces of time a local volatility surface may stand still."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from pricer.market.implied_surface import ImpliedSurface

Array = NDArray[np.float64]

#: Neither time nor total variance grows within a cell by more than this part of itself: after a quiet week an event
#: multiplies total variance in a day, and local volatility with it.
GROWTH = 0.15
#: The first expiry is reached in this many equal cells. With 8, steep put wings of one week came back 0.055 vol points
#: off at 10 delta, with 16 0.026.
FIRST_CELLS = 16
#: No cell is longer, in years.
LONGEST_CELL = 0.25
#: Total variance from next to nothing is taken for this part of the rise that follows.
_LEAST_START = 1e-3
#: Where growth of total variance is looked at, in standard deviations at the start of an interval.
_PLACES = (-1.5, 0.0, 1.5)


def cell_ends(surface: ImpliedSurface, horizon: float | None = None) -> Array:
    """Ends of cells up to ``horizon`` years (default: the last expiry), every expiry before it among them."""
    last = surface.times[-1] if horizon is None else horizon
    marks = np.array([0.0, *(time for time in surface.times if time < last), last])
    k = np.sqrt(surface.total_variance(0.0, marks[:-1]))[:, None] * np.array(_PLACES)
    before, after = (surface.total_variance(k, at[:, None]) for at in (marks[:-1], marks[1:]))
    # Total variance is linear in time between marks: from a start of `share` of its rise to 1 + `share`.
    with np.errstate(divide="ignore", invalid="ignore"):
        shares = np.where(after > before, before / (after - before), np.inf).min(axis=1)
    gaps = np.maximum(shares, _LEAST_START) * np.diff(marks)
    ends: list[float] = []
    for i, (start, end) in enumerate(pairwise(marks.tolist())):
        time = start
        while time < end:
            grown = GROWTH * min(time, float(gaps[i]) + time - start)
            length = min(grown if i else end / FIRST_CELLS, LONGEST_CELL)
            remaining = end - time
            count = max(int(np.ceil(remaining / length - 1e-9)), 1)
            time = end if count == 1 else time + (remaining / 2.0 if count == 2 else length)
            ends.append(time)
    return np.array(ends)
