"""Levels at the dates of a path: correlated lognormal, everything depending on time."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class PathLaw:
    """Levels ``forwards[k] exp(x - v/2)`` at date k, x Brownian with the given covariance per step.

    ``times`` : (n_dates,) years from today, above 0 and increasing. ``forwards`` : (n_dates, n) > 0.
    ``covariances`` : (n_dates, n, n) of what the log-levels do between the date before and this one.
    """

    times: Array
    forwards: Array
    covariances: Array

    def __post_init__(self) -> None:
        m = len(self.times)
        n = self.forwards.shape[-1]
        if self.forwards.shape != (m, n) or self.covariances.shape != (m, n, n):
            raise ValueError(
                f"times {self.times.shape}, forwards {self.forwards.shape} and covariances "
                f"{self.covariances.shape} do not fit"
            )
        if not m or not np.all(np.diff(self.times, prepend=0.0) > 0.0):
            raise ValueError(f"dates must lie after today and increase; got {self.times.tolist()}")
        if not (np.all(np.isfinite(self.forwards)) and np.all(self.forwards > 0.0)):
            raise ValueError("forwards must be finite and positive")

    @classmethod
    def constant(cls, times: Array, spots: Array, drifts: Array, volatilities: Array, correlation: Array) -> PathLaw:
        """Flat drifts (rate less yield) and volatilities (n,), one correlation matrix (n, n)."""
        times = np.asarray(times, dtype=float)
        covariance = np.asarray(correlation) * np.outer(volatilities, volatilities)
        forwards = np.asarray(spots) * np.exp(np.outer(times, drifts))
        return cls(times, forwards, np.diff(times, prepend=0.0)[:, None, None] * covariance)

    @property
    def n_assets(self) -> int:
        return int(self.forwards.shape[1])

    @property
    def variances(self) -> Array:
        """Total variances of the log-levels at each date, (n_dates, n)."""
        out: Array = np.cumsum(np.diagonal(self.covariances, axis1=1, axis2=2), axis=0)
        return out
