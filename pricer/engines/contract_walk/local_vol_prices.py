"""Prices under local volatility on a contract's dates, by steps of the volatility coordinate.

The scheme and its tables are those of ``simulation.local_vol_tables``, stepped here in plain NumPy. Exchange
rates of composites move beside the levels; a quanto's drift is in the tables.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from pricer.engines.contract_walk.prices import Drawn
from pricer.simulation.local_vol_tables import LocalVolatility, LocalVolTables, Words
from pricer.simulation.lognormal_steps import LognormalSteps
from pricer.simulation.time_grid import TimeGrid

Array = NDArray[np.float64]

_LN2 = float(np.log(2.0))


class LocalVolPrices:
    """``(scales[k] X + floors[k]) Y`` at each date: X under local volatility, Y the exchange rate's martingale or 1."""

    def __init__(
        self,
        surfaces: Sequence[LocalVolatility],
        grid: TimeGrid,
        steps: LognormalSteps,
        correlation: Array,
        exposures: Array,
        scales: Array,
        floors: Array,
        *,
        composite: bool,
    ) -> None:
        """``scales``, ``floors`` (n_dates, n) on the dates of ``grid``; ``exposures`` (n, m)."""
        self._grid, self._steps, self._exposures, self._composite = grid, steps, exposures, composite
        self._scales, self._floors = scales[:, :, None], floors[:, :, None]
        tables = LocalVolTables.of(surfaces, grid, steps.shifts)
        self._starts, self._start_slopes = tables.starts.astype(float), tables.start_slopes.astype(float)
        self._lowest, self._per_node = tables.lowest.astype(float), tables.per_node.astype(float)
        self._moves, self._levels = _decoded(tables.moves), _decoded(tables.levels)
        n = len(surfaces)
        rows = len(correlation) if composite else n
        values, axes = np.linalg.eigh(correlation[:rows, :rows])
        kept = (values > 1e-13 * values[-1])[::-1]
        self._loadings = (axes[:, ::-1] * np.sqrt(np.maximum(values[::-1], 0.0)))[:, kept]

    @property
    def clock(self) -> Array:
        return self._grid.times

    @property
    def sizes(self) -> Array:
        return np.asarray(np.linalg.norm(self._loadings, axis=0))

    def draw(self, walks: Array) -> Drawn:
        noise = self._noise(walks)
        everything = np.arange(len(self._starts))
        conversion = self._conversion(noise)

        def started_at(asset: int, factor: float) -> Array:
            found = self._levels_of(np.array([asset]), noise, np.log(factor))[:, 0] * self._scales[:, asset]
            return np.asarray(found if conversion is None else found * conversion[:, asset])

        random = self._levels_of(everything, noise) * self._scales
        if conversion is None:
            return Drawn(random, self._floors, started_at)
        return Drawn(random * conversion, self._floors * conversion, started_at)

    def _levels_of(self, assets: NDArray[np.int64], noise: Array, start: float = 0.0) -> Array:
        """X at the dates, (n_dates, assets, paths), where ln X starts from ``start``."""
        grid, paths = self._grid, noise.shape[2]
        places = {int(done): k for k, done in enumerate(grid.dates)}
        out = np.empty((len(grid.dates), len(assets), paths))
        starts = self._starts + start * self._start_slopes
        q = np.repeat(starts[assets, None], paths, axis=1)
        last_node = self._levels.shape[-2] - 2
        for s in range(grid.n_steps):
            q += noise[s, assets]
            nodes = (q - self._lowest[s, assets, None]) * self._per_node[s, assets, None]
            low = np.clip(nodes, 0, last_node).astype(np.int64)
            nodes -= low
            if s + 1 in places:
                k = places[s + 1]
                out[k] = np.exp(_LN2 * _look_up(self._levels[k, assets], low, nodes))
            if s + 1 < grid.n_steps:
                q += _look_up(self._moves[s, assets], low, nodes)
        return out

    def _noise(self, walks: Array) -> Array:
        moves = np.diff(walks, axis=0, prepend=np.zeros((1, *walks.shape[1:])))
        return np.asarray(self._loadings @ moves)

    def _conversion(self, noise: Array) -> Array | None:
        """The martingale of each asset's exchange rate at the dates; None where prices are not converted."""
        if not self._composite:
            return None
        n, ends = len(self._starts), self._grid.dates - 1
        rates = np.cumsum(self._steps.volatilities[:, n:, None] * noise[:, n:], axis=0)[ends]
        drops = 0.5 * np.cumsum(self._steps.rate_variances, axis=0)[ends]
        return np.asarray(np.exp(self._exposures @ rates - drops[:, :, None]))


def _decoded(table: Words) -> Array:
    """Values and rises side by side, (..., NODES, 2)."""
    halves = (
        half.astype(np.uint32).view(np.float32) for half in (table & np.uint64(0xFFFFFFFF), table >> np.uint64(32))
    )
    return np.stack([half.astype(float) for half in halves], axis=-1)


def _look_up(table: Array, low: NDArray[np.int64], part: Array) -> Array:
    """Values of ``table`` (n, NODES, 2) at node ``low`` and ``part`` of the way to the next, both (n, paths)."""
    n, nodes = table.shape[:2]
    flat = table.reshape(n * nodes, 2)
    places = low + (np.arange(n) * nodes)[:, None]
    return np.asarray(flat[places, 0] + flat[places, 1] * part)
