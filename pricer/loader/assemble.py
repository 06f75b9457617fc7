"""From the rows of a book to its trades; a row that cannot be used becomes a refusal, never a gap."""

from __future__ import annotations

import gc
from collections import defaultdict
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from datetime import date
from functools import lru_cache
from pathlib import Path

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.book import Book, Premium, Refusal, Trade
from pricer.contracts.option import EuropeanOption
from pricer.contracts.profile import Profile
from pricer.core.issues import InputError, Issue, Severity
from pricer.loader.belonging import belongings
from pricer.loader.book_rows import (
    EUROPEAN_OPTION,
    LONG,
    PERFORMANCE,
    TRADE_ROWS,
    ConstituentRow,
    EuropeanOptionRow,
    trade_columns,
)
from pricer.loader.columns import columns_of
from pricer.loader.faults import Fault
from pricer.loader.files import read_sheets
from pricer.loader.headers import find_sheet, match_header, unread_sheets
from pricer.loader.sheets import Cell, Sheet, Sheets
from pricer.loader.table import UNREAD, Row, Table, read_table
from pricer.loader.terms import check_terms
from pricer.loader.text import fold, quoted
from pricer.loader.trade_places import TradePlaces
from pricer.market.calendars import advance, currency_calendar

TRADES, CONSTITUENTS = "trades", "constituents"

_TradeTable = Table[EuropeanOptionRow]
_LegTable = Table[ConstituentRow]


def load_book(path: str | Path) -> Book:
    """The book in a workbook or in a folder of .csv files.

    Every problem is in ``Book.issues``; a trade that cannot be used is in ``Book.refusals``
    with its own. Raises :class:`InputError` with every problem found when there are no
    trades to read at all.
    """
    with _collector_at_rest():
        return _book(read_sheets(path, (TRADES, CONSTITUENTS)))


@contextmanager
def _collector_at_rest() -> Iterator[None]:
    """A large book is millions of objects and no cycles: the collector would walk them again and again in vain."""
    was_enabled = gc.isenabled()
    gc.disable()
    try:
        yield
    finally:
        if was_enabled:
            gc.enable()


def _book(sheets: Sheets) -> Book:
    trades, constituents, issues = _tables(sheets)
    legs, strays, stray_refusals = _legs(trades, constituents)
    kept: list[Trade] = []
    refused: list[Refusal] = []
    rows_of: dict[str, list[int]] = defaultdict(list)
    for row in trades.rows:
        rows_of[_trade_id(row)].append(row.number)
    for row in trades.rows:
        trade_id = _trade_id(row)
        own = legs.get(trade_id, [])
        found = [*row.issues]
        if row.number == rows_of[trade_id][0]:
            found += [*(issue for leg in own for issue in leg.issues), *strays.get(trade_id, ())]
        if len(rows_of[trade_id]) > 1:
            # Whose the constituents are is not known, so they are not compared with the terms of either row.
            found.append(_duplicate(trades, row.number, trade_id, rows_of[trade_id]))
        elif row.get("trade_id") is not UNREAD:
            found += check_terms(trades, row, constituents, own)
        found = [issue.for_trade(trade_id) for issue in found]
        issues += found
        if any(issue.severity is not Severity.WARNING for issue in found):
            refused.append(_refusal(row, trade_id, found))
        elif row.value is not None:
            kept.append(_trade(row.value, [leg.value for leg in own if leg.value is not None]))
    for refusal in stray_refusals:
        refused.append(refusal)
        issues += refusal.issues
    legs_of = {
        trade_id: {str(leg.get("underlying")): leg.number for leg in own if leg.get("underlying") is not UNREAD}
        for trade_id, own in legs.items()
    }
    return Book(
        name=sheets.name,
        trades=tuple(kept),
        refusals=tuple(refused),
        issues=tuple(issues),
        sources=sheets.sources,
        places=TradePlaces(trades, constituents, {trade_id: rows[0] for trade_id, rows in rows_of.items()}, legs_of),
    )


def _tables(sheets: Sheets) -> tuple[_TradeTable, _LegTable, list[Issue]]:
    """Both tables, and what was odd about them; raises :class:`InputError` when one cannot be used."""
    trade_sheet, issues = find_sheet(sheets, TRADES, required=Severity.FATAL)
    leg_sheet, more = find_sheet(sheets, CONSTITUENTS, required=Severity.FATAL)
    issues += more
    trade_header = leg_header = None
    if trade_sheet is not None:
        trade_header, more = match_header(trade_sheet, trade_columns())
        issues += more
        if trade_header is not None and not any(trade_header.holds_row(cells) for _, cells in trade_sheet.rows[1:]):
            issues.append(_empty(trade_sheet))
    if leg_sheet is not None:
        leg_header, more = match_header(leg_sheet, columns_of(ConstituentRow))
        issues += more
    fatal = any(issue.severity is Severity.FATAL for issue in issues)
    if fatal or trade_sheet is None or leg_sheet is None or trade_header is None or leg_header is None:
        raise InputError(issues)
    trades = read_table(trade_sheet, trade_header, _row_model, by="product")
    constituents = read_table(leg_sheet, leg_header, ConstituentRow)
    return trades, constituents, issues + unread_sheets(sheets)


def _row_model(product: Cell) -> type[EuropeanOptionRow]:
    """The row model of a product; an unknown product is told by the model's own column."""
    models = {fold(name): model for name, model in TRADE_ROWS.items()}
    return models.get(fold(product) if isinstance(product, str) else "", TRADE_ROWS[EUROPEAN_OPTION])


