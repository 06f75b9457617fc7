"""Variance swaps that are half-way through their life, observed date by date."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class ObservedVariance:
    """What a contract has counted so far, in its own way of counting.

    Annualised variance is ``periods_per_year / observations * sum of squared log-returns``, without a
    mean (common practice). ``observations`` counts all returns of the contract, ``sum_of_squares`` those known by
    now.
    """

    periods_per_year: float
    observations: int
    sum_of_squares: float = 0.0

    def annualised(self, expected_squares: float) -> float:
        """Expected annualised variance once the returns to come add ``expected_squares``."""
        return self.periods_per_year / self.observations * (self.sum_of_squares + expected_squares)

    def value(self, expected_squares: float, strike: float, discount_factor: float) -> float:
        """Per unit of variance notional: pays annualised variance less ``strike`` (a variance, 0.04 for 20 %)."""
        return discount_factor * (self.annualised(expected_squares) - strike)


def sum_of_squares(fixings: Array) -> float:
    """Of the log-returns between ``fixings`` (n,) > 0."""
    return float(np.sum(np.diff(np.log(fixings)) ** 2))


def expected_squares(variances: Array, growths: Array, since_fixing: float = 0.0) -> float:
    """Expected sum of squared log-returns to come, exact under deterministic volatility.

    ``variances``, ``growths`` : (n,), variance and log-growth of the forward of each period, the first one from
    now. ``since_fixing`` is ``log(spot / last fixing)``, which belongs to the first return. With variance from a
    smile only the squares of the drifts are approximate, as they hang on its size alone.
    """
    means = growths - 0.5 * variances
    means = np.concatenate((means[:1] + since_fixing, means[1:]))
    return float(np.sum(variances + means**2))
