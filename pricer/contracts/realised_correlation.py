"""Realised correlation: the weighted mean of the underlyings' pairwise correlations."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.observation import in_order


@dataclass(frozen=True, slots=True)
class CorrelationState:
    """Logarithms of the last levels (None before the first date), sums of returns and of their products, row by row."""

    last: tuple[float, ...] | None
    sums: tuple[float, ...]
    products: tuple[float, ...]
    returns: int = 0


@dataclass(frozen=True, slots=True)
class RealisedCorrelation:
    """The mean of the pairs' correlations of log returns, each pair weighted by the product of its ``weights``.

    ``demeaned`` subtracts the sample means of the returns (Pearson's coefficient); without it
    returns are measured from zero. Trade terms differ: the contract's own decide.
    """

    schedule: tuple[date, ...]
    weights: tuple[float, ...]
    demeaned: bool = True

    def __post_init__(self) -> None:
        if len(in_order(self.schedule, "correlation dates")) < 3:
            raise ValueError("a realised correlation needs at least three dates")
        if len(self.weights) < 2 or min(self.weights) <= 0.0:
            raise ValueError(f"a realised correlation needs two or more weights above 0; got {self.weights}")

    @property
    def label(self) -> str:
        return "correlation"

    @property
    def dates(self) -> tuple[date, ...]:
        return self.schedule

    def measure(self, levels: NDArray[np.float64]) -> NDArray[np.float64]:
        if levels.shape[-1] != len(self.weights):
            raise ValueError(f"{len(self.weights)} underlyings have weights, {levels.shape[-1]} came")
        return np.log(levels)

    def start(self) -> CorrelationState:
        n = len(self.weights)
        return CorrelationState(None, (0.0,) * n, (0.0,) * (n * n))

    def needs(self, state: CorrelationState, day: date) -> bool:
        return True

    def observe(self, state: CorrelationState, day: date, measured: Sequence[float]) -> CorrelationState:
        now = tuple(measured)
        if state.last is None:
            return CorrelationState(now, state.sums, state.products)
        moves = [m - x for m, x in zip(now, state.last, strict=True)]
        sums = tuple(s + r for s, r in zip(state.sums, moves, strict=True))
        pairs = (a * b for a in moves for b in moves)
        products = tuple(s + p for s, p in zip(state.products, pairs, strict=True))
        return CorrelationState(now, sums, products, state.returns + 1)

    def value(self, state: CorrelationState) -> float:
        """Raises ValueError before the last date, and where an underlying never moved."""
        expected = len(self.schedule) - 1
        if state.returns < expected:
            raise ValueError(f"{state.returns} of {expected} returns are known")
        n = len(self.weights)
        covariance = np.array(state.products).reshape(n, n) / expected
        if self.demeaned:
            means = np.array(state.sums) / expected
            covariance = covariance - np.outer(means, means)
        deviations = np.sqrt(np.diag(covariance))
        if np.min(deviations) <= 0.0:
            raise ValueError("an underlying that never moved has no correlation")
        pairs = np.outer(self.weights, self.weights)
        upper = np.triu_indices(n, 1)
        return float(np.average((covariance / np.outer(deviations, deviations))[upper], weights=pairs[upper]))
