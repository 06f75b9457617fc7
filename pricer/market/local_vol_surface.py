"""Local volatility of one underlying: a table that a simulation reads without searching."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import ArrayLike, NDArray

from pricer.market.implied_surface import ImpliedSurface
from pricer.market.svi import butterfly

Array = NDArray[np.float64]

#: Nodes reach this many standard deviations of the log-level at the forward, both sides.
REACH = 8.0
#: Nodes of a row; with the reach, 0.13 standard deviations apart. With 81, smiles of two-humped densities came back
#: through the forward equation only within 0.07 vol points, with 121 within 0.014, with 161 within 0.011.
NODES = 121
#: Cells in time grow by at most this factor and to at most this many years.
GROWTH, LONGEST_CELL = 1.15, 0.25
#: g is not let below this: where the density (nearly) vanishes Dupire's quotient means nothing.
LEAST_G = 0.02
#: A local volatility is at most this many times the implied one at the forward, same date. Steep put wings of
#: short expiries do need ten times: a cap of 5 was measured to cost 0.2 vol points at 10 delta.
CAP = 20.0
#: A fall of total variance up to this size is rounding, not arbitrage.
_ROUNDING = 1e-12


@dataclass(frozen=True, slots=True)
class Clipping:
    """How many nodes of the table had to be clipped, out of ``nodes``.

    ``falling``: total variance falls in time (local volatility 0). ``thin``: g below ``LEAST_G``.
    ``capped``: local volatility above ``CAP`` times the implied one at the forward. ``central``
    counts those of all three kinds within three standard deviations, where paths are.
    """

    nodes: int
    falling: int
    thin: int
    capped: int
    central: int


@dataclass(frozen=True, slots=True, eq=False)
class LocalVolSurface:
    """Local volatility of the pure martingale X (forward 1) by time and log-level ``k = log X``.

    Cell i is the time from ``times[i]`` to ``times[i + 1]``; within it the volatility does not
    depend on time. Row i of ``values`` belongs to nodes ``k = widths[i] * y``, the y uniform
    from ``-reach`` to ``reach``; between nodes it is linear in k, beyond them constant. So
    with ``x = (k - lowest[i]) / spacing[i]`` kept in [0, n - 1] the neighbours are int(x) and int(x) + 1.
    After the last cell the last row holds.

    ``times`` : (m + 1,) ACT/365F years from the valuation date, from 0, increasing.
    ``widths`` : (m,) above 0, the standard deviation of log X at the end of each cell at the forward.
    ``values`` : (m, n) >= 0, annualised.
    """

    times: Array
    widths: Array
    reach: float
    values: Array
    clipping: Clipping

    @property
    def lowest(self) -> Array:
        """Log-level of the first node of each row, (m,)."""
        out: Array = -self.reach * self.widths
        return out

    @property
    def spacing(self) -> Array:
        """Distance of neighbouring nodes of each row in log-level, (m,)."""
        out: Array = (2.0 * self.reach / (self.values.shape[1] - 1)) * self.widths
        return out

    def nodes(self, cell: int) -> Array:
        """Log-levels of a row, (n,)."""
        out: Array = self.widths[cell] * np.linspace(-self.reach, self.reach, self.values.shape[1])
        return out

    def cell(self, times: ArrayLike) -> NDArray[np.intp]:
        """The cell that ends at or after each time (its own shape); the last one after the table's end."""
        found = np.searchsorted(self.times[1:-1], np.asarray(times, dtype=float), side="left")
        return np.asarray(found, dtype=np.intp)

    def volatility(self, k: ArrayLike, time: float) -> Array:
        """Local volatility at log-levels ``k`` (any shape) just before ``time``."""
        cell = int(self.cell(time))
        return np.asarray(np.interp(np.asarray(k, dtype=float), self.nodes(cell), self.values[cell]))

    @classmethod
    def from_implied(
        cls,
        surface: ImpliedSurface,
        horizon: float | None = None,
        times: Sequence[float] | None = None,
        reach: float = REACH,
        nodes: int = NODES,
    ) -> LocalVolSurface:
        """By Dupire (1994) in total variance: ``(dw/dt) / g`` (Gatheral 2006, equation 1.10).

        The row of a cell holds the mean over the cell: the rise of total variance at fixed k,
        exact, times the mean of 1/g (Gauss, two points). A surface flat in strike therefore
        gives exactly its forward volatilities. Cells end at ``horizon`` years (default: the last
        expiry), or are those between the given ``times`` (after 0, increasing; 0 is added).
        Raises ValueError for times that do not increase from 0.
        """
        ends = cell_ends(surface.times, horizon) if times is None else np.asarray(times, dtype=float)
        grid = np.concatenate(([0.0], ends))
        if grid.size < 2 or not np.all(np.diff(grid) > 0.0):
            raise ValueError("the times of a local volatility surface must increase from 0")
        starts, lengths = grid[:-1, None], np.diff(grid)[:, None]
        forward_variance = surface.total_variance(0.0, ends)
        widths = np.sqrt(np.maximum(forward_variance, 1e-12))
        k = widths[:, None] * np.linspace(-reach, reach, nodes)
        rise = surface.total_variance(k, ends[:, None]) - surface.total_variance(k, starts)
        thin = np.zeros(k.shape, dtype=bool)
        inverse = np.zeros(k.shape)
        for weight in (0.5 - np.sqrt(1.0 / 12.0), 0.5 + np.sqrt(1.0 / 12.0)):
            at = surface.derivatives(k, starts + weight * lengths)
            g = butterfly(k, at.variance, at.slope, at.curvature)
            thin |= g < LEAST_G
            inverse += 0.5 / np.maximum(g, LEAST_G)
        local = np.sqrt(np.maximum(rise, 0.0) / lengths * inverse)
        # A cell of no forward variance has no cap either: total variance, not its rise, sets the scale.
        limit = CAP * np.sqrt(forward_variance / ends)[:, None]
        falling, capped = rise < -_ROUNDING, local > limit
        values = _same_mean(np.minimum(local, limit))
        middle = np.abs(np.linspace(-reach, reach, nodes)) <= 3.0
        clipped = falling | thin | capped
        counts = (int(np.count_nonzero(flags)) for flags in (falling, thin, capped, clipped[:, middle]))
        return cls(grid, widths, reach, values, Clipping(values.size, *counts))


def _same_mean(values: Array) -> Array:
    """Nodes (m, n) whose straight lines have the mean of the smooth curve through ``values``, node by node.

    A chord lies above a convex curve by h^2 f'' / 12 on average; nodes are moved by as much.
    """
    bend = np.diff(values, 2, axis=1)
    out = values.copy()
    out[:, 1:-1] -= np.clip(bend, -values[:, 1:-1], values[:, 1:-1]) / 12.0
    return out


def cell_ends(expiries: Sequence[float], horizon: float | None = None) -> Array:
    """Ends of cells that hold every expiry and grow from short to long, up to ``horizon`` (in years)."""
    last = expiries[-1] if horizon is None else horizon
    marks = [0.0, *(time for time in expiries if time < last), last]
    ends: list[float] = []
    for start, end in pairwise(marks):
        while start < end:
            # The first cells are an eighth of the first expiry: the smile there depends little on time.
            length = min(max(start * (GROWTH - 1.0), marks[1] / 8.0), LONGEST_CELL)
            remaining = end - start
            count = max(int(np.ceil(remaining / length - 1e-9)), 1)
            start = end if count == 1 else start + (remaining / 2.0 if count == 2 else length)
            ends.append(start)
    return np.array(ends)
