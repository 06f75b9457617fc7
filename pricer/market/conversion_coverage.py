"""Whether a trade that pays in another currency than its underlyings' says how, and the market knows the rates."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from pricer.contracts.book import Trade
from pricer.core.issues import Issue
from pricer.market.findings import Locate, error, markets_reason, warning
from pricer.market.fx import currencies_of
from pricer.market.market import Market
from pricer.market.trade_names import cell_of, names_of


def conversion_coverage(trade: Trade, market: Market, place: Locate) -> Iterator[Issue]:
    """Issues of the trade's ``conversion``; silent about underlyings and currencies that the market does not know."""
    contract = trade.contract
    if (trade.currency, "") not in market.curves:
        return
    names = names_of(trade)
    known = [market.underlyings[name] for name in names if name in market.underlyings]
    foreign = [underlying for underlying in known if underlying.currency != trade.currency]
    if contract.conversion is None:
        for underlying in foreign:
            yield error(
                cell_of(underlying.underlying_id, place),
                "other-currency",
                f'underlying "{underlying.underlying_id}", quoted in {underlying.currency}, in a trade in '
                f"{trade.currency}",
                "underlyings quoted in the trade's currency, or a conversion",
                f"Correct the trade's currency if it is {underlying.currency}, or set its conversion to quanto or "
                "composite.",
            )
        return
    if not foreign and len(known) == len(names):
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
    conversion = f"a {trade.contract.conversion} trade from {currency} to {trade.currency}"
    try:
        market.fx.rate(currency, trade.currency)
    except LookupError:
        yield error(
            here,
            "no-fx-rate",
            f"{conversion}, which no quoted pairs link",
            f"the rate of {pair}, or a chain of pairs",
            _refused(pair, market, "")
            or f"Add {pair} to the tables fx, fx_volatilities and correlations of the market.",
        )
        return
    try:
        factors = market.fx.log_factors(currency, trade.currency)
    except LookupError:
        quoted = "".join(_as_quoted(currency, trade.currency, market))
        yield error(
            here,
            "no-fx-volatility",
            f"{conversion}, whose rate has no volatility",
            f"volatilities of {quoted}, or of a chain of pairs",
            _refused(quoted, market, "fx_volatilities:")
            or f"Add {quoted} to the table fx_volatilities of the market"
            + (
                "."
                if _is_correlated(quoted, market)
                else ", and a row and a column of that name to the table correlations."
            ),
        )
        return
    yield from _volatilities_reach(trade, market, list(factors), place)
    missing = [name for name in factors if not _is_correlated(name, market)]
    for name in missing:
        yield error(
            here,
            "no-fx-correlation",
            f"{conversion}, and no correlations of {name}",
            "the exchange rate's correlations with the trade's underlyings",
            f'Add a row and a column "{name}" to the correlations table of the market.',
        )


def _volatilities_reach(trade: Trade, market: Market, factors: Sequence[str], place: Locate) -> Iterator[Issue]:
    expiry = trade.contract.expiry_date
    for name in factors:
        last = market.fx.volatilities[currencies_of(name)].last_date
        if expiry > last:
            yield warning(
                place("expiry_date"),
                "beyond-volatility",
                f"expiry date {expiry}, after {last}, the last volatility date of the rate {name}",
                "volatilities that reach the expiry date",
                "The last volatility is used beyond its date; add a later expiry to the table fx_volatilities.",
            )


def _as_quoted(first: str, second: str, market: Market) -> tuple[str, str]:
    """The pair the way round in which the market has its rate, if it has."""
    return (second, first) if (second, first) in market.fx.quotes else (first, second)


def _is_correlated(pair: str, market: Market) -> bool:
    held = market.correlation
    return held is not None and (pair in held or pair[3:] + pair[:3] in held)


def _refused(pair: str, market: Market, kind: str) -> str:
    """Why the market could not use what it was given of the pair, either way round."""
    return markets_reason(market.rejected.get(f"{kind}{pair}", market.rejected.get(f"{kind}{pair[3:]}{pair[:3]}", ())))
