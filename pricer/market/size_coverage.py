"""Whether a trade's amounts have the size of the market's: pence are not pounds, and shares may have been split."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from pricer.contracts.book import Trade
from pricer.core.issues import Issue
from pricer.market.findings import Locate, warning
from pricer.market.market import Market, MissingMarketDataError

#: Amounts that differ from the market's by more than this factor are reported.
PLAUSIBLE_FACTOR = 5.0


def size_coverage(trade: Trade, market: Market, place: Locate) -> Iterator[Issue]:
    """Warnings about initial fixings far from spot, or of a price option's strike far from its forward level."""
    if trade.contract.on_performance:
        yield from _fixings(trade, market, place)
    else:
        yield from _strike(trade, market, place)


def _fixings(trade: Trade, market: Market, place: Locate) -> Iterator[Issue]:
    contract = trade.contract
    for name, fixing in zip(contract.underlyings, contract.reference_levels, strict=True):
        underlying = market.underlyings.get(name)
        if underlying is not None and _differ(fixing, underlying.spot):
            yield warning(
                place(f"initial_fixing:{name}") or place(f"underlying:{name}"),
                "fixing-far-from-spot",
                f'initial fixing {fixing:g} of underlying "{name}", whose spot is {underlying.spot:g}',
                f"a fixing within a factor of {PLAUSIBLE_FACTOR:g} of the spot",
                "Pence against pounds, or a split? Check both; they are used as given.",
            )


def _strike(trade: Trade, market: Market, place: Locate) -> Iterator[Issue]:
    contract, strike = trade.contract, trade.contract.profile.strike
    # A spread's level may be small beside its strike by nature, and so may any level with negative weights.
    if strike == 0.0 or min(contract.aggregate.weights) < 0.0:
        return
    try:
        forwards = np.array([market.forward(name, contract.expiry_date) for name in contract.underlyings])
    except (MissingMarketDataError, ValueError):  # what is missing, and an expiry in the past, are told elsewhere
        return
    level = float(contract.aggregate(forwards))
    if _differ(strike, level):
        yield warning(
            place("strike") or place("trade_id"),
            "strike-far-from-forward",
            f"strike {strike:g}, where the aggregate of the forwards is {level:g}",
            f"a strike within a factor of {PLAUSIBLE_FACTOR:g} of the aggregate at forwards",
            "Pence against pounds, or a split? Check the strike, the weights and the spots; they are used as given.",
        )


def _differ(a: float, b: float) -> bool:
    return max(a, b) > PLAUSIBLE_FACTOR * min(a, b)
