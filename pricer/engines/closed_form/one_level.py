"""Contracts that look at one lognormal level only: one underlying, or one geometric aggregate of several.

A geometric aggregate of lognormal levels is lognormal on every date, and what it does between two dates does not
depend on the past, so that it is an underlying like any other.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.autocall import Autocall
from pricer.contracts.barrier import Barrier
from pricer.contracts.coupons import Coupons
from pricer.contracts.option import Conversion
from pricer.engines.closed_form.contract_parts import live_features, setting_place
from pricer.engines.contract_terms import ContractTerms

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class OneLevel:
    """The level that everything is a power of: ``forwards[k] M[k] + floors[k]`` on the dates from ``first`` on.

    ``forwards``, ``floors`` and ``variances`` (n_dates - first,): of the random part, known cash, and the log's
    variance since today, or since the date that sets the references, when the level is 1. Every underlying's level
    is ``level ** exponent``, which makes the aggregate what it must be.
    """

    first: int
    forwards: Array
    floors: Array
    variances: Array
    exponent: float
    n_assets: int

    def levels(self, at: Array) -> Array:
        """Levels of the underlyings (..., n_assets) that make the one ``at`` (...)."""
        return np.repeat((at**self.exponent)[..., np.newaxis], self.n_assets, axis=-1)

    def power(self, aggregate: Aggregate, scales: tuple[float, ...] | None = None) -> tuple[float, float]:
        """Factor and exponent of an aggregate as a function of the level; the factor may be below 0."""
        ones = np.ones(self.n_assets) if scales is None else 1.0 / np.array(scales)
        degree = sum(aggregate.weights) if aggregate.kind is AggregateKind.GEOMETRIC else 1.0
        return float(aggregate(ones)), degree * self.exponent

    def place_of(self, level: float, aggregate: Aggregate, scales: tuple[float, ...] | None = None) -> float:
        """At which level the aggregate is at ``level``; 0 where it is always above."""
        factor, exponent = self.power(aggregate, scales)
        return (level / factor) ** (1.0 / exponent) if level > 0.0 else 0.0


def one_level(terms: ContractTerms) -> OneLevel | None:
    """The level, or None where the contract looks at more than one, or at none that is lognormal."""
    since = setting_place(terms)
    aggregates = [replace(aggregate, cash=None) for aggregate in _aggregates(terms)]
    n = len(terms.contract.underlyings)
    if since is None or not terms.dates or not aggregates:
        return None
    if n > 1:
        first = aggregates[0]
        if first.kind is not AggregateKind.GEOMETRIC or any(other != first for other in aggregates):
            return None
        weights, exponent = np.array(first.weights), 1.0 / sum(first.weights)
    else:
        weights, exponent = np.ones(1), 1.0
    known = terms.as_of.references
    floors = terms.floors[since + 1 :]
    if np.any(terms.floors > 0.0) and (n > 1 or since >= 0 or terms.contract.conversion is Conversion.COMPOSITE):
        return None
    variances, forwards = [], []
    for k in range(since + 1, len(terms.dates)):
        change = terms.covariances[since + 1 : k + 1].sum(axis=0)
        ratio = terms.forwards[k] / (terms.forwards[since] if since >= 0 else known)
        variance = float(weights @ change @ weights)
        mean = float(weights @ (np.log(ratio) - 0.5 * np.diag(change)))
        variances.append(variance)
        forwards.append(math.exp(mean + 0.5 * variance))
    if not np.all(np.diff(variances, prepend=0.0) > 1e-14):
        return None
    return OneLevel(
        first=since + 1,
        forwards=np.array(forwards),
        floors=floors[:, 0] / known if known is not None and n == 1 else np.zeros(len(forwards)),
        variances=np.array(variances),
        exponent=exponent,
        n_assets=n,
    )


def _aggregates(terms: ContractTerms) -> Iterable[Aggregate]:
    statistic: Any = terms.contract.statistic
    found = getattr(statistic, "aggregate", None)
    if isinstance(found, Aggregate):
        yield found
    for feature, _ in live_features(terms):
        trigger = feature.trigger if isinstance(feature, Autocall | Barrier | Coupons) else None
        if trigger is not None:
            yield trigger.aggregate
