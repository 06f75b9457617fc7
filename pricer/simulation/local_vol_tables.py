"""From local volatility surfaces and a time grid to the tables that the path kernels read."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from pricer.simulation.time_grid import TimeGrid

Array = NDArray[np.float64]
Single = NDArray[np.float32]
Words = NDArray[np.uint64]

#: Nodes of a table, and how many deviations of the volatility coordinate they reach to either side.
NODES = 256
_REACH = 6.0

#: Nodes of the Gauss-Hermite rule for the mean of a step.
_QUADRATURE = 10

#: A volatility of less than this part of that at the forward is raised to it: the coordinate needs
#: a volatility that does not vanish.
_LEAST = 0.02


class LocalVolatility(Protocol):
    """Local volatility of a unit martingale by time and log-level, constant in time within cells.

    ``times`` : (m + 1,) from 0; cell i ends at ``times[i + 1]``, the last cell holds ever after.
    ``values`` : (m, n) annualised, at log-levels ``widths[i] * y``, y equidistant in
    ``[-reach, reach]``, linear between, constant beyond. ``pricer.market.local_vol_surface`` makes them.
    """

    @property
    def times(self) -> Array: ...
    @property
    def widths(self) -> Array: ...
    @property
    def reach(self) -> float: ...
    @property
    def values(self) -> Array: ...


@dataclass(frozen=True, slots=True)
class StepRows:
    """One volatility per log-level for every step: ``values`` (n_steps, n_k) at ``widths * y``."""

    widths: Array  # (n_steps,)
    reach: float
    values: Array

    @classmethod
    def of(cls, surface: LocalVolatility, grid: TimeGrid) -> StepRows:
        """Root of the mean variance over each step at fixed log-level.

        The mean, not the middle: surfaces jump in time where their quotes do, and a scheme that
        missed where would lose an order. Raises ValueError for volatilities that are negative or not finite.
        """
        if not np.all(np.isfinite(surface.values)) or np.any(surface.values < 0.0):
            raise ValueError("local volatilities must be finite and not negative")
        m, n = surface.values.shape
        y = np.linspace(-surface.reach, surface.reach, n)
        starts, ends = surface.times[:-1], np.append(surface.times[1:-1], np.inf)
        cells = np.minimum(np.searchsorted(surface.times[1:], grid.times[1:] * (1.0 - 1e-12)), m - 1)
        widths = surface.widths[cells]
        values = np.empty((grid.n_steps, n))
        for s, (t0, t1) in enumerate(zip(grid.times[:-1], grid.times[1:], strict=True)):
            shares = np.maximum(np.minimum(ends, t1) - np.maximum(starts, t0), 0.0) / (t1 - t0)
            variance = np.zeros(n)
            for cell in np.flatnonzero(shares > 1e-12):
                row = np.interp(widths[s] * y, surface.widths[cell] * y, surface.values[cell])
                variance += shares[cell] * row * row
            centre = float(np.interp(0.0, y, variance))
            least = max(_LEAST * np.sqrt(centre), 1e-4)
            values[s] = np.maximum(_smooth(np.sqrt(variance)), least)
        return cls(widths, surface.reach, values)

    @property
    def central(self) -> Array:
        """Volatility at the forward over each step, (n_steps,)."""
        y = np.linspace(-self.reach, self.reach, self.values.shape[1])
        return np.array([np.interp(0.0, y, row) for row in self.values])


@dataclass(frozen=True, slots=True)
class LocalVolTables:
    """What ``kernels.local_vol`` reads; a node of a table is a word as described there.

    ``moves`` : (n_steps - 1, n, NODES), from after the noise of a step to before that of the next.
    ``levels`` : (n_dates, n, NODES), base-2 log-level at each date, by the coordinate of the step that ends
    there; ``before`` : (n_dates, n, NODES) the same before that step, by the coordinate of the one before it, and
    ``deviations`` likewise that of the log-price over that step; NaN at a date that ends the first step,
    where ``first_deviations`` (n,) has it. ``lowest``, ``per_node`` : (n_steps, n) of the nodes.
    ``starts``, ``start_slopes`` : (n,) the coordinate at time 0 and its slope in the log-level.
    """

    moves: Words
    levels: Words
    before: Words
    deviations: Words
    first_deviations: Array
    lowest: Single
    per_node: Single
    starts: Single
    start_slopes: Single

    @classmethod
    def of(cls, surfaces: Sequence[LocalVolatility], grid: TimeGrid, shifts: Array | None = None) -> LocalVolTables:
        """Build all tables; some 0.1 ms per step and asset. Raises ValueError for fewer than two steps.

        ``shifts`` : (n_steps, n) taken off the Brownian increments of each step, as a change of measure does. The
        coordinate moves like its noise, so a table that leads to a step takes the step's shift with it; that of
        the last step is left to the kernel.
        """
        from pricer.simulation.kernels.local_vol_tables import build

        n_steps, n = grid.n_steps, len(surfaces)
        if n_steps < 2:
            raise ValueError("a local-volatility path needs at least two steps")
        nodes, weights = _normal_quadrature()
        moves, levels = np.empty((n_steps - 1, n, NODES)), np.empty((n_steps, n, NODES))
        deviations, starts = np.empty((n_steps - 1, n, NODES)), np.empty((n, 3))
        edges, spacings = np.empty((n_steps, n)), np.empty((n_steps, n))
        for i, surface in enumerate(surfaces):
            rows = StepRows.of(surface, grid)
            edge, spacing = _nodes(rows.central, grid.lengths)
            edges[:, i], spacings[:, i] = edge, spacing
            lows = -rows.reach * rows.widths
            steps = 2.0 * rows.reach * rows.widths / (rows.values.shape[1] - 1)
            of_asset = tuple(np.empty((m, NODES)) for m in (n_steps - 1, n_steps, n_steps - 1))
            inputs = rows.values, lows, steps, grid.lengths, edge, spacing, nodes, weights
            build(*inputs, *of_asset, starts[i])
            moves[:, i], levels[:, i], deviations[:, i] = of_asset
        levels /= np.log(2.0)
        if shifts is not None:
            moves -= shifts[1:, :, None]
            starts[:, 0] -= shifts[0]
        return cls(
            moves=_table(moves),
            levels=_table(levels[grid.dates - 1]),
            before=_table(_at(levels, grid.dates - 2)),
            deviations=_table(_at(deviations, grid.dates - 2)),
            first_deviations=starts[:, 2].copy(),
            lowest=edges.astype(np.float32),
            per_node=(1.0 / spacings).astype(np.float32),
            starts=starts[:, 0].astype(np.float32),
            start_slopes=starts[:, 1].astype(np.float32),
        )


def _at(values: Array, places: NDArray[np.int64]) -> Array:
    """Rows of ``values``, NaN for the places below 0."""
    out = values[places]
    out[places < 0] = np.nan
    return out


def _smooth(row: Array) -> Array:
    """Nodes of a smooth curve with the mean, cell by cell, of the straight pieces between ``row``, to fourth order.

    Paths follow a smooth curve through the nodes, a surface is straight between them. In between, straight
    pieces of a curved smile lie higher: by 0.02 points of implied volatility at 0.2 deviations a node.
    """
    out = row.copy()
    out[1:-1] += (row[:-2] - 2.0 * row[1:-1] + row[2:]) / 12.0
    return out


def _nodes(central: Array, lengths: Array) -> tuple[Array, Array]:
    """First node and distance of the nodes of each step, two (n_steps,); the coordinate 0 is a node."""
    variance = np.cumsum(central**2 * lengths)
    deviation = np.sqrt(variance) / central
    down, up = _REACH * deviation + 0.5 * variance / central, _REACH * deviation
    below = np.ceil((NODES - 1) * down / (down + up))
    spacing = np.maximum(down / below, up / (NODES - 1 - below))
    return -below * spacing, spacing


def _table(values: Array) -> Words:
    """Words of value (low half) and rise to the next node (high half), (..., NODES); the last rise is not read."""
    rises = np.diff(values, axis=-1, append=values[..., -1:])
    value, rise = (np.ascontiguousarray(part, dtype=np.float32).view(np.uint32) for part in (values, rises))
    return value.astype(np.uint64) | rise.astype(np.uint64) << np.uint64(32)


@lru_cache(maxsize=1)
def _normal_quadrature() -> tuple[Array, Array]:
    nodes, weights = np.polynomial.hermite_e.hermegauss(_QUADRATURE)
    return nodes, weights / weights.sum()
