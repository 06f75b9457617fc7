"""From the rows of a book to its trades; a row that cannot be used becomes a refusal, never a gap."""

from __future__ import annotations

import gc
from collections import defaultdict
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import Any

from pricer.contracts.book import Book, Premium, Refusal, Trade
from pricer.contracts.contract import Contract
from pricer.contracts.option import EuropeanOption
from pricer.core.issues import InputError, Issue, Severity
from pricer.loader.belonging import rows_by_trade
from pricer.loader.book_models import BOOK_COLUMNS, CONSTITUENTS, FEATURE_ROWS, TRADES
from pricer.loader.book_rows import TRADE_ROWS, AnyTradeRow, ConstituentRow
from pricer.loader.contract_assembly import contract_of
from pricer.loader.faults import Fault
from pricer.loader.files import read_sheets
from pricer.loader.headers import Header, find_sheet, match_header, unread_sheets
from pricer.loader.sheets import Cell, Sheet, Sheets
from pricer.loader.table import UNREAD, Row, Table, read_table
from pricer.loader.terms import check_terms
from pricer.loader.text import fold, quoted
from pricer.loader.trade_parts import TradeParts
from pricer.loader.trade_places import TradePlaces
from pricer.loader.trade_words import EUROPEAN_OPTION, LONG, NOTE, OPTION, PERFORMANCE

_MODELS = {fold(name): model for name, model in TRADE_ROWS.items()}


def load_book(path: str | Path) -> Book:
    """The book in a workbook or in a folder of .csv files.

    Every problem is in ``Book.issues``; a trade that cannot be used is in ``Book.refusals``
    with its own. Raises :class:`InputError` with every problem found when there are no
    trades to read at all.
    """
    with _collector_at_rest():
        return _book(read_sheets(path, tuple(BOOK_COLUMNS), needed=(TRADES, CONSTITUENTS)))


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
    tables, issues = _tables(sheets)
    trades = tables[TRADES]
    known = {str(row.get("trade_id")) for row in trades.rows if row.get("trade_id") is not UNREAD}
    strays: dict[str, list[Issue]] = defaultdict(list)
    unowned: dict[str, list[Issue]] = defaultdict(list)
    on_paths = [str(row.get("trade_id")) for row in trades.rows if row.get("product") in (OPTION, NOTE)]
    owned = {
        name: rows_by_trade(table, known, strays, unowned, on_paths if name in FEATURE_ROWS else ())
        for name, table in tables.items()
        if name != TRADES
    }
    features = [(name, rows) for name, rows in owned.items() if name != CONSTITUENTS and rows]
    kept: list[Trade] = []
    refused: list[Refusal] = []
    rows_of: dict[str, list[int]] = defaultdict(list)
    for row in trades.rows:
        rows_of[_trade_id(row)].append(row.number)
    for row in trades.rows:
        trade_id = _trade_id(row)
        own = owned[CONSTITUENTS].get(trade_id, [])
        of_features = {name: rows[trade_id] for name, rows in features if trade_id in rows} if features else {}
        parts = TradeParts(tables, row, own, of_features, [*row.issues])
        if row.number == rows_of[trade_id][0]:
            parts.issues += [issue for leg in own for issue in leg.issues]
            parts.issues += [issue for rows in of_features.values() for found in rows for issue in found.issues]
            parts.issues += strays.get(trade_id, ())
        contract: EuropeanOption | Contract | None = None
        if len(rows_of[trade_id]) > 1:
            # Whose the constituents are is not known, so they are not compared with the terms of either row.
            parts.issues.append(_duplicate(trades, row.number, trade_id, rows_of[trade_id]))
        elif row.get("trade_id") is not UNREAD:
            parts.issues += check_terms(trades, row, tables[CONSTITUENTS], own)
            contract = contract_of(parts)
        found = [issue.for_trade(trade_id) for issue in parts.issues]
        issues += found
        if not parts.is_sound or contract is None:
            refused.append(_refusal(row, trade_id, found))
        else:
            kept.append(_trade(parts.terms, contract))
    for name, told in unowned.items():
        refused.append(Refusal(name, tuple(issue.for_trade(name) for issue in told)))
        issues += refused[-1].issues
    first_rows = {trade_id: rows[0] for trade_id, rows in rows_of.items()}
    return Book(
        name=sheets.name,
        trades=tuple(kept),
        refusals=tuple(refused),
        issues=tuple(issues),
        sources=sheets.sources,
        places=TradePlaces(tables, first_rows, _rows_of_legs(owned[CONSTITUENTS]), dict(features)),
    )


def _rows_of_legs(legs: Mapping[str, Sequence[Row[Any]]]) -> dict[str, dict[str, int]]:
    return {
        trade_id: {str(leg.get("underlying")): leg.number for leg in own if leg.get("underlying") is not UNREAD}
        for trade_id, own in legs.items()
    }


def _tables(sheets: Sheets) -> tuple[dict[str, Table[Any]], list[Issue]]:
    """All tables, and what was odd about them; raises :class:`InputError` when one cannot be used."""
    issues: list[Issue] = []
    found: dict[str, tuple[Sheet, Header]] = {}
    for name, columns in BOOK_COLUMNS.items():
        sheet, more = find_sheet(sheets, name, required=None if name in FEATURE_ROWS else Severity.FATAL)
        issues += more
        if sheet is None:
            continue
        header, more = match_header(sheet, columns)
        issues += more
        if header is not None:
            found[name] = sheet, header
            if name == TRADES and not any(header.holds_row(cells) for _, cells in sheet.rows[1:]):
                issues.append(_empty(sheet))
    if any(issue.severity is Severity.FATAL for issue in issues):
        raise InputError(issues)
    tables: dict[str, Table[Any]] = {TRADES: read_table(*found[TRADES], _row_model, by="product")}
    tables[CONSTITUENTS] = read_table(*found[CONSTITUENTS], ConstituentRow)
    for name, model in FEATURE_ROWS.items():
        if name in found:
            tables[name] = read_table(*found[name], model)
    return tables, issues + unread_sheets(sheets)


def _row_model(product: Cell) -> type[AnyTradeRow]:
    """The row model of a product; an unknown product is told by the model's own column."""
    return _MODELS.get(fold(product) if isinstance(product, str) else "", TRADE_ROWS[EUROPEAN_OPTION])


def _trade(row: AnyTradeRow, contract: EuropeanOption | Contract) -> Trade:
    size = row.notional if row.underlying_level == PERFORMANCE else row.quantity
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


def _trade_id(row: Row[Any]) -> str:
    """The trade's id, or the row's number, so that a trade without an id is listed too."""
    trade_id = row.get("trade_id")
    return f"row {row.number}" if trade_id is UNREAD else str(trade_id)


def _refusal(row: Row[Any], trade_id: str, issues: Sequence[Issue]) -> Refusal:
    def read(column: str) -> str:
        value = row.get(column)
        return "" if value is UNREAD else str(value)

    return Refusal(trade_id, tuple(issues), read("product"), read("currency"), read("counterparty"), read("strategy"))


def _duplicate(trades: Table[Any], row: int, trade_id: str, rows: Sequence[int]) -> Issue:
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
