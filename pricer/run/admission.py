"""Which trades can be priced on this market; the others are refused with every reason."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import replace
from functools import partial

import numpy as np

from pricer.contracts.book import Book, Refusal, Trade
from pricer.contracts.contract import Contract
from pricer.core.issues import Issue, Severity
from pricer.core.source import Place
from pricer.market.coverage import coverage
from pricer.market.findings import error
from pricer.market.market import Market
from pricer.market.netting_coverage import netting_coverage


def admit(book: Book, market: Market, *, accept_failing_surfaces: bool = False) -> Book:
    """The book as this market can price it: uncovered trades become refusals.

    Those on volatility surfaces that fail their checks are refused unless these are accepted.

    Issues of the book and of the market stay; those found here are added.
    """
    kept: list[Trade] = []
    refused: list[Refusal] = []
    found: list[Issue] = []
    for trade in book.trades:
        place = partial(_place, book, trade)
        issues = coverage(trade, market, place, accept_failing_surfaces=accept_failing_surfaces)
        if all(issue.severity is Severity.WARNING for issue in issues):
            issues = (*issues, *_not_covered(trade, market, place))
        found.extend(issues)
        errors = tuple(issue for issue in issues if issue.severity is not Severity.WARNING)
        if errors:
            refused.append(refusal(trade, market, errors))
        else:
            kept.append(trade)
    found.extend(netting_coverage(book.trades, market, partial(_place, book)))
    return replace(
        book,
        trades=tuple(kept),
        refusals=(*book.refusals, *refused),
        issues=(*book.issues, *market.issues, *found),
    )


def _not_covered(trade: Trade, market: Market, place: Callable[[str], Place | None]) -> Iterator[Issue]:
    if not isinstance(trade.contract, Contract):
        return
    from pricer.engines.contract_value import why_not  # loads the engines: only where a contract asks for them

    try:
        found = why_not(trade, market)
    except (ArithmeticError, ValueError, LookupError):
        return  # the engine will meet it, and say so
    if found is not None:
        table, reason = found
        yield not_covered(trade, reason, place(table) or place("trade_id"))


def not_covered(trade: Trade, reason: str, place: Place | None = None) -> Issue:
    """What is said of a trade that no engine covers."""
    return error(
        place,
        "not-covered",
        f"a contract that this version does not price: {reason}",
        "a contract that one of the engines covers",
        "Value it outside this book, by the desk's authorised practice; the README lists what is covered.",
    ).for_trade(trade.trade_id)


def refusal(trade: Trade, market: Market, issues: tuple[Issue, ...]) -> Refusal:
    """The trade as it is listed when it cannot be priced."""
    return Refusal(
        trade_id=trade.trade_id,
        issues=issues,
        product=trade.contract.product,
        currency=trade.currency,
        counterparty=trade.counterparty,
        strategy=trade.strategy,
        netting_set=trade.netting_set,
        expiry_date=trade.contract.expiry_date,
        notional=_notional(trade, market),
    )


def _notional(trade: Trade, market: Market) -> float | None:
    """In the trade's currency; None where it takes a price or a rate that the market lacks."""
    option = trade.contract
    try:
        spots = [market.spot_in(name, trade.currency, option.conversion) for name in option.underlyings]
    except LookupError:
        if not option.has_fixed_notional:
            return None
        spots = [1.0] * len(option.underlyings)
    return abs(trade.position) * option.unit_notional(np.array(spots))


def _place(book: Book, trade: Trade, column: str) -> Place | None:
    return book.places.get((trade.trade_id, column))
