"""Aggregates: one level made of several underlyings' levels.

Levels are prices, or performances ``S(T) / initial fixing``. An aggregate is final; what
differs between trades is composed from an aggregate and a profile, never subclassed.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum

import numpy as np
from numpy.typing import NDArray


class AggregateKind(StrEnum):
    """The aggregate's name on a trade ticket."""

    WEIGHTED_SUM = "weighted sum"
    GEOMETRIC = "geometric"
    BEST_OF = "best of"
    WORST_OF = "worst of"
    KTH_BEST = "k-th best"
    RANK_WEIGHTED = "rank weighted"


#: Aggregates whose level depends on the ordering of the underlyings' levels.
RANKED = frozenset({AggregateKind.BEST_OF, AggregateKind.WORST_OF, AggregateKind.KTH_BEST, AggregateKind.RANK_WEIGHTED})


@dataclass(frozen=True, slots=True)
class Aggregate:
    """A level made of ``n`` levels.

    ``weights`` has one number per underlying for a weighted sum (any sign) and a geometric
    aggregate (positive); for ranked aggregates it has one number per *rank*, best first:
    best of is (1, 0, ..., 0), worst of (0, ..., 0, 1), k-th best has its 1 at rank k.
    ``cash`` is the level that competes with the underlyings in "best of assets and cash"
    and "worst of assets and cash"; None for none.
    """

    kind: AggregateKind
    weights: tuple[float, ...]
    cash: float | None = None

    def __post_init__(self) -> None:
        if not self.weights:
            raise ValueError("an aggregate needs at least one weight")
        if self.kind is AggregateKind.GEOMETRIC and min(self.weights) <= 0.0:
            raise ValueError(f"geometric weights must be positive; got {self.weights}")
        if self.cash is not None and self.kind not in (AggregateKind.BEST_OF, AggregateKind.WORST_OF):
            raise ValueError("only best of and worst of compete with cash")

    @classmethod
    def weighted_sum(cls, weights: tuple[float, ...]) -> Aggregate:
        return cls(AggregateKind.WEIGHTED_SUM, weights)

    @classmethod
    def geometric(cls, weights: tuple[float, ...]) -> Aggregate:
        return cls(AggregateKind.GEOMETRIC, weights)

    @classmethod
    def best_of(cls, n: int, cash: float | None = None) -> Aggregate:
        return cls(AggregateKind.BEST_OF, _at_rank(1, n), cash)

    @classmethod
    def worst_of(cls, n: int, cash: float | None = None) -> Aggregate:
        return cls(AggregateKind.WORST_OF, _at_rank(n, n), cash)

    @classmethod
    def kth_best(cls, k: int, n: int) -> Aggregate:
        """k = 1 is the best."""
        return cls(AggregateKind.KTH_BEST, _at_rank(k, n))

    @classmethod
    def rank_weighted(cls, weights: tuple[float, ...]) -> Aggregate:
        """Weights on the sorted levels, best first."""
        return cls(AggregateKind.RANK_WEIGHTED, weights)

    @property
    def is_ranked(self) -> bool:
        return self.kind in RANKED

    def __call__(self, levels: NDArray[np.float64]) -> NDArray[np.float64]:
        """Aggregate of ``levels`` (..., n): an array (...)."""
        w = np.array(self.weights)
        levels = np.asarray(levels, dtype=float)
        if self.kind is AggregateKind.WEIGHTED_SUM:
            out = levels @ w
        elif self.kind is AggregateKind.GEOMETRIC:
            out = np.exp(np.log(levels) @ w)
        else:
            out = np.sort(levels, axis=-1)[..., ::-1] @ w
        if self.cash is not None:
            out = np.maximum(out, self.cash) if self.kind is AggregateKind.BEST_OF else np.minimum(out, self.cash)
        return np.asarray(out)


def _at_rank(k: int, n: int) -> tuple[float, ...]:
    if not 1 <= k <= n:
        raise ValueError(f"rank must lie between 1 and {n}; got {k}")
    return tuple(1.0 if rank == k else 0.0 for rank in range(1, n + 1))
