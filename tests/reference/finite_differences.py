"""Finite differences for contracts on two or three correlated lognormal levels, a method apart from all engines.

In the logarithms of the levels the backward equation ``V_t + m . grad V + tr(C hess V) / 2 = 0`` has constant
coefficients. Values are in tonight's money: amounts come in discounted to tonight, so that nothing is discounted here.

Steps in time split by directions, mixed derivatives explicit: Hundsdorfer & Verwer's scheme with ``1/2 + sqrt(3)/6``,
of second order and stable with mixed derivatives (in 't Hout & Welfert 2009, Applied Numerical Mathematics 59,
677-692). After each date two half-steps, implicit direction by direction, damp what a jump leaves (the idea of
Rannacher 1984, Numerische Mathematik 43, 309-327). What a date changes is averaged over cells, whose faces lie on the
barriers: second order in the spacing for payoffs with jumps (Pooley, Vetzal & Forsyth 2003, Journal of Computational
Finance 6(4), 25-40). The papers are cited from memory; that the scheme converges as they say is a test of its own.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import solve_banded
from scipy.ndimage import map_coordinates

Array = NDArray[np.float64]

#: The value after a date's decision, from the levels (one array an asset, to be broadcast) and the value without it.
Decision = Callable[[Sequence[Array], Array], Array]

IMPLICITNESS = 0.5 + math.sqrt(3.0) / 6.0

#: Cells by which a spline is moved for its slope.
_MOVE = 1e-3

#: Places within a cell of width 1 around its centre, with weights, for averages along one axis (Gauss, Legendre).
_PLACES, _WEIGHTS = (0.5 * part for part in np.polynomial.legendre.leggauss(3))


@dataclass(frozen=True)
class Levels:
    """Logarithms start at ``start`` (n,) and move by ``drifts`` (n,) with ``covariance`` (n, n), a year each."""

    start: Array
    drifts: Array
    covariance: Array


@dataclass(frozen=True)
class Fineness:
    """Cells have the width ``unit / cells`` in logarithms, with faces at its multiples: barriers are at multiples of
    ``unit``. About ``steps`` a year; ``deviations`` from the start to the edges of the grid, where slopes are 0.
    """

    unit: float
    cells: int
    steps: int
    halvings: int = 0
    deviations: float = 4.5

    def halved(self) -> Fineness:
        """Half the width of cells, half the steps in time, the same edges."""
        return replace(self, halvings=self.halvings + 1)

    @property
    def width(self) -> float:
        return self.unit / (self.cells * 2**self.halvings)

    def steps_in(self, years: float) -> int:
        return max(1, round(self.steps * years)) * int(2**self.halvings)


def value(levels: Levels, decisions: Sequence[tuple[float, Decision]], fineness: Fineness) -> Array:
    """The value tonight, then its derivatives by the logarithms of the levels: (1 + n,).

    ``decisions`` by time in years, ascending; the last is given zeros.
    """
    grid = _Grid(levels, decisions[-1][0], fineness)
    values = np.zeros(grid.shape)
    for (before, _), (time, decide) in reversed(list(itertools.pairwise([(0.0, None), *decisions]))):
        values = grid.decided(values, decide)
        values = grid.earlier(values, time - before, fineness.steps_in(time - before))
    return grid.at_start(values)


def extrapolated(
    levels: Levels, decisions: Sequence[tuple[float, Decision]], fineness: Fineness
) -> tuple[Array, Array]:
    """Value and derivatives by Richardson's extrapolation, and their errors, (1 + n,) each.

    From three grids, each with half the spacings of the one before: the two finer ones are extrapolated, and the
    error is how far that moved from the extrapolation of the two coarser ones.
    """
    grids = (fineness, fineness.halved(), fineness.halved().halved())
    coarse, middle, fine = (value(levels, decisions, grid) for grid in grids)
    first, second = middle + (middle - coarse) / 3.0, fine + (fine - middle) / 3.0
    return second, np.abs(second - first)


class _Grid:
    """Cells around ``axes``, the centres' logarithms; values (cells along each asset's axis)."""

    def __init__(self, levels: Levels, years: float, fineness: Fineness) -> None:
        self.levels, self.width = levels, fineness.width
        spread = fineness.deviations * np.sqrt(np.diag(levels.covariance) * years)
        ends = levels.start + levels.drifts * years
        lowest = np.floor((np.minimum(levels.start, ends) - spread) / fineness.unit).astype(int)
        highest = np.ceil((np.maximum(levels.start, ends) + spread) / fineness.unit).astype(int)
        numbers = (highest - lowest) * round(fineness.unit / fineness.width)
        self.axes = [
            fineness.unit * low + self.width * (np.arange(n) + 0.5) for low, n in zip(lowest, numbers, strict=True)
        ]
        self.shape = tuple(numbers.tolist())

    def decided(self, values: Array, decide: Decision) -> Array:
        """Values at cells plus what the decision changes, averaged over each cell."""
        changes, n = np.zeros(self.shape), len(self.axes)
        for chosen in itertools.product(range(len(_PLACES)), repeat=n):
            places, between = _PLACES[list(chosen)], values
            for axis, place in enumerate(places):
                between = between + abs(place) * (_neighbour(between, axis, 1 if place > 0.0 else -1) - between)
            logs = np.meshgrid(
                *(axis + place * self.width for axis, place in zip(self.axes, places, strict=True)),
                indexing="ij",
                sparse=True,
            )
            changed = decide([np.exp(log) for log in logs], between)
            changes += np.prod(_WEIGHTS[list(chosen)]) * (changed - between)
        return values + changes

    def earlier(self, values: Array, years: float, steps: int) -> Array:
        """Values ``years`` before."""
        step = years / steps
        for _ in range(2):
            values = self._damped(values, 0.5 * step)
        for _ in range(steps - 1):
            values = self._stepped(values, step)
        return values

    def at_start(self, values: Array) -> Array:
        """Value and slopes at the start, by cubic splines through the cells' centres."""
        start = np.array([(x - axis[0]) / self.width for x, axis in zip(self.levels.start, self.axes, strict=True)])
        moves = _MOVE * np.eye(len(self.axes))
        places = np.concatenate((start[None, :], start + moves, start - moves))
        found = map_coordinates(values, places.T, order=3, mode="nearest")
        up, down = np.split(found[1:], 2)
        return np.concatenate((found[:1], (up - down) / (2.0 * _MOVE * self.width)))

    def _damped(self, values: Array, step: float) -> Array:
        """One implicit step of first order, direction after direction: it forgets what alternates between cells.

        The scheme of second order keeps that, its factor tends to 1 where two directions are stiff.
        """
        values = values + step * self._mixed_slopes(values)
        for axis in range(len(self.axes)):
            values = self._solved(values, axis, step)
        return values

    def _stepped(self, values: Array, step: float) -> Array:
        """One step of second order."""
        slopes, total = self._slopes(values)
        first = self._implicit(values + step * total, slopes, step)
        again, total_again = self._slopes(first)
        return self._implicit(values + 0.5 * step * (total + total_again), again, step)

    def _implicit(self, predicted: Array, slopes: Sequence[Array], step: float) -> Array:
        """``predicted`` with the slopes of each direction made implicit in turn."""
        part = IMPLICITNESS * step
        for axis, slope in enumerate(slopes):
            predicted = self._solved(predicted - part * slope, axis, part)
        return predicted

    def _coefficients(self, axis: int) -> tuple[float, float]:
        """Weights of the neighbours below and above in one direction's slope."""
        spread = 0.5 * self.levels.covariance[axis, axis] / self.width**2
        drift = 0.5 * self.levels.drifts[axis] / self.width
        return spread - drift, spread + drift

    def _slopes(self, values: Array) -> tuple[list[Array], Array]:
        """Slopes in time of each direction, and their sum with the mixed derivatives."""
        slopes = [self._slope(values, axis) for axis in range(len(self.axes))]
        return slopes, sum(slopes, self._mixed_slopes(values))

    def _slope(self, values: Array, axis: int) -> Array:
        below, above = self._coefficients(axis)
        slope, rises = np.zeros(self.shape), np.diff(np.moveaxis(values, axis, 0), axis=0)
        lines = np.moveaxis(slope, axis, 0)
        lines[:-1] += above * rises
        lines[1:] -= below * rises
        return slope

    def _mixed_slopes(self, values: Array) -> Array:
        total = np.zeros(self.shape)
        for i, j in itertools.combinations(range(len(self.axes)), 2):
            across = _neighbour(values, i, 1) - _neighbour(values, i, -1)
            mixed = _neighbour(across, j, 1) - _neighbour(across, j, -1)
            total += self.levels.covariance[i, j] / (4.0 * self.width**2) * mixed
        return total

    def _solved(self, right: Array, axis: int, part: float) -> Array:
        """The solution of ``(1 - part * slopes) x = right`` along one axis."""
        below, above = self._coefficients(axis)
        n = self.shape[axis]
        bands = np.empty((3, n))
        bands[0], bands[1], bands[2] = -part * above, 1.0 + part * (below + above), -part * below
        bands[1, 0], bands[1, -1] = 1.0 + part * above, 1.0 + part * below  # no slope at the edges
        lines = np.moveaxis(right, axis, -1)
        solved = solve_banded((1, 1), bands, lines.reshape(-1, n).T, check_finite=False)
        return np.moveaxis(solved.T.reshape(lines.shape), -1, axis)


def _neighbour(values: Array, axis: int, by: int) -> Array:
    """The next cell's values along an axis, up or down; at the edge the cell's own."""
    lines = np.moveaxis(values, axis, 0)
    moved = np.concatenate((lines[1:], lines[-1:]) if by > 0 else (lines[:1], lines[:-1]))
    return np.moveaxis(moved, 0, axis)
