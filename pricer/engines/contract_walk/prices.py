"""Prices on a contract's dates as a law draws them."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Drawn:
    """Prices are ``random + floors``: (n_dates, n_assets, n_paths), of floors the paths may be one for all.

    ``started_at(asset, factor)`` : the random part of one asset, (n_dates, n_paths), on the same motions where its spot
    is ``factor`` times as high.
    """

    random: Array
    floors: Array
    started_at: Callable[[int, float], Array]

    @property
    def prices(self) -> Array:
        return self.random + self.floors

    def bumped(self, asset: int, factor: float) -> Array:
        """Prices where the random part of one asset's spot is ``factor`` times as high."""
        out = self.prices
        out[:, asset] += self.started_at(asset, factor) - self.random[:, asset]
        return out
