"""A book as tables: the way back from trades to rows."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import date

from pricer.contracts.aggregate import AggregateKind
from pricer.contracts.book import Book, Trade
from pricer.contracts.profile import ProfileKind
from pricer.loader.book_rows import CASH_DIGITALS, EUROPEAN_OPTION, LONG, PERFORMANCE, PRICE, SHORT, WEIGHTED
from pricer.loader.faults import number_in_words
from pricer.market.calendars import advance, currency_calendar

#: Longer lags are not settlement.
LONGEST_LAG = 60


def book_tables(book: Book) -> dict[str, list[dict[str, object]]]:
    """The tables trades and constituents of a book's trades; refusals have no rows to write.

    Raises ValueError for a payment date that no settlement lag of the currency's calendar gives.
    """
    return {
        "trades": [_trade_row(trade) for trade in book.trades],
        "constituents": [row for trade in book.trades for row in _constituents(trade)],
    }


def _trade_row(trade: Trade) -> dict[str, object]:
    contract, profile, aggregate = trade.contract, trade.contract.profile, trade.contract.aggregate
    kth_best = aggregate.kind is AggregateKind.KTH_BEST
    rank_weighted = aggregate.kind is AggregateKind.RANK_WEIGHTED
    return {
        "trade_id": trade.trade_id,
        "product": EUROPEAN_OPTION,
        "direction": LONG if trade.position > 0.0 else SHORT,
        "underlying_level": PERFORMANCE if contract.on_performance else PRICE,
        "quantity": None if contract.on_performance else abs(trade.position),
        "notional": abs(trade.position) if contract.on_performance else None,
        "aggregate": str(aggregate.kind),
        "rank": aggregate.weights.index(1.0) + 1 if kth_best else None,
        "rank_weights": "; ".join(map(number_in_words, aggregate.weights)) if rank_weighted else None,
        "profile": str(profile.kind),
        "strike": None if profile.kind is ProfileKind.EXCHANGE else profile.strike,
        "cash_amount": profile.cash_amount if profile.kind in CASH_DIGITALS else None,
        "cash_level": aggregate.cash,
        "floor": profile.floor,
        "cap": profile.cap,
        "expiry_date": contract.expiry_date,
        "settlement_lag_days": _lag(trade.currency, contract.expiry_date, contract.payment_date),
        "settlement_calendar": None,
        "currency": trade.currency,
        "conversion": None if contract.conversion is None else str(contract.conversion),
        "trade_date": trade.trade_date,
        "premium": None if trade.premium is None else trade.premium.amount,
        "premium_date": None if trade.premium is None else trade.premium.payment_date,
        "counterparty": trade.counterparty,
        "netting_set": trade.netting_set,
        "strategy": trade.strategy,
        "collateral": trade.collateral,
        "model": None if trade.model is None else str(trade.model),
    }


def _constituents(trade: Trade) -> Iterator[dict[str, object]]:
    contract = trade.contract
    weighted = contract.aggregate.kind in WEIGHTED
    legs = zip(contract.underlyings, contract.aggregate.weights, contract.reference_levels, strict=True)
    for underlying, weight, level in legs:
        yield {
            "trade_id": trade.trade_id,
            "underlying": underlying,
            "weight": weight if weighted else None,
            "initial_fixing": level if contract.on_performance else None,
        }


def _lag(currency: str, expiry: date, payment: date) -> int:
    """The number of business days after which ``payment`` follows ``expiry``."""
    calendar = currency_calendar(currency)
    for lag in range(LONGEST_LAG + 1):
        day = advance(calendar, expiry, lag)
        if day == payment:
            return lag
        if day > payment:
            break
    raise ValueError(f"no settlement lag on calendar {calendar} leads from {expiry} to {payment}")
