"""Which trades can be priced on this market; the others are refused with every reason."""

from __future__ import annotations

from dataclasses import replace
from functools import partial

import numpy as np

from pricer.contracts.book import Book, Refusal, Trade
from pricer.core.issues import Issue, Severity
from pricer.core.source import Place
from pricer.market.coverage import coverage
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
