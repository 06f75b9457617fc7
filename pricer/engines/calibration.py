"""Does the simulated model give back what the market quotes?

The underlying's own local-volatility paths, by the scheme that trades are valued on, price every
quoted vanilla; the volatility implied from that price stands beside the quoted one.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import date


@dataclass(frozen=True, slots=True)
class Simulated:
    """A number from paths and its standard error."""

    value: float
    standard_error: float


@dataclass(frozen=True, slots=True)
class Calibration:
    """Volatility of the price for each quote of a surface, in its order, and the mean of X by date, ideally 1."""

    quotes: tuple[Simulated, ...]
    means: Mapping[date, Simulated]
