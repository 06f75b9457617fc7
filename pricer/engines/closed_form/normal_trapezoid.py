"""Expectation over one or two independent standard normals by the trapezoidal rule.

For smooth integrands the rule converges faster than any power of its step (Trefethen &
Weideman 2014), and its nodes leave no gap anywhere within their reach: what the integrand
does far from the centre, or along a diagonal, is seen as well as what it does at 0.
"""

from __future__ import annotations

import math
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from pricer.engines.closed_form.family import Estimate
from pricer.engines.closed_form.sparse_grid import Integrand

_FAR = 8.0  # beyond this distance lies less than 2e-14 of two normals
_SLOWEST = 1 / 4  # decrease of the error at a bend, by half the step: less than that is a coincidence
_OFFSETS = (0.0, 0.381966)  # of the nodes, in steps, by level: no symmetry of the integrand is met twice


def expectation(f: Integrand, dimension: int, reach: float, tolerance: float, nodes: int) -> Estimate:
    """``E[f(z)]``, ``z`` of ``dimension`` 1 or 2; ``f`` as for the sparse grid.

    ``reach`` >= 0 is how far a payment may move the weight of the integrand. The step is
    halved until two results agree within ``tolerance`` or the next rule would have more
    than ``nodes``. The error is twice the last difference, which for a smooth integrand is
    far above what is left after it; where the weights leave no good direction the integrand
    is only nearly smooth, so that the difference before counts too.
    """
    radius = math.ceil(2.0 * (_FAR + reach)) / 2.0  # rounded, so that few rules have to be kept
    variables = list(range(dimension))
    value, error, before = math.nan, math.inf, 0.0
    for level in range(20):
        z, weights = _rule(dimension, radius, level)
        finer = float(weights @ f(z, variables))
        if level > 0:
            gap = abs(finer - value)
            error = 2.0 * max(gap, _SLOWEST * before)
            before = gap
        value = finer
        if error <= tolerance or weights.size * 2**dimension > nodes:
            break
    return Estimate(value, error)


@lru_cache(maxsize=16)  # up to 6 MB each
def _rule(dimension: int, radius: float, level: int) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Nodes (m, dimension) of step ``2^-level`` within ``radius``, and weights (m,); read-only."""
    step, most = 0.5**level, math.ceil(radius * 2**level)
    axis = (np.arange(-most, most + 1) + _OFFSETS[level % 2]) * step
    z = np.array(np.meshgrid(*[axis] * dimension, indexing="ij")).reshape(dimension, -1).T
    square = (z * z).sum(axis=1)
    kept = square <= radius * radius
    nodes = np.ascontiguousarray(z[kept])
    weights = np.exp(-0.5 * square[kept]) * (step / math.sqrt(2.0 * math.pi)) ** dimension
    nodes.setflags(write=False)
    weights.setflags(write=False)
    return nodes, weights
