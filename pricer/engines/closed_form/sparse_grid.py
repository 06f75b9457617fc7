"""Expectation over many independent standard normals by an adaptive sparse grid.

Tensor products of Gauss-Hermite rules are added where they have changed the result most
(after Gerstner & Griebel 2003), so that a variable costs nodes only as far as it matters.
Where every change is measured between rules that all miss something, the changes say
nothing of it; therefore two grids that share no node but the centre have to agree.
"""

from __future__ import annotations

import heapq
import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import lru_cache
from itertools import combinations
from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

from pricer.engines.closed_form.family import Estimate
from pricer.engines.closed_form.quadrature import gauss_hermite

#: Nodes of the one-dimensional rules, level by level, of the grid and of the one it is
#: compared with. Doubling makes each change far larger than what is left after it. Where
#: there are many variables, products of small rules have to be cheap.
SIZES_FEW = ((1, 3, 6, 12, 24, 48), (1, 4, 8, 16, 32, 64))
SIZES_MANY = ((1, 2, 4, 8, 16, 32), (1, 3, 5, 9, 18, 36))
FEW = 4
_FIRST_LEVEL, _OTHER_LEVELS = 3, 2  # that each variable has before the changes are believed
_SHARE = 0.25  # of the tolerance for each grid: what is left is for their difference
_HOPELESS = 30.0  # errors accepted
_PAIRED = 3  # leading variables, two of which together have level 1 by then

_Index: TypeAlias = tuple[int, ...]  # a level for each variable
Integrand: TypeAlias = Callable[[NDArray[np.float64], list[int]], NDArray[np.float64]]


@dataclass(frozen=True, slots=True)
class Effort:
    """When to stop: at ``tolerance``, when a grid's ``nodes`` or tensor ``rules`` are spent, or early.

    An error above ``accepted`` is of no use: no grid is compared with one that has it, and
    one that is far from it at a quarter of its nodes or rules is given up.
    """

    tolerance: float
    accepted: float
    nodes: int
    rules: int


def expectation(f: Integrand, dimension: int, effort: Effort) -> Estimate:
    """``E[f(z)]``, ``z`` of ``dimension`` independent standard normals.

    ``f(z, variables)`` gives the values (m,) at points whose coordinates are ``z``
    (m, n_variables) in those ``variables`` and 0 in all others; it should be smooth, and
    its first variable should matter most. The error is the sum of those of two grids with
    different nodes and of the difference of their results.
    """
    first, second = SIZES_FEW if dimension <= FEW else SIZES_MANY
    found = _adaptive(f, dimension, first, effort)
    if found.error > effort.accepted:
        return found
    other = _adaptive(f, dimension, second, effort)
    return Estimate(found.value, found.error + other.error + abs(found.value - other.value))


def _adaptive(f: Integrand, dimension: int, sizes: tuple[int, ...], effort: Effort) -> Estimate:
    """The result of one grid; its error is twice the sum of the changes brought by the outermost rules.

    Before any change is believed each variable has been looked at well beyond the centre,
    and the leading ones along their diagonals: far from the money all central nodes see the
    same payoff.
    """
    grid = _Grid(f, sizes, dimension)
    grid.add((0,) * dimension)
    for k in range(dimension):
        grid.add(_raised(dimension, (k,), _OTHER_LEVELS if k else _FIRST_LEVEL))
    for pair in combinations(range(min(dimension, _PAIRED)), 2):
        grid.add(_raised(dimension, pair, 1))
    while grid.queue:
        error, spent = 2.0 * grid.open, max(grid.spent / effort.nodes, len(grid.changes) / effort.rules)
        if error <= _SHARE * effort.tolerance or spent >= 1.0:
            break
        if spent >= 0.25 and error > _HOPELESS * effort.accepted:
            break
        grid.refine()
    return Estimate(grid.total, 2.0 * max(grid.open, 0.0))


def _raised(dimension: int, variables: tuple[int, ...], level: int) -> _Index:
    return tuple(level if k in variables else 0 for k in range(dimension))


class _Grid:
    """The rules added so far and the change each one brought."""

    def __init__(self, f: Integrand, sizes: tuple[int, ...], dimension: int) -> None:
        self._f = f
        self._sizes = sizes
        self._dimension = dimension
        self._missing: dict[_Index, int] = {}  # rules ahead of each that are not added yet
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
        z, weights = tensor_rule(tuple(self._sizes[index[k]] for k in variables))
        self.spent += weights.size
        # Differences between levels in the first variable, in the first two, and so on.
        differences = [float(weights @ self._f(z, variables))]
        for count, rule in enumerate(behind):
            differences.append(differences[-1] - self.changes[rule][count])
        self.changes[index] = differences
        change = differences[-1]
        self.total += change
        self.open += abs(change)
        self._missing[index] = self._dimension  # a rule that cannot be refined in every variable stays open
        for rule in behind:
            self._missing[rule] -= 1
            if self._missing[rule] == 0:
                self.open -= abs(self.changes[rule][-1])
        heapq.heappush(self.queue, (-abs(change), index))

    def refine(self) -> None:
        """Add all rules ahead of the one whose change was the largest."""
        _, index = heapq.heappop(self.queue)
        for new in _ahead(index, len(self._sizes)):
            self.add(new)


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
