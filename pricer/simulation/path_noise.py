"""Scrambled Sobol points as correlated Brownian motions on a time grid."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from pricer.simulation import sobol
from pricer.simulation.bridge import Bridge
from pricer.simulation.kernels import fused
from pricer.simulation.kernels.elementary import NORMAL_VARIANCE_EXCESS
from pricer.simulation.kernels.vectors import BLOCK, aligned
from pricer.simulation.sampler import rows_in_use
from pricer.simulation.time_grid import TimeGrid

Array = NDArray[np.float64]


class PathNoise:
    """Randomised points, bridge and loadings, with the scratch to make one block of them.

    One instance belongs to one thread; path kernels of several grids may use it in turn.
    """

    def __init__(
        self,
        grid: TimeGrid,
        loadings: Array,
        sizes: Array,
        stream: np.random.Generator,
        randomisations: int,
        *,
        every_date: bool = False,
    ) -> None:
        """``loadings`` : (n, dims) of unit Brownian motions; ``sizes`` : (dims,), see ``Bridge.coordinates``.

        ``stream`` scrambles all randomisations. The best points serve the last date; with ``every_date``
        all dates alike, each beside the root of its time.
        """
        n, dims = loadings.shape
        padded = -(-dims // 4) * 4
        if every_date:
            bridge = Bridge.through(grid.times, grid.dates)
            following = grid.dates[np.searchsorted(grid.dates, np.arange(1, grid.n_steps + 1))]
            coordinates = bridge.coordinates(sizes, 1.0 / np.sqrt(grid.times[following])).ravel()
        else:
            bridge = Bridge.over(grid.times)
            coordinates = bridge.coordinates(sizes).ravel()
        total = len(coordinates)
        directions = np.ascontiguousarray(sobol.extended_directions(total)[coordinates])
        self.times = grid.times
        self.words = sobol.random_words(stream, randomisations, total)
        self.columns = np.empty((randomisations, total, sobol.BITS), dtype=np.uint32)
        fused.scramble(directions, self.words, self.columns)
        self.bridge = bridge
        self.weights = aligned((grid.n_steps, 3), np.float32)
        self.weights[:] = np.stack([bridge.before, bridge.after, bridge.deviation], axis=1)
        self.loadings = aligned((n, padded), np.float32)
        self.loadings[:, :dims] = loadings / np.sqrt(1.0 + NORMAL_VARIANCE_EXCESS)
        self.loadings[:, dims:] = 0.0
        self.widths = rows_in_use(self.loadings)
        self.table = np.empty((total, BLOCK), dtype=np.uint32)
        self.walks = aligned((total, BLOCK), np.float32)
        self.drives = aligned((padded, BLOCK), np.float32)
        self.drives[:] = 0.0
        self.places = aligned((BLOCK,), np.uint32)
        self.fetched = aligned((BLOCK,), np.uint64)

    @property
    def randomisations(self) -> int:
        return len(self.words)

    def uses(self, grid: TimeGrid) -> NDArray[np.int64]:
        """Where the ends of the steps of ``grid`` lie among this noise's times, (n_steps,).

        Raises ValueError for times that this noise does not have.
        """
        places = np.searchsorted(self.times, grid.times[1:])
        if places[-1] >= len(self.times) or np.any(self.times[places] != grid.times[1:]):
            raise ValueError("the grid has times that this noise has not")
        return (places - 1).astype(np.int64)

    def arguments(self, first: int, last: int, grid: TimeGrid) -> tuple[object, ...]:
        """What every path kernel takes first, for points ``first`` to ``last`` on ``grid``."""
        b = self.bridge
        points = first, last, self.columns, self.words
        return *points, b.at, b.left, b.right, self.weights, self.uses(grid), self.loadings, self.widths
