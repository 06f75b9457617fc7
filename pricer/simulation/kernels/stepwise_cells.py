"""Intervals of a cell of the factor: where a straight reading lies beyond a level, and what that is worth."""

from __future__ import annotations

from typing import Any

from numba import njit

from pricer.simulation.kernels.vectors import OPTIONS

#: What cut an interval's end if no reading did: the end of the cell; or a payoff's own knot.
UNCUT, KNOT = -1, -2


@njit(**OPTIONS)
def above(a: float, b: float, level: float) -> Any:
    """Where a line from ``a`` at 0 to ``b`` at 1 lies above ``level``: an interval, empty if its end comes first."""
    if a > level:
        return (0.0, 1.0) if b > level else (0.0, (a - level) / (a - b))
    return ((level - a) / (b - a), 1.0) if b > level else (1.0, 0.0)


@njit(**OPTIONS)
def below(a: float, b: float, level: float) -> Any:
    """The rest of the cell."""
    if a > level:
        return (1.0, 0.0) if b > level else ((a - level) / (a - b), 1.0)
    return (0.0, (level - a) / (b - a)) if b > level else (0.0, 1.0)


@njit(**OPTIONS)
def higher(s: float, row: int, other: float, other_row: int) -> Any:
    """The later start, and what cut it."""
    return (other, other_row) if other > s else (s, row)


@njit(**OPTIONS)
def lower(s: float, row: int, other: float, other_row: int) -> Any:
    """The earlier end, and what cut it."""
    return (other, other_row) if other < s else (s, row)


@njit(**OPTIONS)
def density(mass: Any, c: int, s: float) -> Any:
    """Of the distribution at a place of a cell."""
    return mass[c, 0] + s * (2.0 * mass[c, 1] + s * (3.0 * mass[c, 2] + s * 4.0 * mass[c, 3]))


@njit(**OPTIONS)
def _left(mass: Any, c: int, s: float) -> Any:
    return s * (mass[c, 0] + s * (mass[c, 1] + s * (mass[c, 2] + s * mass[c, 3])))


@njit(**OPTIONS)
def share_between(mass: Any, c: int, start: float, end: float) -> Any:
    """Of the distribution between two places of a cell, 0 if they are not in order."""
    if end <= start:
        return 0.0
    out = _left(mass, c, end)
    return out if start <= 0.0 else out - _left(mass, c, start)


@njit(**OPTIONS)
def moment_between(moment: Any, c: int, start: float, end: float) -> Any:
    """Integral of the place over the distribution between two places."""
    return end * _left(moment, c, end) - start * _left(moment, c, start)


@njit(**OPTIONS)
def move(adjoints: Any, line: Any, c: int, s: float, by: float) -> None:
    """Hand the derivative ``by`` at the place ``s``, where ``line`` meets a level, on to the line's two ends."""
    part = by / (line[c + 1] - line[c])
    adjoints[c] += part * (s - 1.0)
    adjoints[c + 1] -= part * s
