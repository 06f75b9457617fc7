"""Which trades can be priced on this market; the others are refused with every reason."""

from __future__ import annotations

from dataclasses import replace
from functools import partial

from pricer.contracts.book import Book, Refusal, Trade
from pricer.core.issues import Issue, Severity
from pricer.core.source import Place
from pricer.market.coverage import coverage
from pricer.market.market import Market


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
        found.extend(issues)
        errors = tuple(issue for issue in issues if issue.severity is not Severity.WARNING)
        if errors:
            refused.append(refusal(trade, errors))
        else:
            kept.append(trade)
    return replace(
        book,
        trades=tuple(kept),
        refusals=(*book.refusals, *refused),
        issues=(*book.issues, *market.issues, *found),
    )


def refusal(trade: Trade, issues: tuple[Issue, ...]) -> Refusal:
    """The trade as it is listed when it cannot be priced."""
    return Refusal(trade.trade_id, issues, trade.contract.product, trade.currency, trade.counterparty, trade.strategy)


def _place(book: Book, trade: Trade, column: str) -> Place | None:
    return book.places.get((trade.trade_id, column))
