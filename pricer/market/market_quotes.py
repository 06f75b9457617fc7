"""What the market quoted, as it was given: a report shows how well curves reprice it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import date

from pricer.market.correlation_estimate import CorrelationEstimate


@dataclass(frozen=True, slots=True)
class SpreadQuotes:
    """Running spreads of a name's credit default swaps by tenor, 0.0125 for 125 basis points.

    ``currency`` is that whose standard curve discounted them.
    """

    name: str
    currency: str
    recovery: float
    tenors: tuple[str, ...]
    spreads: tuple[float, ...]


@dataclass(frozen=True, slots=True, eq=False)
class MarketQuotes:
    """``credit`` by name; ``correlation`` is the estimate, where correlations come from a price history.
    ``last_levels`` : day and last level of each underlying and currency pair in the price history, whether or not
    correlations come from it.

    Quoted rates stand in their curves, quoted volatilities in their surfaces.
    """

    credit: Mapping[str, SpreadQuotes] = field(default_factory=dict)
    correlation: CorrelationEstimate | None = None
    last_levels: Mapping[str, tuple[date, float]] = field(default_factory=dict)
