"""Expectation over many independent standard normals by an adaptive sparse grid.

Tensor products of Gauss-Hermite rules are added where they have changed the result most
(after Gerstner & Griebel 2003), so that a variable costs nodes only as far as it matters.
"""

from __future__ import annotations

import heapq
import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import lru_cache
from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

from pricer.engines.closed_form.family import Estimate
from pricer.engines.closed_form.quadrature import gauss_hermite

#: Nodes of the one-dimensional rules, level by level. Doubling makes each change far larger
#: than what is left after it, so that the changes bound the error. Where there are many
#: variables, products of small rules have to be cheap.
SIZES_FEW = (1, 3, 6, 12, 24, 48)
SIZES_MANY = (1, 2, 4, 8, 16, 32)
FEW = 4

_Index: TypeAlias = tuple[int, ...]  # a level for each variable
Integrand: TypeAlias = Callable[[NDArray[np.float64], list[int]], NDArray[np.float64]]


@dataclass(frozen=True, slots=True)
class Effort:
    """When to stop: at ``tolerance``, when the ``nodes`` or tensor ``rules`` are spent, or early.

    Early means at a quarter of the rules, if the error is still above ``hopeless``.
    """

    tolerance: float
    hopeless: float
    nodes: int
    rules: int


def expectation(f: Integrand, dimension: int, effort: Effort) -> Estimate:
    """``E[f(z)]``, ``z`` of ``dimension`` independent standard normals.

    ``f(z, variables)`` gives the values (m,) at points whose coordinates are ``z``
    (m, n_variables) in those ``variables`` and 0 in all others; it should be smooth.
    The error is twice the sum of the changes brought by the outermost rules.
    """
    grid = _Grid(f, SIZES_FEW if dimension <= FEW else SIZES_MANY)
    grid.add((0,) * dimension)
    refined = False
    while grid.queue:
        error, rules = 2.0 * grid.open, len(grid.changes)
        if refined and error <= effort.tolerance:
            break
        if grid.spent >= effort.nodes or rules >= effort.rules:
            break
        if 4 * rules >= effort.rules and error > effort.hopeless:
            break
        _, index = heapq.heappop(grid.queue)
        ahead = list(_ahead(index, len(grid.sizes)))
        # A rule that cannot be refined in every variable leaves its change in the error.
        if len(ahead) == dimension:
            grid.open -= abs(grid.changes[index][-1])
        for new in ahead:
            grid.add(new)
        refined = True
    return Estimate(grid.total, 2.0 * max(grid.open, 0.0))


class _Grid:
    """The rules added so far and the change each one brought."""

    def __init__(self, f: Integrand, sizes: tuple[int, ...]) -> None:
        self._f = f
        self.sizes = sizes
        self.changes: dict[_Index, list[float]] = {}
        self.queue: list[tuple[float, _Index]] = []
        self.total = 0.0
        self.open = 0.0  # sum of the absolute changes of the rules not refined yet
        self.spent = 0

    def add(self, index: _Index) -> None:
        """Add the rule of ``index``, and first all rules behind it.

        Adding a rule although some rule behind it brought little keeps one change that
        happens to be near 0 from hiding all that lies beyond it.
        """
        if index in self.changes:
            return
        variables = [k for k, level in enumerate(index) if level > 0]
        behind = [(*index[:k], index[k] - 1, *index[k + 1 :]) for k in variables]
        for rule in behind:
            self.add(rule)
        z, weights = tensor_rule(tuple(self.sizes[index[k]] for k in variables))
        self.spent += weights.size
        # Differences between levels in the first variable, in the first two, and so on.
        differences = [float(weights @ self._f(z, variables))]
        for count, rule in enumerate(behind):
            differences.append(differences[-1] - self.changes[rule][count])
        self.changes[index] = differences
        change = differences[-1]
        self.total += change
        self.open += abs(change)
        heapq.heappush(self.queue, (-abs(change), index))


@lru_cache(maxsize=512)
def tensor_rule(orders: tuple[int, ...]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Nodes (m, n_orders) and weights (m,) of the product of Gauss-Hermite rules, read-only."""
    rules = [gauss_hermite(order) for order in orders]
    axes = np.meshgrid(*(nodes for nodes, _ in rules), indexing="ij")
    z = np.array([axis.ravel() for axis in axes]).reshape(len(orders), math.prod(orders)).T.copy()
    weights = np.ones(1)
    for _, weight in rules:
        weights = np.multiply.outer(weights, weight).ravel()
    z.setflags(write=False)
    weights.setflags(write=False)
    return z, weights


def _ahead(index: _Index, levels: int) -> Iterator[_Index]:
    for k, level in enumerate(index):
        if level + 1 < levels:
            yield (*index[:k], level + 1, *index[k + 1 :])
