"""Runs the local-volatility kernels and keeps the sums of every randomisation."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike, NDArray

from pricer.simulation.kernels import local_vol_paths as paths_kernel
from pricer.simulation.kernels import payoffs
from pricer.simulation.kernels.vectors import BLOCK, aligned
from pricer.simulation.loadings import principal_components
from pricer.simulation.local_vol_plan import LocalVolPlan
from pricer.simulation.local_vol_tables import LocalVolatility, LocalVolTables
from pricer.simulation.path_noise import PathNoise
from pricer.simulation.sampler import KINDS
from pricer.simulation.time_grid import TimeGrid

Array = NDArray[np.float64]


class LocalVolSampler:
    """Sums over local-volatility paths, one row per randomisation, that only ever grow.

    Paths are in single precision up to the levels, the payoff in double. One instance belongs to
    one thread; the work itself holds no interpreter lock. Memory does not depend on the number of points.
    """

    def __init__(self, plan: LocalVolPlan, grid: TimeGrid, noise: PathNoise, *, with_ratios: bool = True) -> None:
        """``grid`` : the noise's own, or one with part of its times. ``with_ratios`` also sums sensitivities."""
        n = plan.design.n_assets
        self._plan, self._grid, self._noise, self._with_ratios = plan, grid, noise, with_ratios
        self._tables = LocalVolTables.of(plan.surfaces, grid)
        f = plan.design.payoff
        self._profile = np.array([f.intercept, f.slope, *f.knots, *f.bends, *f.jumps], dtype=float)
        self._rank_weights = plan.design.rank_weights.astype(np.float32)
        self._planes = aligned((paths_kernel.PLANES, n, BLOCK), np.float32)
        self._precisions = aligned((n, BLOCK), np.float64)
        self._rows = aligned((3, BLOCK), np.float64)
        self._rows[:] = 0.0
        self._paths = aligned((payoffs.PATH_ROWS * BLOCK,), np.float64)
        self.points = 0
        self.sums = np.zeros((noise.randomisations, 2 + 3 * n))

    def extend(self, points: int) -> Array:
        """Go on to ``points`` per randomisation; the sums so far (randomisations, 2 + 3 n).

        ``points`` is a power of two, or a multiple of 256. Columns: see ``kernels.local_vol_paths``.
        """
        plan, tables, noise, design = self._plan, self._tables, self._noise, self._plan.design
        if self.points % BLOCK:  # a short first block cannot be continued, and costs nothing to repeat
            self.points = 0
            self.sums[:] = 0.0
        paths_kernel.accumulate(
            *noise.arguments(self.points, points, self._grid),
            float(self._grid.lengths[-1]),
            tables.moves,
            tables.before_last,
            tables.deviations,
            tables.lowest,
            tables.per_node,
            tables.starts,
            tables.start_slopes,
            plan.shares,
            plan.lognormal_volatilities,
            plan.years,
            plan.smooth,
            plan.inverse,
            design.n_common,
            design.degree,
            KINDS[design.kind],
            plan.scales,
            plan.log2_scale,
            self._rank_weights,
            self._profile,
            self._with_ratios,
            noise.table,
            noise.walks,
            noise.drives,
            noise.places,
            noise.fetched,
            self._planes,
            self._precisions,
            self._rows,
            self._paths,
            self.sums,
        )
        self.points = points
        return self.sums


def local_vol_levels(
    surfaces: Sequence[LocalVolatility],
    correlation: Array,
    dates: ArrayLike,
    *,
    steps: int,
    points: int,
    streams: Sequence[np.random.Generator],
) -> NDArray[np.float32]:
    """Levels of the unit martingales at several dates, (randomisations, n_dates, n, points) in single precision.

    ``dates`` : (n_dates,) years; ``steps`` : about how many up to the last (``TimeGrid.of``); ``points`` per
    randomisation, rounded up to a multiple of 256. Each is a scheme of weak order 2 whose means are exactly 1.
    """
    grid = TimeGrid.of(dates, steps=steps)
    n = len(surfaces)
    ones = np.ones(n)
    loadings = principal_components(np.asarray(correlation, dtype=float), ones, ones)
    noise = PathNoise(grid, loadings, np.linalg.norm(loadings, axis=0), streams)
    tables = LocalVolTables.of(surfaces, grid)
    points = -(-points // BLOCK) * BLOCK
    out = np.empty((noise.randomisations, len(grid.dates), n, points), dtype=np.float32)
    paths_kernel.record(
        *noise.arguments(0, points, grid),
        grid.dates,
        tables.moves,
        tables.levels,
        tables.lowest,
        tables.per_node,
        tables.starts,
        noise.table,
        noise.walks,
        noise.drives,
        noise.places,
        noise.fetched,
        aligned((paths_kernel.PLANES, n, BLOCK), np.float32),
        out,
    )
    return out
