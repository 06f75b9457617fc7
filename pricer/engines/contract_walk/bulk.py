"""Aggregates, payouts and triggers of many paths at once.

Levels have the assets first, (n_assets, n_paths): each row is contiguous, which is what a walk
from date to date works on. The numbers are those of ``Aggregate``, ``paid_at`` and ``Trigger.met``.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.feature import Payout
from pricer.contracts.profile import TIE, is_above
from pricer.contracts.trigger import Direction, Trigger

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


def aggregated(aggregate: Aggregate, levels: Array) -> Array:
    """The aggregate of ``levels`` (n_assets, n_paths), (n_paths,)."""
    weights = np.array(aggregate.weights)
    if aggregate.kind is AggregateKind.WEIGHTED_SUM:
        out = weights @ levels
    elif aggregate.kind is AggregateKind.GEOMETRIC:
        out = np.exp(weights @ np.log(levels))
    elif aggregate.kind is AggregateKind.BEST_OF:
        out = levels.max(axis=0)
    elif aggregate.kind is AggregateKind.WORST_OF:
        out = levels.min(axis=0)
    else:
        out = weights @ np.sort(levels, axis=0)[::-1]
    if aggregate.cash is not None:
        out = (
            np.maximum(out, aggregate.cash)
            if aggregate.kind is AggregateKind.BEST_OF
            else np.minimum(out, aggregate.cash)
        )
    return np.asarray(out)


def paid(payout: Payout, levels: Array) -> Array:
    """The payout's amount at each of ``levels`` (any shape); one at a jump's knot but for rounding is at the knot."""
    payoff = payout.payoff()
    out = payoff.intercept + payoff.slope * levels
    for knot, bend, jump in zip(payoff.knots, payoff.bends, payoff.jumps, strict=True):
        if bend:
            out = out + bend * np.maximum(levels - knot, 0.0)
        if jump:
            out = out + jump * is_above(levels, knot)
    return np.asarray(out)


def read(trigger: Trigger, levels: Array) -> Array:
    """What the trigger compares, of ``levels`` (n_assets, n_paths), (n_paths,)."""
    scaled = levels if trigger.scales is None else levels / np.array(trigger.scales)[:, None]
    return aggregated(trigger.aggregate, scaled)


def met(trigger: Trigger, reading: Array, level: float) -> Mask:
    """Where a reading (n_paths,) meets ``level``."""
    gap = reading - level if trigger.direction is Direction.UP else level - reading
    tolerance = TIE * np.maximum(np.abs(reading), abs(level))
    return np.asarray(gap >= -tolerance if trigger.at_level_counts else gap > tolerance)
