"""Sums of amounts and of their errors."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence


def total(amounts: Iterable[float]) -> float:
    """The correctly rounded sum, the same in any order; NaN, not zero, where there is nothing to add."""
    amounts = list(amounts)
    if not amounts:
        return math.nan
    try:
        return math.fsum(amounts)
    except (OverflowError, ValueError):  # infinities of both signs, or a sum beyond the largest float
        return math.nan


def quadrature(errors: Iterable[float]) -> float:
    """The standard error of a sum of independent estimates; NaN where there are none.

    Squares are added exactly, so the order of the trades does not matter.
    """
    return math.sqrt(total(error * error for error in errors))


def ratio(amount: float, unit: float) -> float:
    """``amount / unit``, NaN where the unit is zero."""
    return amount / unit if unit else math.nan


def pooled_degrees_of_freedom(errors: Sequence[float], degrees: Sequence[int]) -> int:
    """Degrees of freedom of the standard error of a sum, for the quantile of its sampling interval.

    ``(sum s^2)^2 / sum(s^4 / degrees)``, rounded down (Satterthwaite 1946, Welch 1947); 0 where nothing was sampled.
    """
    sampled = [(s * s, n) for s, n in zip(errors, degrees, strict=True) if s > 0.0 and n > 0]
    weight = total(square * square / n for square, n in sampled)
    if not weight > 0.0:
        return 0
    # The ratio of equal trades is whole in exact arithmetic: do not let rounding take one off.
    return int(total(square for square, _ in sampled) ** 2 / weight * (1.0 + 1e-12))
