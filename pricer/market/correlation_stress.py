"""Correlations moved towards one or towards zero, still correlations."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from pricer.market.correlation import CorrelationMatrix


def stressed(
    matrix: CorrelationMatrix,
    *,
    towards_one: float = 0.0,
    towards_zero: float = 0.0,
    ids: Sequence[str] | None = None,
) -> CorrelationMatrix:
    """``matrix`` with the correlations among ``ids`` (all, by default) moved by a share from 0 to 1.

    Among ``ids`` an entry c becomes ``(1 - a) c + a`` towards one, ``(1 - b) c`` towards zero; at a
    share of 1 all of them are 1, or 0. Entries with other ids shrink by ``sqrt(1 - a)`` or
    ``sqrt(1 - b)``: this is the law of the same normals after a share of each one's variance is
    replaced by a common independent normal, or by one of its own, hence always a correlation
    matrix. Currency pairs are best left out of ``ids`` towards one: EURUSD with everything at +1 is
    USDEUR at -1, so the direction of the quote would decide.

    Raises ValueError unless exactly one share is above 0 and both lie from 0 to 1, and for unknown ids.
    """
    for name, share in (("towards_one", towards_one), ("towards_zero", towards_zero)):
        if not 0.0 <= share <= 1.0:
            raise ValueError(f"{name} must be a share from 0 to 1; got {share}")
    if (towards_one > 0.0) == (towards_zero > 0.0):
        raise ValueError("a stress goes either towards one or towards zero")
    chosen = matrix.ids if ids is None else tuple(ids)
    unknown = [name for name in chosen if name not in matrix]
    if unknown:
        raise ValueError(f"the correlation matrix does not hold {', '.join(unknown)}")
    share = max(towards_one, towards_zero)
    inside = np.array([name in chosen for name in matrix.ids])
    kept = np.where(inside, np.sqrt(1.0 - share), 1.0)
    out = matrix.matrix * np.outer(kept, kept)
    if towards_one > 0.0:
        out += share * np.outer(inside, inside)
    np.fill_diagonal(out, 1.0)
    return CorrelationMatrix(matrix.ids, np.clip(out, -1.0, 1.0))
