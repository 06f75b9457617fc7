"""The direction of a sum of lognormals that matters most at a strike, and what is left given it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.engines.closed_form.lognormal_sum import LognormalSum
from pricer.engines.closed_form.one_factor_sum import OneFactorSum

_REFINEMENTS = 3


@dataclass(frozen=True, slots=True)
class Direction:
    """A normal variable ``w`` of unit variance inside the driver of the logs.

    ``unit`` (rank,) is its direction in the coordinates of ``total.root()``, ``loadings``
    (n,) the covariances of the logs with it, ``sensitivities`` (n,) the signed terms of the
    sum where the conditional mean given ``w`` crosses the strike.
    """

    unit: NDArray[np.float64]
    loadings: NDArray[np.float64]
    sensitivities: NDArray[np.float64]


def directions(total: LognormalSum, strike: float) -> list[Direction]:
    """Directions of growing fitness for ``strike``; empty where the first-order sum has no variance.

    The first is that of the sum's first-order change at the forwards; each next one that of
    the change at the boundary which the last one found (Carmona & Durrleman 2005).
    """
    root = total.root()
    found: list[Direction] = []
    weights = total.coefficients
    for _ in range(_REFINEMENTS):
        pull = root.T @ weights
        size = float(np.linalg.norm(pull))
        if size <= 1e-12 * float(np.abs(weights) @ total.deviations):
            break
        unit = pull / size
        loadings = root @ unit
        boundary = OneFactorSum(total.shift, total.coefficients, loadings).roots(strike)
        if len(boundary) == 1 and abs(boundary[0]) < 8.0:
            weights = total.coefficients * np.exp(loadings * (boundary[0] - 0.5 * loadings))
        found.append(Direction(unit, loadings, weights))
        if len(boundary) != 1:
            break
    return found
