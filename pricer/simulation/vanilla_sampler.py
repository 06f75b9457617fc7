"""Runs the kernel of vanilla options on one asset's local-volatility paths."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from pricer.simulation.kernels import local_vol_vanillas as kernel
from pricer.simulation.kernels.vectors import BLOCK, aligned
from pricer.simulation.local_vol_tables import LocalVolatility, LocalVolTables
from pricer.simulation.path_noise import PathNoise
from pricer.simulation.time_grid import TimeGrid

Array = NDArray[np.float64]


def vanilla_means(
    surface: LocalVolatility,
    grid: TimeGrid,
    noise: PathNoise,
    log_strikes: Array,
    control_variances: Array,
    points: int,
) -> Array:
    """Means over ``points`` of each randomisation, (randomisations, n_dates, 2, 1 + n_strikes).

    By date: the level before the last step, of mean 1, and each option of ``log_strikes`` (n_dates, n_strikes) on it
    (puts for log-strikes below 0, else calls); first under local volatility, then for a lognormal level on the
    same Brownian motion with total variance ``control_variances`` (n_dates,). The step up to a
    date is lognormal, as the last step of a trade. ``points`` : a multiple of 256.
    """
    tables = LocalVolTables.of((surface,), grid)
    ends = grid.times[grid.dates]
    before = grid.times[grid.dates - 1]
    volatilities = np.sqrt(control_variances / ends)
    control = np.stack([volatilities, -0.5 * volatilities**2 * before, volatilities * np.sqrt(ends - before)], axis=1)
    n_dates, n_strikes = log_strikes.shape
    sums = np.zeros((noise.randomisations, n_dates * 2 * (1 + n_strikes)))
    kernel.accumulate(
        *noise.arguments(0, points, grid),
        grid.dates,
        tables.moves,
        np.ascontiguousarray(tables.before[:, 0]),
        np.ascontiguousarray(tables.deviations[:, 0]),
        tables.lowest,
        tables.per_node,
        float(tables.starts[0]),
        float(tables.first_deviations[0]),
        np.ascontiguousarray(control),
        np.ascontiguousarray(log_strikes, dtype=float),
        noise.table,
        noise.walks,
        noise.drives,
        noise.places,
        noise.fetched,
        aligned((kernel.PLANES, 1, BLOCK), np.float32),
        aligned((5, BLOCK), np.float64),
        sums,
    )
    return sums.reshape(noise.randomisations, n_dates, 2, 1 + n_strikes) / points
