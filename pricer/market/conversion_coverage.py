"""Whether a trade that pays in another currency than its underlyings' says how, and the market knows the rates."""

from __future__ import annotations

from collections.abc import Iterator

from pricer.contracts.book import Trade
from pricer.core.issues import Issue
from pricer.market.findings import Locate, error, warning
from pricer.market.market import Market


def conversion_coverage(trade: Trade, market: Market, place: Locate) -> Iterator[Issue]:
    """Issues of the trade's ``conversion``; silent about underlyings and currencies that the market does not know."""
    contract = trade.contract
    if (trade.currency, "") not in market.curves:
        return
    known = [market.underlyings[name] for name in dict.fromkeys(contract.underlyings) if name in market.underlyings]
    foreign = [underlying for underlying in known if underlying.currency != trade.currency]
    if contract.conversion is None:
        for underlying in foreign:
            yield error(
                place(f"underlying:{underlying.underlying_id}"),
                "other-currency",
                f'underlying "{underlying.underlying_id}", quoted in {underlying.currency}, in a trade in '
                f"{trade.currency}",
                "underlyings quoted in the trade's currency, or a conversion",
                f"Correct the trade's currency if it is {underlying.currency}, or set its conversion to quanto or "
                "composite.",
            )
        return
    if not foreign and len(known) == len(set(contract.underlyings)):
        yield warning(
            place("conversion"),
            "idle-conversion",
            f"conversion {contract.conversion}, though every underlying is quoted in {trade.currency}",
            "a conversion where currencies differ",
            "It changes nothing. Clear the cell, or correct the trade's currency.",
        )
    for currency in dict.fromkeys(underlying.currency for underlying in foreign):
        yield from _rate(trade, market, currency, place)


def _rate(trade: Trade, market: Market, currency: str, place: Locate) -> Iterator[Issue]:
    """What a conversion needs of one exchange rate: its curves, volatility and correlations."""
    pair = currency + trade.currency
    here = place("conversion") or place("currency")
    if (currency, "") not in market.curves:
        yield error(
            here,
            "no-standard-curve",
            f"currency {currency} of an underlying, which has no standard discount curve",
            f"a curve of {currency} with empty collateral, from which forwards come",
            f"Add a curve of {currency} with empty collateral to the curves table.",
        )
        return
    try:
        market.fx.rate(currency, trade.currency)
        factors = market.fx.log_factors(currency, trade.currency)
    except (LookupError, ValueError):
        yield error(
            here,
            "no-fx-volatility",
            f"a {trade.contract.conversion} trade from {currency} to {trade.currency}, whose rate has no volatility",
            f"the rate of {pair} and its volatility, or a chain of pairs that have both",
            f"Add {pair} to the tables fx, fx_volatilities and correlations of the market.",
        )
        return
    held = market.correlation
    missing = [name for name in factors if held is None or (name not in held and name[3:] + name[:3] not in held)]
    for name in missing:
        yield error(
            here,
            "no-fx-correlation",
            f"a {trade.contract.conversion} trade from {currency} to {trade.currency}, and no correlations of {name}",
            "the exchange rate's correlations with the trade's underlyings",
            f'Add a row and a column "{name}" to the correlations table of the market.',
        )
