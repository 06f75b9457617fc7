"""The normal factor of a path cut into cells, on which readings are straight lines."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

Array = NDArray[np.float64]

#: Cells reach this many deviations to either side; what lies beyond, 7e-6 of all, counts with the outermost cells.
REACH = 4.5

#: Values of the factor for which paths are simulated: from -REACH to REACH.
NODES = 9

#: Neighbouring nodes whose polynomial gives a price between them: of degree 7.
_NEIGHBOURS = 8


@dataclass(frozen=True, slots=True)
class FactorCells:
    """``nodes`` (NODES,) simulated; ``weights`` (NODES, cells + 1): prices at the ends of cells from those at nodes.

    Prices at the ends are such that straight lines between them have the mean of the smooth curve over every cell, to
    fourth order. ``mass`` (cells, 4) and ``moment`` (cells, 4) : a place s in [0, 1] of a cell has ``sum_k mass[k]
    s^(k + 1)`` of the normal distribution to its left within the cell, and ``sum_k moment[k] s^(k + 2)`` is the same
    integral over s.
    """

    nodes: Array
    weights: Array
    mass: Array
    moment: Array

    @classmethod
    @lru_cache(maxsize=8)
    def of(cls, cells: int) -> FactorCells:
        """``cells`` of equal width."""
        nodes = np.linspace(-REACH, REACH, NODES)
        width = 2.0 * REACH / cells
        ends = np.linspace(-REACH - width, REACH + width, cells + 3)
        at_ends = np.stack([_interpolation(nodes, w) for w in ends], axis=1)
        straight = at_ends[:, 1:-1] - (at_ends[:, :-2] - 2.0 * at_ends[:, 1:-1] + at_ends[:, 2:]) / 12.0
        places = 0.5 * (1.0 - np.cos(np.pi * (np.arange(4) + 0.5) / 4.0))
        powers = np.vander(places, 4, increasing=True)
        w = ends[1:-2, None] + width * places
        density = width * np.exp(-0.5 * w * w) / np.sqrt(2.0 * np.pi)
        coefficients = np.linalg.solve(powers, density.T).T
        inner = ndtr(ends[1:-1])
        inner[0], inner[-1] = 0.0, 1.0
        mass = coefficients / np.arange(1.0, 5.0)
        share = np.diff(inner) / mass.sum(axis=1)
        return cls(nodes, straight, mass * share[:, None], coefficients * share[:, None] / np.arange(2.0, 6.0))


def _interpolation(nodes: Array, w: float) -> Array:
    """Weights of the nodes (Lagrange), all but the nearest ``_NEIGHBOURS`` 0."""
    spacing = nodes[1] - nodes[0]
    first = int(np.clip(np.floor((w - nodes[0]) / spacing) - _NEIGHBOURS // 2 + 1, 0, len(nodes) - _NEIGHBOURS))
    near = nodes[first : first + _NEIGHBOURS]
    out = np.zeros(len(nodes))
    for i, node in enumerate(near):
        others = np.delete(near, i)
        out[first + i] = float(np.prod((w - others) / (node - others)))
    return out
