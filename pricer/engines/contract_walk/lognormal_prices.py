"""Lognormal prices above known amounts on a contract's dates: exact in law, one step per date."""

from __future__ import annotations

from copy import copy

import numpy as np
from numpy.typing import NDArray

from pricer.engines.contract_walk.noise import clock_of
from pricer.engines.contract_walk.prices import Drawn

Array = NDArray[np.float64]

#: Directions with less than this part of the largest variance are rounding.
_NEGLIGIBLE = 1e-13


class LognormalPrices:
    """``forwards[k] M[k] + floors[k] Y[k]``: M, and Y where floors are converted, lognormal martingales from 1.

    Each step's covariance is taken apart by its symmetric root, turned to the principal axes of the whole: where
    steps are alike these are the principal components, and an even Brownian motion drives each.
    """

    def __init__(self, forwards: Array, floors: Array, covariances: Array) -> None:
        """``forwards``, ``floors`` (n_dates, n).

        ``covariances`` (n_dates, r, r) of the logarithms over each step: of M (r = n), or of M and then Y (r = 2n).
        """
        self._forwards, self._floors = forwards[:, :, None], floors[:, :, None]
        traces = np.trace(covariances, axis1=1, axis2=2)
        self._clock = clock_of(traces)
        values, axes = np.linalg.eigh(covariances.sum(axis=0))
        kept = values > _NEGLIGIBLE * max(float(values[-1]), 1e-300)
        kept = kept[::-1]
        values, axes = values[::-1][kept], axes[:, ::-1][:, kept]
        self._sizes = np.sqrt(values)
        own_values, own_axes = np.linalg.eigh(covariances)
        roots = np.einsum("kij,kj,klj->kil", own_axes, np.sqrt(np.maximum(own_values, 0.0)), own_axes)
        self._loadings = roots @ axes / np.sqrt(np.diff(self._clock))[:, None, None]
        self._variances = np.diagonal(covariances, axis1=1, axis2=2)

    @property
    def clock(self) -> Array:
        return self._clock

    @property
    def sizes(self) -> Array:
        return np.asarray(self._sizes)

    def with_variances(self, forwards: Array, variances: Array) -> LognormalPrices:
        """Other forwards and variances over each step, (n_dates, n) each, the correlation of each step as it is.

        On the same motions every price moves along with its own variance: differences between laws are smooth.
        """
        scales = np.sqrt(
            np.divide(variances, self._variances, out=np.ones_like(variances), where=self._variances > 0.0)
        )
        out = copy(self)
        out._forwards, out._variances = forwards[:, :, None], variances
        out._loadings = self._loadings * scales[:, :, None]
        return out

    def draw(self, walks: Array) -> Drawn:
        n, paths = self._forwards.shape[1], walks.shape[2]
        if not len(self._sizes):  # nothing moves
            return _proportional(np.repeat(self._forwards, paths, axis=2), self._floors)
        moves = np.diff(walks, axis=0, prepend=np.zeros((1, *walks.shape[1:])))
        logs = np.cumsum(self._loadings @ moves - 0.5 * self._variances[:, :, None], axis=0)
        martingales = np.exp(logs)
        random = self._forwards * martingales[:, :n]
        converted = martingales.shape[1] > n
        return _proportional(random, self._floors * martingales[:, n:] if converted else self._floors)


def _proportional(random: Array, floors: Array) -> Drawn:
    """The random part of a lognormal price is proportional to that of the spot."""
    return Drawn(random, floors, lambda asset, factor: factor * random[:, asset])
