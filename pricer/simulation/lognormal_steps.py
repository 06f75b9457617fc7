"""Lognormal levels and exchange rates on a time grid, and what a change of measure does to a path.

Total variances are piecewise linear in time between common times, so volatilities are constant
between them. A path sees each volatility by its root mean square over a step, on the same Brownian
increments as local volatility: such a *control* is lognormal. Where volatilities change within a step, each in its
own way, their covariance over it comes out slightly too high, for local volatility as for the control: what is
measured against the control's exact value is free of that to first order.

Under the payment currency's measure the Brownian motion of a level in another currency has the drift
``-rho sigma_fx(t)``, rho its correlation with the exchange rate Q (units of the payment currency for one of the
level's own) and sigma_fx the volatility of Q (Reiner 1992; for any dynamics of the level by Girsanov's
theorem): a known amount, taken off each increment.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.simulation.time_grid import TimeGrid

Array = NDArray[np.float64]

#: Annualised: a smaller volatility of an asset is raised to it, in a control only. The last step divides by it.
_LEAST = 1e-4


@dataclass(frozen=True, slots=True)
class LognormalSteps:
    """What the steps of a grid do to lognormal levels, n of assets and then those of exchange rates.

    ``lengths`` : (n_steps,) years. ``volatilities`` : (n_steps, n_rows) annualised, over each step.
    ``shifts`` : (n_steps, n) taken off the Brownian increments of the assets. ``rate_variances`` : (n_steps, n) of the
    logarithm of the exchange rate that converts each asset, over each step; 0 where none does.
    """

    lengths: Array
    volatilities: Array
    shifts: Array
    rate_variances: Array

    @classmethod
    def of(
        cls,
        grid: TimeGrid,
        variance_times: Array,
        variances: Array,
        correlation: Array,
        exposures: Array,
        *,
        composite: bool,
    ) -> LognormalSteps:
        """Steps of ``grid``.

        ``variance_times`` : (k + 1,) from 0, ``variances`` : (n_rows, k + 1) total. ``exposures`` : (n, m) of the
        logarithm of each asset's exchange rate to those of the m factors of rates, 0 for none: a rate that is a chain
        of others has no constant correlation of its own. Where ``composite``, factors are simulated, and the
        shift is that of their simulated volatility: level times rate is then a martingale to the last digit.
        """
        n, lengths = len(exposures), grid.lengths
        total = np.stack([np.interp(grid.times, variance_times, row) for row in variances], axis=1)
        volatilities = np.sqrt(np.maximum(np.diff(total, axis=0), 0.0) / lengths[:, None])
        volatilities[:, :n] = np.maximum(volatilities[:, :n], _LEAST)
        rho = correlation[n:, n:]
        of_rates = volatilities[:, n:]
        if composite:
            moved = of_rates * lengths[:, None]
            covariances = rho * of_rates[:, :, None] * of_rates[:, None, :] * lengths[:, None, None]
            rate_variances = np.einsum("ij,sjk,ik->si", exposures, covariances, exposures)
        else:
            pieces = np.sqrt(np.maximum(np.diff(variances[n:], axis=1), 0.0) * np.diff(variance_times))
            risen = np.pad(np.cumsum(pieces, axis=1), ((0, 0), (1, 0)))
            moved = np.empty((grid.n_steps, len(risen)))
            for j, row in enumerate(risen):
                moved[:, j] = np.diff(np.interp(grid.times, variance_times, row))
            rate_variances = np.zeros((grid.n_steps, n))
        shifts = moved @ (exposures * correlation[:n, n:]).T
        return cls(lengths, volatilities, shifts, rate_variances)

    @property
    def starts(self) -> Array:
        """Log-levels over forwards before the last step but for noise, (n_rows,); 0 for factors of rates."""
        volatilities, n = self.volatilities[:-1], self.shifts.shape[1]
        out: Array = -0.5 * (volatilities**2 * self.lengths[:-1, None]).sum(axis=0)
        out[:n] -= (volatilities[:, :n] * self.shifts[:-1]).sum(axis=0)
        out[n:] = 0.0
        return out

    @property
    def conversion_drops(self) -> Array:
        """Taken off the logarithm of each asset's exchange rate before and in the last step: a martingale, (2, n)."""
        return 0.5 * np.stack([self.rate_variances[:-1].sum(axis=0), self.rate_variances[-1]])

    @property
    def last_deviations(self) -> Array:
        """Of the log-levels over the last step, (n_rows,)."""
        out: Array = self.volatilities[-1] * np.sqrt(self.lengths[-1])
        return out

    @property
    def last_drifts(self) -> Array:
        """What is taken off the unit noise of the last step, (n,)."""
        out: Array = self.shifts[-1] / np.sqrt(self.lengths[-1])
        return out

    def ordered(self, order: NDArray[np.int64], shares: Array) -> LognormalSteps:
        """Assets in another order, their volatilities times ``shares`` (n,) in that order."""
        n = len(order)
        rows = np.concatenate([order, np.arange(n, self.volatilities.shape[1])])
        volatilities = self.volatilities[:, rows]
        volatilities[:, :n] *= shares
        return LognormalSteps(self.lengths, volatilities, self.shifts[:, order], self.rate_variances[:, order])
