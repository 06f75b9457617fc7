"""A book as tables: the way back from trades to rows."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from datetime import date

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.book import Book, Trade
from pricer.contracts.contract import Contract
from pricer.contracts.option import EuropeanOption
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.realised_variance import RealisedVariance
from pricer.contracts.redemption import Redemption
from pricer.loader.contract_tables import (
    aggregate_of_contract,
    barrier_scales,
    feature_rows,
    redemption_cells,
    statistic_cells,
)
from pricer.loader.faults import number_in_words
from pricer.loader.trade_words import (
    CASH_DIGITALS,
    EUROPEAN_OPTION,
    LONG,
    NOTE,
    OPTION,
    PERFORMANCE,
    PRICE,
    SHORT,
    WEIGHTED,
)
from pricer.market.calendars import advance, currency_calendar

#: Longer lags are not settlement.
LONGEST_LAG = 60


def book_tables(book: Book) -> dict[str, list[dict[str, object]]]:
    """The tables of a book's trades; refusals have no rows to write, and tables without rows are left out.

    Raises ValueError for a payment date that no settlement lag of the currency's calendar gives, and
    for a contract that the tables cannot say (see :func:`pricer.loader.contract_tables.feature_rows`).
    """
    tables: dict[str, list[dict[str, object]]] = {
        "trades": [_trade_row(trade) for trade in book.trades],
        "constituents": [row for trade in book.trades for row in _constituents(trade)],
    }
    for trade in book.trades:
        if isinstance(trade.contract, Contract):
            for table, rows in feature_rows(trade.trade_id, trade.contract).items():
                tables.setdefault(table, []).extend(rows)
    return tables


def _trade_row(trade: Trade) -> dict[str, object]:
    contract, aggregate = trade.contract, _aggregate(trade)
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
        "cash_level": aggregate.cash,
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
        **(_profile_cells(contract.profile) if isinstance(contract, EuropeanOption) else _path_cells(contract)),
    }


def _aggregate(trade: Trade) -> Aggregate:
    contract = trade.contract
    return contract.aggregate if isinstance(contract, EuropeanOption) else aggregate_of_contract(contract)


def _profile_cells(profile: Profile) -> dict[str, object]:
    return {
        "profile": str(profile.kind),
        "strike": None if profile.kind is ProfileKind.EXCHANGE else profile.strike,
        "cash_amount": profile.cash_amount if profile.kind in CASH_DIGITALS else None,
        "floor": profile.floor,
        "cap": profile.cap,
    }


def _path_cells(contract: Contract) -> dict[str, object]:
    """The product and what it pays on; raises ValueError for a payout that is neither profile nor redemption."""
    statistic, payout = statistic_cells(contract), contract.payout
    if isinstance(payout, Redemption):
        return {"product": NOTE, **statistic, **redemption_cells(payout)}
    if isinstance(payout, Profile):
        return {"product": OPTION, **statistic, **_profile_cells(payout)}
    raise ValueError(f"no row of the table trades says the payout {type(payout).__name__}")


def _constituents(trade: Trade) -> Iterator[dict[str, object]]:
    contract, aggregate = trade.contract, _aggregate(trade)
    weighted, n = aggregate.kind in WEIGHTED, len(trade.contract.underlyings)
    references: Sequence[float | None]
    scales: Sequence[float | None] = (None,) * n
    variances: Sequence[float] = (0.0,) * n
    if isinstance(contract, EuropeanOption):
        references = contract.reference_levels
    else:
        references = contract.levels.references or (None,) * n
        scales = barrier_scales(contract) or scales
        if isinstance(contract.statistic, RealisedVariance):
            variances = contract.statistic.weights[:-1]
    for i, underlying in enumerate(contract.underlyings):
        yield {
            "trade_id": trade.trade_id,
            "underlying": underlying,
            "weight": aggregate.weights[i] if weighted else None,
            "initial_fixing": references[i] if contract.on_performance else None,
            "barrier_level": scales[i],
            "variance_weight": variances[i] or None,
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
