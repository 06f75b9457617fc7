"""Local volatility of one underlying: a table that a simulation reads without searching."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from pricer.market.implied_surface import ImpliedSurface, SurfaceDerivatives
from pricer.market.local_vol_cells import cell_ends
from pricer.market.svi import butterfly

Array = NDArray[np.float64]

#: Nodes reach this many standard deviations of the log-level at the forward, both sides.
REACH = 8.0
#: But so many where a wing is so steep that its own deviation brings the first ones nearer than this: paths get there.
#: The steepest smiles that slices allow then come back within 0.046 instead of 0.081 vol points.
FAR_REACH, NEAR = 12.0, 2.4
#: Nodes per standard deviation. With 5, smiles of two-humped densities came back through the forward equation
#: only within 0.07 vol points, with 7.5 within 0.014, with 10 within 0.011.
DENSITY = 7.5
#: The mean of g over a cell is not let below this: where the density (nearly) vanishes Dupire's quotient means
#: nothing. Slices may come down to 0.01, and a floor above that cost 0.04 vol points on steep smiles.
LEAST_G = 0.005
#: A local volatility is at most this many times that at the forward: the implied one of the date, or the forward one
#: of the cell where that is higher. Steep put wings of short expiries do need ten times: a cap of 5 was measured to
#: cost 0.2 vol points at 10 delta.
CAP = 20.0
#: Gauss points of a cell.
_POINTS = 3
#: A fall of total variance up to this size is rounding, not arbitrage.
_ROUNDING = 1e-12
#: Total variance that stands for none.
_NOTHING = 1e-30


@dataclass(frozen=True, slots=True)
class Clipping:
    """How many nodes of the table had to be clipped, out of ``nodes``.

    ``falling``: total variance falls in time (local volatility 0). ``thin``: mean g below ``LEAST_G``.
    ``capped``: local volatility above ``CAP`` times that at the forward. ``central`` counts those of all
    three kinds within three standard deviations, where paths are.
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
        reach: float | None = None,
    ) -> LocalVolSurface:
        """By Dupire (1994) in total variance: ``(dw/dt) / g`` (Gatheral 2006, equation 1.10).

        The row of a cell holds the mean over the cell, each moment weighted by the density there and then: the
        volatility that moves as much option value through the cell as the surface asks for. Without the weights
        a cell is off by how density and local variance change together, 0.7 vol points in the week of an event.
        A surface flat in strike gives exactly its forward volatilities. Cells end at ``horizon`` years (default:
        the last expiry), or are those between the given ``times`` (after 0, increasing; 0 is added). Nodes
        ``reach`` so many standard deviations (default: ``REACH``, or ``FAR_REACH`` for steep wings).
        Raises ValueError for times that do not increase from 0.
        """
        ends = cell_ends(surface, horizon) if times is None else np.asarray(times, dtype=float)
        grid = np.concatenate(([0.0], ends))
        if grid.size < 2 or not np.all(np.diff(grid) > 0.0):
            raise ValueError("the times of a local volatility surface must increase from 0")
        lengths = np.diff(grid)[:, None]
        at_forward = surface.total_variance(0.0, ends)
        widths = np.sqrt(np.maximum(at_forward, 1e-12))
        own_choice = reach is None
        reach = _reach(surface) if reach is None else reach
        y = np.linspace(-reach, reach, 2 * round(DENSITY * reach) + 1)
        k = widths[:, None] * y
        before, after = surface.derivatives(k, grid[:-1, None]), surface.derivatives(k, grid[1:, None])
        rise, g = after.variance - before.variance, _mean_g(k, before, after)
        local = np.sqrt(np.maximum(rise, 0.0) / lengths / np.maximum(g, LEAST_G))
        forward = np.diff(at_forward, prepend=0.0) / lengths[:, 0]
        limit = CAP * np.sqrt(np.maximum(at_forward / ends, forward))[:, None]
        falling, thin, capped = rise < -_ROUNDING, g < LEAST_G, local > limit
        if own_choice and reach > REACH and np.any(falling):
            # Slices are ordered in time within a bounded range only: then constant beyond is the better wing.
            return cls.from_implied(surface, horizon, times, REACH)
        values = _same_mean(np.minimum(local, limit))
        middle = np.abs(y) <= 3.0
        clipped = falling | thin | capped
        counts = (int(np.count_nonzero(flags)) for flags in (falling, thin, capped, clipped[:, middle]))
        return cls(grid, widths, reach, values, Clipping(values.size, *counts))


def _reach(surface: ImpliedSurface) -> float:
    times = np.array(surface.times)[:, None]
    edges = REACH * np.sqrt(surface.total_variance(0.0, times)) * np.array((-1.0, 1.0))
    own = np.sqrt(surface.total_variance(edges, times))
    return FAR_REACH if np.any(np.abs(edges) < NEAR * own) else REACH


def _mean_g(k: Array, before: SurfaceDerivatives, after: SurfaceDerivatives) -> Array:
    """Mean of g from one moment to the other at fixed k, by the weights with which g counts, (m, n).

    As total variance is linear in time, calls rise by ``w_t C_w`` and their density is ``2 g C_w`` (Black's call C in
    total variance w; Gatheral 2006, section 1.3). So the local variance that lifts calls as much as their quotes rise
    is w_t over the mean of g weighted by C_w, which is ``exp(-(k^2 / w + w / 4) / 2) / sqrt(w)`` but for what is
    constant in time.
    """
    points, weights = np.polynomial.legendre.leggauss(_POINTS)
    logs, gs = [], []
    for share in 0.5 + 0.5 * points:
        w, slope, curvature = (a + share * (b - a) for a, b in zip(before[:3], after[:3], strict=True))
        positive = np.maximum(w, _NOTHING)
        logs.append(-0.5 * (k * k / positive + 0.25 * w + np.log(positive)))
        gs.append(butterfly(k, w, slope, curvature))
    scale = np.maximum.reduce(logs)
    total, out = np.zeros(k.shape), np.zeros(k.shape)
    for weight, log, g in zip(weights, logs, gs, strict=True):
        part = weight * np.exp(log - scale)
        total += part
        out += part * g
    mean: Array = out / total
    return mean


def _same_mean(values: Array) -> Array:
    """Nodes (m, n) whose straight lines have the mean of the smooth curve through ``values``, node by node.

    A chord lies above a convex curve by h^2 f'' / 12 on average; nodes are moved by as much.
    """
    bend = np.diff(values, 2, axis=1)
    out = values.copy()
    out[:, 1:-1] -= np.clip(bend, -values[:, 1:-1], values[:, 1:-1]) / 12.0
    return out
