"""Realised variance of an aggregate and of its components: variance swaps, volatility swaps, dispersion."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.observation import in_order

#: Returns per year by which daily variances are annualised (common practice).
BUSINESS_DAYS_PER_YEAR = 252.0


@dataclass(frozen=True, slots=True)
class VarianceState:
    """Logarithms of the last levels (None before the first date), sums of squared returns and their number."""

    last: tuple[float, ...] | None
    squares: tuple[float, ...]
    returns: int = 0


@dataclass(frozen=True, slots=True)
class RealisedVariance:
    """Annualised realised variances, weighted and added.

    One series per underlying and one more, the last, for ``aggregate``; each has
    ``returns_per_year / n_returns`` times its sum of squared log returns, without subtracting their mean
    (common practice). ``weights`` (n_assets + 1) choose: (0, ..., 0, 1) is the variance of
    the basket; component weights with -1 at the end are a dispersion. ``as_volatility`` weights the
    square roots instead. Basket variance is that of a fixed number of shares.
    """

    schedule: tuple[date, ...]
    aggregate: Aggregate
    weights: tuple[float, ...]
    as_volatility: bool = False
    returns_per_year: float = BUSINESS_DAYS_PER_YEAR

    def __post_init__(self) -> None:
        if len(in_order(self.schedule, "variance dates")) < 2:
            raise ValueError("a realised variance needs at least two dates")
        if len(self.weights) != len(self.aggregate.weights) + 1 or not any(self.weights):
            raise ValueError("a realised variance needs one weight per underlying and one for the aggregate, not all 0")

    @property
    def label(self) -> str:
        kind = "volatility" if self.as_volatility else "variance"
        return "dispersion" if min(self.weights) < 0.0 < max(self.weights) else kind

    @property
    def dates(self) -> tuple[date, ...]:
        return self.schedule

    def measure(self, levels: NDArray[np.float64]) -> NDArray[np.float64]:
        return np.log(np.concatenate((levels, self.aggregate(levels)[..., np.newaxis]), axis=-1))

    def start(self) -> VarianceState:
        return VarianceState(None, (0.0,) * len(self.weights))

    def needs(self, state: VarianceState, day: date) -> bool:
        return True

    def observe(self, state: VarianceState, day: date, measured: Sequence[float]) -> VarianceState:
        now = tuple(measured)
        if state.last is None:
            return VarianceState(now, state.squares)
        squares = tuple(s + (m - x) ** 2 for s, m, x in zip(state.squares, now, state.last, strict=True))
        return VarianceState(now, squares, state.returns + 1)

    def value(self, state: VarianceState) -> float:
        expected = len(self.schedule) - 1
        if state.returns < expected:
            raise ValueError(f"{state.returns} of {expected} returns are known")
        variances = [self.returns_per_year / expected * s for s in state.squares]
        if self.as_volatility:
            variances = [math.sqrt(v) for v in variances]
        return math.fsum(w * v for w, v in zip(self.weights, variances, strict=True))
