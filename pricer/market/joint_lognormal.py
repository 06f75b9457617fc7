"""The joint law of several underlyings at one date under correlated geometric Brownian motion."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True, slots=True)
class JointLognormal:
    """Levels ``forwards * exp(x - diag(covariance)/2)`` with ``x`` normal, mean 0.

    ``forwards`` : (n,) > 0, in the levels' own units.
    ``covariance`` : (n, n), covariance of the log-levels over the whole time to the date
    (so a volatility of 20 % over 2 years contributes 0.08).
    """

    forwards: NDArray[np.float64]
    covariance: NDArray[np.float64]

    def __post_init__(self) -> None:
        n = self.forwards.shape[0]
        if self.forwards.shape != (n,) or self.covariance.shape != (n, n):
            raise ValueError(f"forwards {self.forwards.shape} and covariance {self.covariance.shape} do not fit")
        if not (np.all(np.isfinite(self.forwards)) and np.all(self.forwards > 0.0)):
            raise ValueError("forwards must be finite and positive")

    @property
    def n_assets(self) -> int:
        return int(self.forwards.shape[0])

    @classmethod
    def from_volatilities(
        cls,
        forwards: NDArray[np.float64],
        volatilities: NDArray[np.float64],
        correlation: NDArray[np.float64],
        years: float,
    ) -> JointLognormal:
        """From annualised volatilities (n,), a correlation matrix (n, n) and a time in years."""
        deviations = np.asarray(volatilities, dtype=float) * np.sqrt(years)
        covariance = np.asarray(correlation, dtype=float) * np.outer(deviations, deviations)
        return cls(np.asarray(forwards, dtype=float), covariance)

    @property
    def deviations(self) -> NDArray[np.float64]:
        """Standard deviations of the log-levels, (n,)."""
        out: NDArray[np.float64] = np.sqrt(np.diag(self.covariance))
        return out

    @property
    def correlation(self) -> NDArray[np.float64]:
        """Correlation of the log-levels, (n, n); an asset without variance is uncorrelated."""
        s = self.deviations
        safe = np.where(s > 0.0, s, 1.0)
        out: NDArray[np.float64] = self.covariance / np.outer(safe, safe)
        np.fill_diagonal(out, 1.0)
        return out
