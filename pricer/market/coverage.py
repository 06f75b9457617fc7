"""Whether a market holds what a trade needs."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import combinations

from pricer.contracts.book import Trade
from pricer.core.issues import Issue, Severity
from pricer.core.source import Place
from pricer.market.conversion_coverage import conversion_coverage
from pricer.market.date_coverage import date_coverage
from pricer.market.dividend_quality import EXCEEDED
from pricer.market.doubt_coverage import doubts, refused_rates
from pricer.market.findings import Locate, did_you_mean, error, markets_reason, warning, words
from pricer.market.market import CORRELATIONS, Market, MissingMarketDataError
from pricer.market.size_coverage import size_coverage
from pricer.market.underlying import Underlying


def coverage(
    trade: Trade, market: Market, place: Locate, *, accept_failing_surfaces: bool = False
) -> tuple[Issue, ...]:
    """Everything that keeps ``trade`` from being priced on ``market`` (errors), or qualifies its price (warnings).

    Surfaces that fail their checks are errors unless accepted; then they are warnings.

    ``place`` gives the cell from which a column of the trade was read ("trade_id", "currency",
    "collateral", "strike", "expiry_date", "payment_date", "trade_date", "premium_date", and
    "underlying:ID" and "initial_fixing:ID" for a constituent), or None. Every issue carries the trade's id.
    """
    issues = [
        *_currencies(trade, market, place),
        *_underlyings(trade, market, place),
        *_surfaces(trade, market, place, accepted=accept_failing_surfaces),
        *conversion_coverage(trade, market, place),
        *_correlations(trade, market, place),
        *_unknown_pairs(trade, market, place),
        *date_coverage(trade, market, place),
        *size_coverage(trade, market, place),
        *refused_rates(trade, market, place),
    ]
    if all(issue.severity is Severity.WARNING for issue in issues):  # it will be priced
        issues.extend(doubts(trade, market, place))
    return tuple(issue.for_trade(trade.trade_id) for issue in issues)


def _currencies(trade: Trade, market: Market, place: Locate) -> Iterator[Issue]:
    currency, collateral, reporting = trade.currency, trade.collateral, market.reporting_currency
    if currency not in _known_currencies(market):
        known = sorted(_known_currencies(market))
        yield error(
            place("currency"),
            "unknown-currency",
            f'currency "{currency}"',
            f"a currency of the market: {words(known, 'or')}",
            _refused_pair(market, currency, other=False)
            or f"{did_you_mean(currency, known)}Correct the currency, or add its curve to the curves table and its "
            "rate to the fx table of the market.",
        )
        return  # what else is missing follows from this
    if not _converts(market, currency):
        yield error(
            place("currency"),
            "no-fx-route",
            f"currency {currency}, which no quoted pairs link to the reporting currency {reporting}",
            f"a chain of exchange rates from {currency} to {reporting}",
            _refused_pair(market, currency, other=True)
            or f"Add the pair {reporting}{currency} or {currency}{reporting} to the fx table of the market.",
        )
    if (currency, "") not in market.curves:
        yield error(
            place("currency"),
            "no-standard-curve",
            f"currency {currency}, which has no standard discount curve",
            f"a curve of {currency} with empty collateral, from which discount factors and forwards come",
            _refused_curve(market) or f"Add a curve of {currency} with empty collateral to the curves table.",
        )
    if collateral and (currency, collateral) not in market.curves:
        known = sorted(other for owner, other in market.curves if owner == currency and other)
        instead = f"use a collateral that has one ({words(known, 'or')})" if known else "clear the cell"
        yield error(
            place("collateral"),
            "no-collateral-curve",
            f'collateral "{collateral}", for which {currency} has no discount curve',
            f"a collateral with a discount curve in {currency}, or none for the standard curve",
            _refused_curve(market)
            or f'Add a curve of {currency} with collateral "{collateral}" to the curves table, or {instead}.',
        )


def _underlyings(trade: Trade, market: Market, place: Locate) -> Iterator[Issue]:
    for name in dict.fromkeys(trade.contract.underlyings):
        here = place(f"underlying:{name}")
        why = markets_reason(market.rejected.get(name, ()))
        underlying = market.underlyings.get(name)
        if underlying is None and why:
            yield error(
                here,
                "rejected-underlying",
                f'underlying "{name}", which the market lists but could not use',
                "an underlying with usable market data",
                why,
            )
        elif underlying is None:
            yield error(
                here,
                "unknown-underlying",
                f'underlying "{name}"',
                "an underlying of the market",
                f"{did_you_mean(name, market.underlyings)}Correct the name, or add it to the underlyings table of the "
                "market.",
            )
        else:
            if not market.has_volatility(name):
                yield error(
                    here,
                    "no-volatility",
                    f'underlying "{name}", which has no usable volatility',
                    "an underlying with at least one volatility",
                    why or f'Add "{name}" to the volatilities table of the market.',
                )
            yield from _price(underlying, market, here)


def failing_surfaces(trade: Trade, market: Market) -> tuple[str, ...]:
    """The trade's underlyings whose volatility surfaces fail their checks."""
    names = dict.fromkeys(trade.contract.underlyings)
    return tuple(name for name in names if name in market.surfaces and not market.surfaces[name].passes)


