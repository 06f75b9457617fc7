"""Everyday names of aggregates, by which reports group trades."""

from __future__ import annotations

from pricer.contracts.aggregate import Aggregate, AggregateKind


def family(aggregate: Aggregate) -> str:
    """ "single-asset", "basket", "spread", "worst of" and so on."""
    if len(aggregate.weights) == 1:
        return "single-asset"
    if aggregate.cash is not None:
        return f"{aggregate.kind} assets and cash"
    if aggregate.kind is AggregateKind.WEIGHTED_SUM:
        return "spread" if min(aggregate.weights) < 0.0 < max(aggregate.weights) else "basket"
    if aggregate.kind is AggregateKind.GEOMETRIC:
        return "geometric basket"
    return str(aggregate.kind)
