"""Whether a trade's amounts have the size of the market's: pence are not pounds, and shares may have been split."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from pricer.contracts.book import Trade
from pricer.contracts.option import Conversion
from pricer.core.issues import Issue
from pricer.market.findings import Locate, warning
from pricer.market.market import Market

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
        try:
            spot = market.spot_in(name, trade.currency, contract.conversion)
        except LookupError:  # what is missing is told elsewhere
            continue
        if _differ(fixing, spot):
            yield warning(
                place(f"initial_fixing:{name}") or place(f"underlying:{name}"),
                "fixing-far-from-spot",
                f'initial fixing {fixing:g} of underlying "{name}", whose spot is {spot:g}',
                f"a fixing within a factor of {PLAUSIBLE_FACTOR:g} of the spot",
                "Pence against pounds, or a split? Check both; they are used as given.",
            )


def _strike(trade: Trade, market: Market, place: Locate) -> Iterator[Issue]:
    contract, strike = trade.contract, trade.contract.profile.strike
    # A spread's level may be small beside its strike by nature, and so may any level with negative weights.
    if strike == 0.0 or min(contract.aggregate.weights) < 0.0:
        return
    try:
        forwards = np.array([_forward(name, trade, market) for name in contract.underlyings])
    except (LookupError, ValueError):  # what is missing, and an expiry in the past, are told elsewhere
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


def _forward(name: str, trade: Trade, market: Market) -> float:
    expiry = trade.contract.expiry_date
    forward = market.forward(name, expiry)
    if trade.contract.conversion is Conversion.COMPOSITE:
        forward *= market.fx_forward(market.underlyings[name].currency, trade.currency, expiry)
    return forward


def _differ(a: float, b: float) -> bool:
    return max(a, b) > PLAUSIBLE_FACTOR * min(a, b)
