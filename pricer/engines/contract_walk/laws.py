"""From a market to the laws that prices of one contract are drawn from."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.book import Trade
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.contract_walk.local_vol_prices import LocalVolPrices
from pricer.engines.contract_walk.lognormal_prices import LognormalPrices
from pricer.engines.contract_walk.settings import WalkSettings
from pricer.engines.path_inputs import Drivers, is_converted
from pricer.market.local_vol_surface import LocalVolSurface
from pricer.market.market import Market
from pricer.simulation.lognormal_steps import LognormalSteps
from pricer.simulation.time_grid import TimeGrid

Array = NDArray[np.float64]


def covariances_over(drivers: Drivers, times: Array) -> Array:
    """Of the logarithms of X and the factors over the steps that end at ``times`` (n_dates,), (n_dates, r, r)."""
    ends = np.union1d(np.append(0.0, times), drivers.times[drivers.times < times[-1]])
    total = np.stack([np.interp(ends, drivers.times, row) for row in drivers.variances])
    rises = np.sqrt(np.diff(total, axis=1))
    grown = np.cumsum(drivers.correlation * (rises.T[:, :, None] * rises.T[:, None, :]), axis=0)
    at_dates = grown[np.searchsorted(ends[1:], times)]
    return np.diff(at_dates, axis=0, prepend=np.zeros((1, *grown.shape[1:])))


def lognormal_prices(trade: Trade, terms: ContractTerms, market: Market) -> LognormalPrices:
    """Exact in law, floors and conversion included."""
    covariances = terms.covariances
    if terms.has_floors and is_converted(trade, market):
        drivers = Drivers.of(trade, market)
        n = len(drivers.exposures)
        rates = np.hstack([np.zeros((n, n)), drivers.exposures])
        both = np.vstack([np.hstack([np.eye(n), drivers.exposures]), rates])
        covariances = both @ covariances_over(drivers, terms.times) @ both.T
    return LognormalPrices(terms.forwards, terms.floors, covariances)


def grid_of(terms: ContractTerms, drivers: Drivers, settings: WalkSettings) -> TimeGrid:
    """Every date and every quoted expiry ends a step; steps can be joined in pairs unless dates are dense."""
    dense = len(terms.dates) > settings.dense
    steps, cuts = (1, 0) if dense else (settings.steps, 1)
    return TimeGrid.of(terms.times, steps=steps, kinks=drivers.times[1:], least=2**cuts, cuts=cuts)


def local_vol_prices(
    trade: Trade,
    terms: ContractTerms,
    market: Market,
    drivers: Drivers,
    surfaces: Sequence[LocalVolSurface],
    grid: TimeGrid,
) -> LocalVolPrices:
    """Under the local volatility of ``surfaces`` (n,) on ``grid``."""
    names, composite = trade.contract.underlyings, is_converted(trade, market)
    steps = LognormalSteps.of(
        grid, drivers.times, drivers.variances, drivers.correlation, drivers.exposures, composite=composite
    )
    own = [market.affine_price(name) for name in names]
    scales = np.array([[price.at(day).scale for price in own] for day in terms.dates])
    return LocalVolPrices(
        surfaces,
        grid,
        steps,
        drivers.correlation,
        drivers.exposures,
        terms.forwards if composite else scales,
        terms.floors,
        composite=composite,
    )