def _legs(
    trades: _TradeTable, constituents: _LegTable
) -> tuple[dict[str, list[Row[ConstituentRow]]], dict[str, list[Issue]], list[Refusal]]:
    """Constituents by trade; issues of rows that may be a trade's; refusals in the name of unknown trades."""
    known = {str(row.get("trade_id")) for row in trades.rows if row.get("trade_id") is not UNREAD}
    legs: dict[str, list[Row[ConstituentRow]]] = defaultdict(list)
    strays: dict[str, list[Issue]] = defaultdict(list)
    unowned: dict[str, list[Issue]] = defaultdict(list)
    for row, belonging in belongings(constituents.rows, "trade_id", known):
        if belonging.owner is not None:
            legs[belonging.owner].append(row)
            continue
        issues = list(row.issues)
        suspects = " or ".join(map(quoted, belonging.suspects))
        if belonging.name:
            fault = Fault(
                "unknown-trade",
                quoted(belonging.name),
                "the trade_id of a row in the table trades",
                f"Did you mean {suspects}? Correct the id." if suspects else "Correct the id, or delete the row.",
            )
            issues.append(constituents.issue(row.number, "trade_id", fault))
        for suspect in belonging.suspects:
            strays[suspect] += issues
        if not belonging.suspects:
            unowned[belonging.name or f"constituents row {row.number}"] += issues
    refusals = [Refusal(name, tuple(issue.for_trade(name) for issue in issues)) for name, issues in unowned.items()]
    return legs, strays, refusals


def _trade(row: EuropeanOptionRow, legs: Sequence[ConstituentRow]) -> Trade:
    size = row.notional if row.underlying_level == PERFORMANCE else row.quantity
    calendar = row.settlement_calendar or currency_calendar(row.currency)
    on_performance = row.underlying_level == PERFORMANCE
    contract = EuropeanOption(
        underlyings=tuple(leg.underlying for leg in legs),
        reference_levels=tuple(leg.initial_fixing or 1.0 for leg in legs),
        aggregate=_aggregate(row, legs),
        profile=_profile(row),
        expiry_date=row.expiry_date,
        payment_date=_payment_date(calendar, row.expiry_date, row.settlement_lag_days),
        on_performance=on_performance,
        conversion=row.conversion,
    )
    premium = None
    if row.premium is not None and row.premium_date is not None:
        premium = Premium(row.premium, row.premium_date)
    return Trade(
        trade_id=row.trade_id,
        contract=contract,
        position=(size or 0.0) * (1.0 if row.direction == LONG else -1.0),
        currency=row.currency,
        collateral=row.collateral,
        trade_date=row.trade_date,
        premium=premium,
        counterparty=row.counterparty,
        netting_set=row.netting_set,
        strategy=row.strategy,
        model=row.model,
    )


def _aggregate(row: EuropeanOptionRow, legs: Sequence[ConstituentRow]) -> Aggregate:
    n = len(legs)
    weights = tuple(leg.weight for leg in legs if leg.weight is not None)
    match row.aggregate:
        case AggregateKind.WEIGHTED_SUM:
            return Aggregate.weighted_sum(weights)
        case AggregateKind.GEOMETRIC:
            return Aggregate.geometric(weights)
        case AggregateKind.BEST_OF:
            return Aggregate.best_of(n, row.cash_level)
        case AggregateKind.WORST_OF:
            return Aggregate.worst_of(n, row.cash_level)
        case AggregateKind.KTH_BEST:
            return Aggregate.kth_best(row.rank or 1, n)
        case AggregateKind.RANK_WEIGHTED:
            return Aggregate.rank_weighted(row.rank_weights or ())


def _profile(row: EuropeanOptionRow) -> Profile:
    unset = Profile(row.profile)
    return Profile(
        kind=row.profile,
        strike=unset.strike if row.strike is None else row.strike,
        cash_amount=unset.cash_amount if row.cash_amount is None else row.cash_amount,
        floor=row.floor,
        cap=row.cap,
    )


@lru_cache(maxsize=65_536)
def _payment_date(calendar: str, expiry: date, lag: int) -> date:
    return advance(calendar, expiry, lag)


def _trade_id(row: Row[EuropeanOptionRow]) -> str:
    """The trade's id, or the row's number, so that a trade without an id is listed too."""
    trade_id = row.get("trade_id")
    return f"row {row.number}" if trade_id is UNREAD else str(trade_id)


def _refusal(row: Row[EuropeanOptionRow], trade_id: str, issues: Sequence[Issue]) -> Refusal:
    def read(column: str) -> str:
        value = row.get(column)
        return "" if value is UNREAD else str(value)

    return Refusal(trade_id, tuple(issues), read("product"), read("currency"), read("counterparty"), read("strategy"))


def _duplicate(trades: _TradeTable, row: int, trade_id: str, rows: Sequence[int]) -> Issue:
    others = [str(other) for other in rows if other != row]
    shown = ", ".join(others[:5]) + (" and more" if len(others) > 5 else "")
    fault = Fault(
        "duplicate-trade",
        f"{quoted(trade_id)}, {len(rows)} times (also in row {shown})",
        "each trade_id once",
        "Give each trade its own id, or delete the repeated row.",
    )
    return trades.issue(row, "trade_id", fault)


def _empty(sheet: Sheet) -> Issue:
    return Issue(
        "empty-book",
        "no trades below the header",
        "at least one trade",
        "Add a row per trade.",
        Severity.FATAL,
        sheet.file,
        sheet.name,
    )
