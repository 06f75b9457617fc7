"""The statistics of many paths at once, from the state in which tonight finds them."""

from __future__ import annotations

import math
from datetime import date
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.average import Average, AverageOf, AverageState
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.feature import Statistic
from pricer.contracts.locked_in import LockedIn, Selection
from pricer.contracts.performance_sum import PerformanceState, PerformanceSum
from pricer.contracts.realised_correlation import CorrelationState, RealisedCorrelation
from pricer.contracts.realised_variance import RealisedVariance, VarianceState
from pricer.engines.contract_walk.bulk import aggregated, paid
from pricer.engines.contract_walk.one_by_one import AnyStatistic

Array = NDArray[np.float64]


class PathStatistic(Protocol):
    """Shown the levels (n_assets, n_paths) of its dates to come, in order."""

    def observe(self, day: date, levels: Array) -> None: ...

    def value(self, paths: int) -> Array:
        """The statistic of each path after the last date, (paths,)."""


def begin(statistic: Statistic[Any], state: Any) -> PathStatistic:
    """The statistic in ``state``, ready for paths."""
    match statistic:
        case ExpiryLevel():
            return PathLevel(statistic, state)
        case Average():
            return PathAverage(statistic, state)
        case PerformanceSum():
            return PathPerformances(statistic, state)
        case LockedIn():
            return PathSelections(statistic, state)
        case RealisedVariance():
            return PathVariance(statistic, state)
        case RealisedCorrelation():
            return PathCorrelation(statistic, state)
    return AnyStatistic(statistic, state)


class PathLevel:
    """An aggregate on one day."""

    def __init__(self, statistic: ExpiryLevel, state: float | None) -> None:
        self._aggregate = statistic.aggregate
        self._level: Array | float | None = state

    def observe(self, day: date, levels: Array) -> None:
        self._level = aggregated(self._aggregate, levels)

    def value(self, paths: int) -> Array:
        assert self._level is not None  # the day of an expiry level is past or among the dates
        return np.broadcast_to(self._level, (paths,))


class PathAverage:
    """Means of each underlying or of the aggregate."""

    def __init__(self, statistic: Average, state: AverageState) -> None:
        self._statistic = statistic
        self._sums: Array = np.array(state.sums)[:, None]

    def observe(self, day: date, levels: Array) -> None:
        by_underlying = self._statistic.of is AverageOf.UNDERLYINGS
        self._sums = self._sums + (levels if by_underlying else aggregated(self._statistic.aggregate, levels))

    def value(self, paths: int) -> Array:
        means = self._sums / len(self._statistic.schedule)
        by_underlying = self._statistic.of is AverageOf.UNDERLYINGS
        return np.broadcast_to(aggregated(self._statistic.aggregate, means) if by_underlying else means[0], (paths,))


class PathPerformances:
    """A sum of limited performances of periods."""

    def __init__(self, statistic: PerformanceSum, state: PerformanceState) -> None:
        self._statistic = statistic
        self._start = None if state.period_start is None else np.array(state.period_start)[:, None]
        self._total: Array = np.array(state.total)

    def observe(self, day: date, levels: Array) -> None:
        if self._start is not None:
            performance = aggregated(self._statistic.aggregate, levels / self._start)
            self._total = self._total + paid(self._statistic.local, performance)
        self._start = levels

    def value(self, paths: int) -> Array:
        return np.broadcast_to(self._total, (paths,))


class PathSelections:
    """Levels locked in, one underlying leaving on each date."""

    def __init__(self, statistic: LockedIn, state: tuple[Selection, ...]) -> None:
        self._statistic = statistic
        self._gone: NDArray[np.bool_] = np.zeros((statistic.n_underlyings, 1), dtype=bool)
        self._gone[[selection.index for selection in state]] = True
        self._made = len(state)
        self._total: Array = np.array(math.fsum(selection.level for selection in state))

    def observe(self, day: date, levels: Array) -> None:
        left = self._statistic.n_underlyings - self._made
        order = np.argsort(np.where(self._gone, np.inf, -levels), axis=0, kind="stable")
        chosen = order[min(self._statistic.rank, left) - 1][None]
        self._total = self._total + np.take_along_axis(levels, chosen, axis=0)[0]
        gone = np.broadcast_to(self._gone, levels.shape).copy()
        np.put_along_axis(gone, chosen, True, axis=0)
        self._gone, self._made = gone, self._made + 1

    def value(self, paths: int) -> Array:
        return np.broadcast_to(self._total / len(self._statistic.schedule), (paths,))


class PathVariance:
    """Realised variances or volatilities of underlyings and aggregate."""

    def __init__(self, statistic: RealisedVariance, state: VarianceState) -> None:
        self._statistic = statistic
        self._last = None if state.last is None else np.array(state.last)[:, None]
        self._squares: Array = np.array(state.squares)[:, None]
        weights = np.array(statistic.weights)
        # Only what has a weight is followed: the logarithm is most of the work.
        self._assets, self._with_aggregate = np.flatnonzero(weights[:-1]), bool(weights[-1])
        self._rows = np.flatnonzero(weights)
        self._last = None if self._last is None else self._last[self._rows]
        self._squares = self._squares[self._rows]
        self._weights = weights[self._rows]

    def observe(self, day: date, levels: Array) -> None:
        rows = [levels[self._assets]]
        if self._with_aggregate:
            rows.append(aggregated(self._statistic.aggregate, levels)[None])
        now = np.log(np.concatenate(rows))
        if self._last is not None:
            move = now - self._last
            self._squares = self._squares + move * move
        self._last = now

    def value(self, paths: int) -> Array:
        variances = self._statistic.returns_per_year / (len(self._statistic.schedule) - 1) * self._squares
        return np.broadcast_to(
            self._weights @ (np.sqrt(variances) if self._statistic.as_volatility else variances), (paths,)
        )


class PathCorrelation:
    """The weighted mean of pairwise realised correlations."""

    def __init__(self, statistic: RealisedCorrelation, state: CorrelationState) -> None:
        n = len(statistic.weights)
        self._statistic = statistic
        self._last = None if state.last is None else np.array(state.last)[:, None]
        self._sums: Array = np.array(state.sums)[:, None]
        self._products: Array = np.array(state.products).reshape(n, n, 1)

    def observe(self, day: date, levels: Array) -> None:
        now = np.log(levels)
        if self._last is not None:
            moves = now - self._last
            self._sums = self._sums + moves
            self._products = self._products + moves[:, None] * moves[None]
        self._last = now

    def value(self, paths: int) -> Array:
        """Raises ValueError where an underlying never moved."""
        returns = len(self._statistic.schedule) - 1
        covariance = self._products / returns
        if self._statistic.demeaned:
            means = self._sums / returns
            covariance = covariance - means[:, None] * means[None]
        variances = np.einsum("iip->ip", covariance)
        if np.min(variances) <= 0.0:
            raise ValueError("an underlying that never moved has no correlation")
        deviations, weights = np.sqrt(variances), self._statistic.weights
        first, second = np.triu_indices(len(weights), 1)
        correlations = covariance[first, second] / (deviations[first] * deviations[second])
        pairs = np.array(weights)[first] * np.array(weights)[second]
        return np.broadcast_to(pairs / pairs.sum() @ correlations, (paths,))