def _surfaces(trade: Trade, market: Market, place: Locate, *, accepted: bool) -> Iterator[Issue]:
    for name in failing_surfaces(trade, market):
        found = f'underlying "{name}", whose volatility surface fails: {market.surfaces[name].failures[0]}'
        expected = "a volatility surface that passes its checks"
        here = place(f"underlying:{name}")
        if accepted:
            mend = "Priced from it all the same, as asked, and marked; correct the quotes in the volatilities table."
            yield warning(here, "failing-surface", found, expected, mend)
        else:
            mend = (
                "Correct the quotes in the volatilities table, or accept failing surfaces for this run "
                "(--accept-failing-surfaces): the trade is then priced and marked."
            )
            yield error(here, "failing-surface", found, expected, mend)


def _price(underlying: Underlying, market: Market, here: Place | None) -> Iterator[Issue]:
    """Cash dividends that leave the price, or what is random of it, without a law."""
    name = underlying.underlying_id
    try:
        price = market.affine_price(name)
    except MissingMarketDataError:
        return  # the missing curve is told with the currency
    except ValueError as refused:
        yield error(here, "cash-dividends-exceed-spot", str(refused), *EXCEEDED)
        return
    if underlying.volatility is None:
        return
    try:
        price.pure_volatility(underlying.volatility)
    except ValueError as refused:
        yield error(
            here,
            "volatility-against-dividends",
            f'volatilities of underlying "{name}" that its cash dividends do not allow: {refused}',
            "volatilities that leave the price above its cash dividends a law",
            "Correct the volatilities around the ex dates, or enter dividends far ahead as proportional ones.",
        )


def _correlations(trade: Trade, market: Market, place: Locate) -> Iterator[Issue]:
    names = [name for name in dict.fromkeys(trade.contract.underlyings) if name in market.underlyings]
    if len(names) < 2:
        return
    if market.correlation is None:
        yield error(
            place("trade_id"),
            "no-correlations",
            "no usable correlation matrix",
            f"correlations among {words(names)}",
            markets_reason(market.rejected.get(CORRELATIONS, ()))
            or "Add the correlations of the trade's underlyings to the correlations table of the market.",
        )
        return
    told: set[str] = set()  # a pair is told once, at the first of the two
    for name in names:
        if name in market.correlation:
            continue
        told.add(name)
        others = [other for other in names if other not in told]
        if others:
            yield error(
                place(f"underlying:{name}"),
                "missing-correlation",
                f'no correlation of underlying "{name}" with {words(others)}',
                "a correlation for every pair of the trade's underlyings",
                markets_reason(market.rejected.get(f"{CORRELATIONS}:{name}", ()))
                or f'Add a row and a column "{name}" to the correlations table of the market.',
            )


def _unknown_pairs(trade: Trade, market: Market, place: Locate) -> Iterator[Issue]:
    """Pairs of the trade's underlyings and exchange rates whose cells in the matrix gave no number."""
    ids = {name: f"underlying:{name}" for name in trade.contract.underlyings if name in market.underlyings}
    if trade.contract.conversion is not None:
        currencies = dict.fromkeys(market.underlyings[name].currency for name in ids)
        for currency in (other for other in currencies if other != trade.currency):
            try:
                factors = market.fx.log_factors(currency, trade.currency)
            except (LookupError, ValueError):
                continue  # told with the conversion
            ids |= {name: "conversion" for pair in factors for name in (pair, pair[3:] + pair[:3])}
    for first, second in combinations(ids, 2):
        why = market.why_unknown(first, second)
        if why:
            yield error(
                place(ids[first]) or place("currency"),
                "missing-correlation",
                f"no correlation of {first} with {second}",
                "a correlation for every pair that the trade depends on",
                markets_reason(why),
            )


def _known_currencies(market: Market) -> set[str]:
    return {market.reporting_currency, *market.fx.currencies, *(currency for currency, _ in market.curves)}


def _converts(market: Market, currency: str) -> bool:
    try:
        market.to_reporting(currency)
    except LookupError:
        return False
    return True


def _refused_curve(market: Market) -> str:
    """The reason of a curve that was given but refused: it may be the one that is missing."""
    for name, issues in market.rejected.items():
        if any((issue.sheet or "").casefold().startswith("curve") for issue in issues):
            return f'Curve "{name}" could not be used. {markets_reason(issues)}'
    return ""


def _refused_pair(market: Market, currency: str, *, other: bool) -> str:
    """The reason of an exchange rate that was given but refused: one of the currency, else any ``other``."""
    refused = {
        name: issues
        for name, issues in market.rejected.items()
        if any((issue.sheet or "").casefold() == "fx" for issue in issues)
    }
    own = [name for name in refused if currency in (name[:3], name[3:])]
    chosen = own or (list(refused) if other else [])
    return markets_reason(refused[chosen[0]]) if chosen else ""
