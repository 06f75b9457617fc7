"""How states move from one exercise date to the next: whole paths, and inner successors of given states.

The engine asks two things of any model, so local-volatility paths can take the place of lognormal ones:
paths to the dates, and draws of the next date's state given this date's. Both must have the same law.
"""

from __future__ import annotations

from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from pricer.engines.early_exercise import kernels
from pricer.engines.early_exercise.problem import EarlyExerciseProblem
from pricer.simulation import sobol
from pricer.simulation.bridge import Bridge
from pricer.simulation.kernels.elementary import NORMAL_VARIANCE_EXCESS
from pricer.simulation.loadings import principal_components

Array = NDArray[np.float64]
Singles = NDArray[np.float32]

_LOG2_E = 1.0 / np.log(2.0)

#: Inner successors of a state at most: twice as many as the kernels' table of points, for mirror images.
MOST_INNER = 512


def checked_sizes(points: int, inner: int) -> None:
    """Raises ValueError unless paths fill whole strips and whole nets, and so do inner successors."""
    if points < kernels.STRIP or points & (points - 1):
        raise ValueError(f"paths of a block must be a power of two from {kernels.STRIP} on; got {points}")
    if not 2 <= inner <= MOST_INNER or inner & (inner - 1):
        raise ValueError(f"inner successors must be a power of two from 2 to {MOST_INNER}; got {inner}")


class Successors(Protocol):
    """Draws of the next state; one instance belongs to one thread."""

    def fill(self, date: int, states: Singles, stream: np.random.Generator, first: int, levels: Singles) -> None:
        """States at ``date`` given ``states`` (n, P) at the date before, all from one set of inner points.

        ``levels`` : (n, at least first + P K), from column ``first`` on the K successors of a state side by side.
        The set is random as a whole, so that each average over successors is unbiased given the state.
        """
        ...


class Dynamics(Protocol):
    """A law of paths."""

    @property
    def n_state(self) -> int:
        """Rows of a state."""
        ...

    def paths(self, stream: np.random.Generator, points: int) -> Singles:
        """One randomisation of low-discrepancy paths, (n_dates, n_state, points)."""
        ...

    def successors(self, inner: int) -> Successors:
        """A sampler of ``inner`` successors a state."""
        ...


class LognormalDynamics:
    """Correlated lognormal levels of an :class:`EarlyExerciseProblem` whose first date is after time 0."""

    def __init__(self, problem: EarlyExerciseProblem, importance: Array) -> None:
        """``importance`` : (n,) > 0, each asset's share of the aggregate: what the best points go to.

        Raises ValueError for a first date at time 0.
        """
        if problem.times[0] <= 0.0:
            raise ValueError("nothing moves before a date at time 0: take it off first")
        self._times = problem.times
        self._spots = problem.spots
        shares = importance / np.max(importance)
        self._loadings: list[Singles] = []
        for covariance in problem.step_covariances:
            full = principal_components(covariance, shares, np.diag(covariance))
            full = full * _LOG2_E / np.sqrt(1.0 + NORMAL_VARIANCE_EXCESS)
            self._loadings.append(np.ascontiguousarray(full, dtype=np.float32))
        self._drifts = np.ascontiguousarray(problem.log_drifts * _LOG2_E, dtype=np.float32)

    @property
    def n_state(self) -> int:
        return len(self._spots)

    def paths(self, stream: np.random.Generator, points: int) -> Singles:
        grid = np.concatenate([[0.0], self._times])
        normals = self._unit_increments(grid, stream, points)
        logs = np.repeat(np.log2(self._spots)[:, None], points, axis=1)
        out = np.empty((len(self._times), self.n_state, points), dtype=np.float32)
        for i, loadings in enumerate(self._loadings):
            logs += self._drifts[i][:, None]
            logs += loadings @ normals[i, : loadings.shape[1]]
            out[i] = np.exp2(logs.astype(np.float32))
        return out

    def _unit_increments(self, grid: Array, stream: np.random.Generator, points: int) -> Singles:
        """Independent normals of every step, (n_dates, dims, points), the best points on the longest moves."""
        widths = [loadings.shape[1] for loadings in self._loadings]
        dims = max(widths)
        sizes = np.zeros(dims)
        for width, loadings in zip(widths, self._loadings, strict=True):
            sizes[:width] = np.maximum(sizes[:width], np.linalg.norm(loadings.astype(float), axis=0))
        bridge = Bridge.over(grid)
        places = bridge.coordinates(sizes)  # (n_dates, dims)
        normals = np.empty((places.size, points), dtype=np.float32)
        if dims:
            words = sobol.random_words(stream, 1, places.size)[0]
            kernels.sobol_normals(sobol.extended_directions(places.size), words, normals)
        walks = bridge.walk(normals[places.ravel()].reshape(len(self._times), dims, points).astype(float))
        increments = np.diff(walks, axis=0, prepend=0.0) / np.sqrt(np.diff(grid))[:, None, None]
        return increments.astype(np.float32)

    def successors(self, inner: int) -> Successors:
        return _LognormalSuccessors(self._loadings, self._drifts, inner)


class _LognormalSuccessors:
    """Growth factors at mirrored, digitally shifted Sobol points, common to the states of one call."""

    def __init__(self, loadings: list[Singles], drifts: Singles, inner: int) -> None:
        half = inner // 2
        dims = max(part.shape[1] for part in loadings)
        self._loadings, self._drifts = loadings, drifts
        self._points = np.empty((max(dims, 1), half), dtype=np.uint32)
        if dims:
            kernels.sobol_points(sobol.extended_directions(dims), self._points)
        self._normals = [np.empty((part.shape[1], half), dtype=np.float32) for part in loadings]
        self._growth = np.empty((len(drifts[0]), inner), dtype=np.float32)

    def fill(self, date: int, states: Singles, stream: np.random.Generator, first: int, levels: Singles) -> None:
        loadings = self._loadings[date]
        dims = loadings.shape[1]
        shift = stream.integers(0, 2**32, size=dims, dtype=np.uint32)
        kernels.mirrored_growth(
            self._points[:dims], shift, loadings, self._drifts[date], self._normals[date], self._growth
        )
        kernels.grown(states, self._growth, first, levels)


def mirrored_normals(dims: int, m: int, stream: np.random.Generator) -> Array:
    """``m`` scrambled Sobol normals, the second half mirror images of the first, (m, dims)."""
    half = np.empty((dims, m // 2), dtype=np.float32)
    if dims:
        kernels.sobol_normals(sobol.extended_directions(dims), sobol.random_words(stream, 1, dims)[0], half)
    out: Array = np.concatenate([half, -half], axis=1).T.astype(float)
    return out
