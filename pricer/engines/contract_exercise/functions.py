"""Putting piecewise linear functions together."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from itertools import pairwise

from pricer.contracts.profile import PiecewiseLinear


def constant(amount: float) -> PiecewiseLinear:
    """The same amount at every level."""
    return PiecewiseLinear(amount, 0.0)


def plus(function: PiecewiseLinear, amount: float) -> PiecewiseLinear:
    """The function and a constant."""
    return replace(function, intercept=function.intercept + amount)


def summed(functions: Sequence[PiecewiseLinear]) -> PiecewiseLinear:
    """The sum of functions, at least one."""
    corners: dict[float, tuple[float, float]] = {}
    for function in functions:
        for knot, bend, jump in zip(function.knots, function.bends, function.jumps, strict=True):
            before = corners.get(knot, (0.0, 0.0))
            corners[knot] = (before[0] + bend, before[1] + jump)
    knots = tuple(sorted(corners))
    return PiecewiseLinear(
        sum(f.intercept for f in functions),
        sum(f.slope for f in functions),
        knots,
        tuple(corners[k][0] for k in knots),
        tuple(corners[k][1] for k in knots),
    )


def joined(left: PiecewiseLinear, level: float, right: PiecewiseLinear) -> PiecewiseLinear:
    """``left`` up to ``level``, ``right`` above it."""
    first, last = sum(k < level for k in left.knots), sum(k <= level for k in right.knots)
    b, m = left.pieces()
    c, n = right.pieces()
    knots = (*left.knots[:first], level, *right.knots[last:])
    intercepts = (*b[: first + 1].tolist(), *c[last:].tolist())
    return PiecewiseLinear.from_pieces(knots, intercepts, (*m[: first + 1].tolist(), *n[last:].tolist()))


def best(one: PiecewiseLinear, other: PiecewiseLinear) -> PiecewiseLinear:
    """The larger of both at every level."""
    cuts = sorted({*one.knots, *other.knots, *_crossings(one, other)})
    if not cuts:
        return one if one.intercept >= other.intercept else other
    edges = [cuts[0] - 1.0 - abs(cuts[0]), *cuts, cuts[-1] + 1.0 + abs(cuts[-1])]
    intercepts, slopes = [], []
    for low, high in pairwise(edges):
        middle = 0.5 * (low + high)
        b, m = max((_piece(f, middle) for f in (one, other)), key=lambda piece: piece[0] + piece[1] * middle)
        intercepts.append(b)
        slopes.append(m)
    return PiecewiseLinear.from_pieces(tuple(cuts), tuple(intercepts), tuple(slopes))


def _piece(function: PiecewiseLinear, level: float) -> tuple[float, float]:
    intercepts, slopes = function.pieces()
    place = sum(k < level for k in function.knots)
    return float(intercepts[place]), float(slopes[place])


def _crossings(one: PiecewiseLinear, other: PiecewiseLinear) -> list[float]:
    """Where the straight pieces of both meet, within the piece."""
    edges = [float("-inf"), *sorted({*one.knots, *other.knots}), float("inf")]
    found = []
    for low, high in pairwise(edges):
        if low == float("-inf"):
            inside = high - 1.0 if high < float("inf") else 0.0
        else:
            inside = low + 1.0 if high == float("inf") else 0.5 * (low + high)
        (b, m), (c, n) = _piece(one, inside), _piece(other, inside)
        if m != n and low < (at := (c - b) / (m - n)) < high:
            found.append(at)
    return found
