"""Whether a trade's amounts have the size of the market's: pence are not pounds, and shares may have been split."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from pricer.contracts.book import Trade
from pricer.contracts.life_cycle import AsOf
from pricer.contracts.option import Conversion, EuropeanOption
from pricer.core.issues import Issue
from pricer.market.findings import Locate, warning
from pricer.market.market import Market

#: Amounts that differ from the market's by more than this factor are reported.
PLAUSIBLE_FACTOR = 5.0
PENCE = "Pence against pounds, or a split?"


def size_coverage(trade: Trade, state: AsOf | None, market: Market, place: Locate) -> Iterator[Issue]:
    """Warnings about initial fixings far from spot, or of a price option's strike far from its forward level.

    ``state`` is None for a European option still to expire. Levels of contracts: :mod:`pricer.market.level_coverage`.
    """
    contract = trade.contract
    if contract.on_performance:
        yield from _fixings(trade, state, market, place)
    elif isinstance(contract, EuropeanOption):
        yield from _strike(trade, contract, market, place)


def _fixings(trade: Trade, state: AsOf | None, market: Market, place: Locate) -> Iterator[Issue]:
    contract = trade.contract
    references = contract.reference_levels if isinstance(contract, EuropeanOption) else _references(state)
    for name, fixing in zip(contract.underlyings, references, strict=False):
        try:
            spot = market.spot_in(name, trade.currency, contract.conversion)
        except LookupError:  # what is missing is told elsewhere
            continue
        if differ(fixing, spot):
            yield warning(
                place(f"initial_fixing:{name}") or place(f"underlying:{name}"),
                "fixing-far-from-spot",
                f'initial fixing {fixing:g} of underlying "{name}", whose spot is {spot:g}',
                f"a fixing within a factor of {PLAUSIBLE_FACTOR:g} of the spot",
                f"{PENCE} Check both; they are used as given.",
            )


def _references(state: AsOf | None) -> tuple[float, ...]:
    """Those of a contract, as they stand; none while they are being set."""
    found = None if state is None else state.references
    return () if found is None else tuple(found.tolist())


def _strike(trade: Trade, contract: EuropeanOption, market: Market, place: Locate) -> Iterator[Issue]:
    strike = contract.profile.strike
    # A spread's level may be small beside its strike by nature, and so may any level with negative weights.
    if strike == 0.0 or min(contract.aggregate.weights) < 0.0:
        return
    try:
        forwards = np.array([_forward(name, trade, market) for name in contract.underlyings])
    except (LookupError, ValueError):  # what is missing is told elsewhere
        return
    level = float(contract.aggregate(forwards))
    if differ(strike, level):
        yield warning(
            place("strike") or place("trade_id"),
            "strike-far-from-forward",
            f"strike {strike:g}, where the aggregate of the forwards is {level:g}",
            f"a strike within a factor of {PLAUSIBLE_FACTOR:g} of the aggregate at forwards",
            f"{PENCE} Check the strike, the weights and the spots; they are used as given.",
        )


def _forward(name: str, trade: Trade, market: Market) -> float:
    expiry = trade.contract.expiry_date
    forward = market.forward(name, expiry)
    if trade.contract.conversion is Conversion.COMPOSITE:
        forward *= market.fx_forward(market.underlyings[name].currency, trade.currency, expiry)
    return forward


def differ(a: float, b: float) -> bool:
    """Whether one is more than the plausible factor times the other."""
    return max(a, b) > PLAUSIBLE_FACTOR * min(a, b)
