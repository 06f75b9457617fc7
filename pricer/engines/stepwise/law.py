"""From a market to steps of the volatility coordinate on a grid, ready for the kernels."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.book import Trade
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.path_inputs import Drivers, is_converted
from pricer.engines.stepwise.settings import StepwiseSettings
from pricer.market.market import Market
from pricer.simulation.local_vol_tables import LocalVolatility, LocalVolTables, Words
from pricer.simulation.lognormal_steps import LognormalSteps
from pricer.simulation.stepwise_factor import PathFactor
from pricer.simulation.time_grid import TimeGrid

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class StepwiseLaw:
    """Prices ``(scales X + floors) Y`` at the dates, X in steps of ``grid``, Y the exchange rates' martingales.

    ``tables`` and ``dates`` are what ``kernels.stepwise_levels.walk_nodes`` takes; arrays by asset first.
    ``rate_volatilities`` (n_steps, m), ``rate_drops`` (n_dates, n) and ``exposures`` (n, m) make Y; None where prices
    are not converted.
    """

    grid: TimeGrid
    factor: PathFactor
    dates: NDArray[np.int64]
    starts: Array
    start_slopes: Array
    moves: Array
    levels: Array
    lowest: Array
    per_node: Array
    scales: Array
    floors: Array
    exposures: Array
    rate_volatilities: Array | None
    rate_drops: Array

    @classmethod
    def of(
        cls,
        grid: TimeGrid,
        drivers: Drivers,
        surfaces: Sequence[LocalVolatility],
        signs: Array,
        scales: Array,
        floors: Array,
        *,
        composite: bool,
        factor: PathFactor | None = None,
    ) -> StepwiseLaw:
        """``scales``, ``floors`` (n_dates, n); ``signs`` (n,) the way the factor moves each asset.

        ``factor`` : of a grid of twice as many steps, whose motions this one takes in pairs.
        """
        n = len(surfaces)
        steps = LognormalSteps.of(
            grid, drivers.times, drivers.variances, drivers.correlation, drivers.exposures, composite=composite
        )
        if factor is None:
            rows = len(drivers.correlation) if composite else n
            factor = PathFactor.of(
                grid.lengths, drivers.correlation[:rows, :rows], steps.volatilities[:, :n], np.asarray(signs)
            )
        tables = LocalVolTables.of(surfaces, grid, steps.shifts)
        dates = np.full(grid.n_steps, -1, dtype=np.int64)
        dates[grid.dates - 1] = np.arange(len(grid.dates))
        return cls(
            grid=grid,
            factor=factor,
            dates=dates,
            starts=tables.starts.astype(float),
            start_slopes=tables.start_slopes.astype(float),
            moves=_by_asset(_decoded(tables.moves)),
            levels=_by_asset(_decoded(tables.levels)),
            lowest=_by_asset(tables.lowest.astype(float)),
            per_node=_by_asset(tables.per_node.astype(float)),
            scales=scales,
            floors=floors,
            exposures=drivers.exposures,
            rate_volatilities=steps.volatilities[:, n:] if composite else None,
            rate_drops=0.5 * np.cumsum(steps.rate_variances, axis=0)[grid.dates - 1],
        )

    def noise(self, walks: Array) -> tuple[Array, Array]:
        """Increments of the assets without the factor (n_paths, n, n_steps), and Y (n_paths or 1, n_dates, n).

        ``walks`` (n_steps, dims, n_paths) independent motions at the ends of steps.
        """
        n, m = len(self.starts), self.grid.n_steps
        finer = len(self.factor.directions) // m
        moves = np.diff(walks, axis=0, prepend=0.0)
        w = np.einsum("sd,sdp->p", self.factor.projection, moves)
        left = self.factor.loadings @ moves - self.factor.directions[:, :, None] * w
        if finer > 1:
            left = left.reshape(m, finer, *left.shape[1:]).sum(axis=1)
        noise = np.ascontiguousarray(left[:, :n].transpose(2, 1, 0))
        if self.rate_volatilities is None:
            return noise, np.ones((1, *self.scales.shape))
        rates = np.cumsum(self.rate_volatilities[:, :, None] * left[:, n:], axis=0)[self.grid.dates - 1]
        logs = np.einsum("ij,kjp->pki", self.exposures, rates) - self.rate_drops
        return noise, np.exp(logs)

    @property
    def directions(self) -> Array:
        """Of the factor over the steps of this grid, (n_steps, n)."""
        each = self.factor.directions.reshape(self.grid.n_steps, -1, self.factor.directions.shape[1])
        return np.ascontiguousarray(each.sum(axis=1)[:, : len(self.starts)])


def grid_of(terms: ContractTerms, drivers: Drivers, settings: StepwiseSettings, *, smiled: bool) -> TimeGrid:
    """Every date and every quoted expiry ends a step.

    Under local volatility steps can be joined in pairs unless dates are dense; lognormal steps are exact.
    """
    kinks = drivers.times[1:]
    if not smiled:
        return TimeGrid.of(terms.times, steps=2, kinks=kinks, least=2 if len(terms.times) == 1 else 1, cuts=0)
    if len(terms.dates) > settings.dense:
        return TimeGrid.of(terms.times, steps=1, kinks=kinks, least=1, cuts=0)
    return TimeGrid.of(terms.times, steps=settings.steps, kinks=kinks, least=4 if len(terms.times) == 1 else 2, cuts=1)


def cut_grid(terms: ContractTerms, drivers: Drivers) -> TimeGrid:
    """Two steps where a grid of dense dates has one."""
    return TimeGrid.of(terms.times, steps=1, kinks=drivers.times[1:], least=2, cuts=1)


def prices_of(trade: Trade, terms: ContractTerms, market: Market) -> tuple[Array, Array]:
    """Scales and floors of prices over X, (n_dates, n) each."""
    if is_converted(trade, market):
        return terms.forwards, terms.floors
    own = [market.affine_price(name) for name in trade.contract.underlyings]
    return np.array([[price.at(day).scale for price in own] for day in terms.dates]), terms.floors


def _decoded(table: Words) -> Array:
    """Values and rises side by side, (..., NODES, 2)."""
    low, high = table & np.uint64(0xFFFFFFFF), table >> np.uint64(32)
    return np.stack([half.astype(np.uint32).view(np.float32).astype(float) for half in (low, high)], axis=-1)


def _by_asset(values: Array) -> Array:
    return np.ascontiguousarray(np.swapaxes(values, 0, 1))
