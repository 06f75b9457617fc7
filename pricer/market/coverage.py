"""Whether a market holds what a trade needs."""

from __future__ import annotations

from collections.abc import Iterator

from pricer.contracts.book import Trade
from pricer.contracts.life_cycle import AsOf
from pricer.contracts.option import EuropeanOption
from pricer.core.issues import Issue, Severity
from pricer.core.source import Place
from pricer.market.conversion_coverage import conversion_coverage
from pricer.market.correlation_coverage import correlation_coverage
from pricer.market.date_coverage import date_coverage, known_date_coverage
from pricer.market.dividend_quality import EXCEEDED
from pricer.market.doubt_coverage import doubted_fixings, doubts, refused_rates
from pricer.market.findings import Locate, did_you_mean, error, markets_reason, warning, words
from pricer.market.level_coverage import level_coverage
from pricer.market.market import Market, MissingMarketDataError
from pricer.market.past_coverage import has_ended, past_coverage
from pricer.market.size_coverage import size_coverage
from pricer.market.standing import standing
from pricer.market.trade_names import cell_of, names_of
from pricer.market.underlying import Underlying
from pricer.market.writer_coverage import writer_coverage


def coverage(
    trade: Trade, market: Market, place: Locate, *, accept_failing_surfaces: bool = False
) -> tuple[Issue, ...]:
    """Everything that keeps ``trade`` from being priced on ``market`` (errors), or qualifies its price (warnings).

    Surfaces that fail their checks are errors unless accepted; then they are warnings. Only what is still to come
    matters: a trade of which known amounts are left, if anything, needs nothing but their currency and curve.

    ``place`` gives the cell from which a column of the trade was read ("trade_id", "currency",
    "collateral", "strike", "expiry_date", "payment_date", "trade_date", "premium_date", and
    "underlying:ID" and "initial_fixing:ID" for a constituent; "schedule:PURPOSE:DATE", "schedule:PURPOSE", "schedule",
    "barrier", "call", "coupon", "exercise", "writer" and "assets" for the first row of each), or None.
    Every issue carries the trade's id.
    """
    state = _state(trade, market)
    if state is not None and has_ended(state):
        issues = _ended(trade, state, market, place)
    else:
        issues = _live(trade, state, market, place, accept_failing_surfaces=accept_failing_surfaces)
    return tuple(issue.for_trade(trade.trade_id) for issue in issues)


def _state(trade: Trade, market: Market) -> AsOf | None:
    """Where the trade stands; None for a European option still to expire, which has no past, or paid before that."""
    contract = trade.contract
    has_no_past = contract.expiry_date > market.valuation_date or contract.payment_date < contract.expiry_date
    return None if isinstance(contract, EuropeanOption) and has_no_past else standing(trade, market)


def _ended(trade: Trade, state: AsOf, market: Market, place: Locate) -> list[Issue]:
    return [
        *_currencies(trade, market, place),
        *past_coverage(trade, state, market, place),
        *known_date_coverage(trade, state, market, place),
        *writer_coverage(trade, market, place),
        *refused_rates(trade, market, place),
        *doubted_fixings(trade, market, place),
    ]


def _live(
    trade: Trade, state: AsOf | None, market: Market, place: Locate, *, accept_failing_surfaces: bool
) -> list[Issue]:
    past = () if state is None else past_coverage(trade, state, market, place)
    if trade.contract.expiry_date < market.valuation_date:  # and a fixing is missing
        return [
            *_currencies(trade, market, place),
            *_underlyings(trade, market, place, to_come=False),
            *past,
            *date_coverage(trade, state, market, place),
            *refused_rates(trade, market, place),
        ]
    issues = [
        *_currencies(trade, market, place),
        *_underlyings(trade, market, place, to_come=True),
        *_surfaces(trade, market, place, accepted=accept_failing_surfaces),
        *conversion_coverage(trade, market, place),
        *correlation_coverage(trade, market, place),
        *writer_coverage(trade, market, place),
        *past,
        *date_coverage(trade, state, market, place),
        *size_coverage(trade, state, market, place),
        *level_coverage(trade, state, market, place),
        *refused_rates(trade, market, place),
    ]
    if all(issue.severity is Severity.WARNING for issue in issues):  # it will be priced
        issues.extend(doubts(trade, market, place))
    return issues


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


def _underlyings(trade: Trade, market: Market, place: Locate, *, to_come: bool) -> Iterator[Issue]:
    """Names that the market does not know; of those whose prices ``to_come`` matter, what they lack."""
    for name in names_of(trade):
        here = cell_of(name, place)
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
        elif to_come:
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
    return tuple(name for name in names_of(trade) if name in market.surfaces and not market.surfaces[name].passes)


def _surfaces(trade: Trade, market: Market, place: Locate, *, accepted: bool) -> Iterator[Issue]:
    for name in failing_surfaces(trade, market):
        found = f'underlying "{name}", whose volatility surface fails: {market.surfaces[name].failures[0]}'
        expected = "a volatility surface that passes its checks"
        here = cell_of(name, place)
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
