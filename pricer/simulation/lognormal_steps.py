"""Lognormal levels and exchange rates on a time grid, and what a change of measure does to a path.

Total variances are piecewise linear in time between common times, so volatilities are constant
between them. On a grid of its own a path sees each volatility by its root mean square over a step,
on the same Brownian increments as local volatility: such a *control* is lognormal with a
covariance that is known exactly.

Under the payment currency's measure the Brownian motion of a level in another currency has the drift
``-rho sigma_fx(t)``, rho its correlation with the exchange rate Q (units of the payment currency for one of the
level's own) and sigma_fx the volatility of Q (Reiner 1992; for any dynamics of the level by Girsanov's
theorem): a known amount, taken off each increment.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.simulation.time_grid import TimeGrid

Array = NDArray[np.float64]

#: Annualised: a smaller volatility of an asset is raised to it, in a control only. The last step divides by it.
_LEAST = 1e-4


#: Where the volatility of an exchange rate changes by less than this, relatively, it does not count as changing.
_CHANGE = 1e-6


@dataclass(frozen=True, slots=True)
class LognormalSteps:
    """What the steps of a grid do to lognormal levels, n of assets and then those of exchange rates.

    Steps are cut into pieces where the volatility of a simulated exchange rate changes.
    ``times`` : (n_pieces + 1,) years, from 0. ``volatilities`` : (n_pieces, n_rows) annualised, over each piece.
    ``shifts`` : (n_steps, n) taken off the Brownian increments of the assets. The last step is one piece.
    """

    times: Array
    volatilities: Array
    shifts: Array

    @classmethod
    def of(
        cls,
        grid: TimeGrid,
        coarse: TimeGrid,
        variance_times: Array,
        variances: Array,
        correlation: Array,
        rate_of: Sequence[int | None],
        *,
        composite: bool,
    ) -> LognormalSteps:
        """Steps of ``grid``, the volatilities of assets constant over those of ``coarse``.

        ``coarse`` : part of the grid's times; equal volatilities give controls on either grid the same value.
        ``variance_times`` : (k + 1,) from 0, ``variances`` : (n_rows, k + 1) total. ``rate_of`` : (n,) place of each
        asset's exchange rate among the rates, None for none. Where ``composite``, rates are simulated, as exactly as
        the payoff sees them: but for the last of the coarse steps with their volatilities as they are.
        """
        n, at = len(rate_of), coarse.times
        cuts = _changes(variance_times, variances[n:]) if composite else np.zeros(0)
        cuts = cuts[cuts < at[-2] * (1.0 - 1e-9)]
        of_rates, times = (_united(on, cuts) for on in (at, grid.times))
        volatilities = np.concatenate(
            [
                _mean_volatilities(blocks, times, variance_times, rows)
                for blocks, rows in ((at, variances[:n]), (of_rates, variances[n:]))
            ],
            axis=1,
        )
        volatilities[:, :n] = np.maximum(volatilities[:, :n], _LEAST)
        shifts = np.zeros((grid.n_steps, n))
        for i, rate in enumerate(rate_of):
            if rate is None:
                continue
            row = n + rate
            if composite:
                moved, over = volatilities[:, row] * np.diff(times), times
            else:
                moved, over = (
                    np.sqrt(np.maximum(np.diff(variances[row]), 0.0) * np.diff(variance_times)),
                    variance_times,
                )
            total = np.interp(grid.times, over, np.concatenate([[0.0], np.cumsum(moved)]))
            shifts[:, i] = correlation[i, row] * np.diff(total)
        return cls(times, volatilities, shifts)

    @property
    def lengths(self) -> Array:
        """Of the pieces in years, (n_pieces,)."""
        return np.diff(self.times)

    def covariance(self, correlation: Array) -> Array:
        """Of the log-levels at the end, (n_rows, n_rows)."""
        scaled = self.volatilities * np.sqrt(self.lengths)[:, None]
        out: Array = correlation * (scaled.T @ scaled)
        return out

    def log_drifts(self, grid: TimeGrid) -> Array:
        """What the shifts do to the log-levels of the assets in total, (n,); ``grid`` : that of the steps."""
        return self._drifts(grid, grid.n_steps)

    def starts(self, grid: TimeGrid) -> Array:
        """Log-levels over forwards before the last step but for noise, (n_rows,)."""
        n = self.shifts.shape[1]
        out: Array = -0.5 * (self.volatilities[:-1] ** 2 * self.lengths[:-1, None]).sum(axis=0)
        out[:n] += self._drifts(grid, grid.n_steps - 1)
        return out

    def _drifts(self, grid: TimeGrid, n_steps: int) -> Array:
        ends = np.searchsorted(self.times, grid.times[1 : n_steps + 1] * (1.0 - 1e-12)) - 1  # the last piece of each
        # volatilities of assets do not change within a step
        out: Array = -(self.volatilities[ends, : self.shifts.shape[1]] * self.shifts[:n_steps]).sum(axis=0)
        return out

    @property
    def last_deviations(self) -> Array:
        """Of the log-levels over the last step, (n_rows,)."""
        out: Array = self.volatilities[-1] * np.sqrt(self.times[-1] - self.times[-2])
        return out

    @property
    def last_drifts(self) -> Array:
        """What is taken off the unit noise of the last step, (n,)."""
        out: Array = self.shifts[-1] / np.sqrt(self.times[-1] - self.times[-2])
        return out

    def ordered(self, order: NDArray[np.int64], shares: Array) -> LognormalSteps:
        """Assets in another order, their volatilities times ``shares`` (n,) in that order."""
        n = len(order)
        rows = np.concatenate([order, np.arange(n, self.volatilities.shape[1])])
        volatilities = self.volatilities[:, rows]
        volatilities[:, :n] *= shares
        return LognormalSteps(self.times, volatilities, self.shifts[:, order])


def _changes(times: Array, variances: Array) -> Array:
    """Times at which any of the volatilities changes."""
    volatilities = np.sqrt(np.maximum(np.diff(variances, axis=1), 0.0) / np.diff(times))
    size = np.maximum(volatilities.max(axis=1, keepdims=True), 1e-300)
    out: Array = times[1:-1][np.any(np.abs(np.diff(volatilities, axis=1)) > _CHANGE * size, axis=0)]
    return out


def _united(times: Array, cuts: Array) -> Array:
    """``times`` with those ``cuts`` that are not among them."""
    near = np.abs(cuts[:, None] - times).min(axis=1) <= 1e-9 * times[-1] if len(cuts) else np.zeros(0, dtype=bool)
    return np.sort(np.concatenate([times, cuts[~near]]))


def _mean_volatilities(blocks: Array, times: Array, variance_times: Array, variances: Array) -> Array:
    """Root mean squares over ``blocks``, for each piece between ``times``: (n_pieces, n_rows)."""
    if not len(variances):
        return np.zeros((len(times) - 1, 0))
    total = np.stack([np.interp(blocks, variance_times, row) for row in variances], axis=1)
    over = np.searchsorted(blocks, times[1:] * (1.0 - 1e-12)) - 1
    out: Array = np.sqrt(np.maximum(np.diff(total, axis=0), 0.0) / np.diff(blocks)[:, None])[over]
    return out
