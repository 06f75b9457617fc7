"""Runs the local-volatility kernels and keeps the sums of every randomisation."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike, NDArray

from pricer.contracts.aggregate import AggregateKind
from pricer.simulation.kernels import local_vol_paths as paths_kernel
from pricer.simulation.kernels import payoffs
from pricer.simulation.kernels.vectors import BLOCK, aligned
from pricer.simulation.loadings import principal_components
from pricer.simulation.local_vol_plan import LocalVolPlan
from pricer.simulation.local_vol_tables import LocalVolatility, LocalVolTables
from pricer.simulation.lognormal_steps import LognormalSteps
from pricer.simulation.path_noise import PathNoise
from pricer.simulation.sampler import KINDS
from pricer.simulation.time_grid import TimeGrid

Array = NDArray[np.float64]

_LOG2_E = 1.0 / np.log(2.0)
_KINDS = {**KINDS, AggregateKind.GEOMETRIC: paths_kernel.GEOMETRIC}


class LocalVolSampler:
    """Sums over local-volatility paths, one row per randomisation, that only ever grow.

    Paths are in single precision up to the levels, the payoff in double. One instance belongs to
    one thread; the work itself holds no interpreter lock. Memory does not depend on the number of points.
    """

    def __init__(
        self, plan: LocalVolPlan, grid: TimeGrid, steps: LognormalSteps, noise: PathNoise, *, with_ratios: bool = True
    ) -> None:
        """``grid`` : the noise's own, or one with part of its times; ``steps`` : on it, in the plan's order.

        ``with_ratios`` also sums sensitivities.
        """
        n, n_rows = plan.n_assets, len(plan.loadings)
        self.grid, self.steps = grid, steps
        self._plan, self._noise, self._with_ratios = plan, noise, with_ratios
        self._tables = LocalVolTables.of(plan.surfaces, grid, steps.shifts)
        f = plan.design.payoff
        self._profile = np.array([f.intercept, f.slope, *f.knots, *f.bends, *f.jumps], dtype=float)
        self._rank_weights = plan.design.rank_weights.astype(np.float32)
        used = slice(0, n_rows)  # factors of rates that only shift are not simulated
        self._control = (
            (_LOG2_E * steps.starts[used]).astype(np.float32),
            np.ascontiguousarray(_LOG2_E * steps.volatilities[:-1, used], dtype=np.float32),
            steps.last_deviations[used].astype(np.float32),
            steps.last_drifts.astype(np.float32),
        )
        self._exposures = np.ascontiguousarray(plan.exposures, dtype=np.float32)
        self._drops = np.ascontiguousarray(_LOG2_E * steps.conversion_drops, dtype=np.float32)
        self._planes = aligned((paths_kernel.PLANES, n_rows, BLOCK), np.float32)
        self._precisions = aligned((n, BLOCK), np.float64)
        self._rows = aligned((3, BLOCK), np.float64)
        self._rows[:] = 0.0
        self._paths = aligned((payoffs.PATH_ROWS * BLOCK,), np.float64)
        self.points = 0
        self.sums = np.zeros((noise.randomisations, paths_kernel.HEAD_SUMS + paths_kernel.LEG_SUMS * n))

    def extend(self, points: int) -> Array:
        """Go on to ``points`` per randomisation; the sums so far (randomisations, 3 + 4 n).

        ``points`` is a power of two, or a multiple of 256. Columns: see ``kernels.local_vol_paths``.
        """
        plan, tables, noise, design = self._plan, self._tables, self._noise, self._plan.design
        if self.points % BLOCK:  # a short first block cannot be continued, and costs nothing to repeat
            self.points = 0
            self.sums[:] = 0.0
        paths_kernel.accumulate(
            *noise.arguments(self.points, points, self.grid),
            float(self.grid.lengths[-1]),
            tables.moves,
            tables.before[-1],
            tables.deviations[-1],
            tables.lowest,
            tables.per_node,
            tables.starts,
            tables.start_slopes,
            plan.shares,
            *self._control,
            self._exposures,
            self._drops,
            plan.smooth,
            plan.inverse,
            design.n_common,
            plan.degree,
            _KINDS[design.kind],
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
    grid: TimeGrid,
    *,
    noise: PathNoise | None = None,
    points: int,
    stream: np.random.Generator | None = None,
    randomisations: int = 16,
) -> NDArray[np.float32]:
    """Levels of the unit martingales at the dates of ``grid``, (randomisations, n_dates, n, points), single precision.

    ``points`` per randomisation, rounded up to a multiple of 256. ``noise`` : a ready one for these assets that has
    the grid's times, to share draws between grids; else it is made from ``stream``. Each step is of a
    scheme of weak order 2 whose means are exactly 1.
    """
    n = len(surfaces)
    if noise is None:
        if stream is None:
            raise ValueError("draws need a stream or ready noise")
        noise = level_noise(correlation, grid, stream, randomisations)
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


def level_noise(correlation: ArrayLike, grid: TimeGrid, stream: np.random.Generator, randomisations: int) -> PathNoise:
    """Noise for ``local_vol_levels``: every asset as important as any other."""
    matrix = np.asarray(correlation, dtype=float)
    ones = np.ones(len(matrix))
    loadings = principal_components(matrix, ones, ones)
    return PathNoise(grid, loadings, np.linalg.norm(loadings, axis=0), stream, randomisations)
