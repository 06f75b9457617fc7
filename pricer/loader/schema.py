"""The tables of a book and of a market: their columns, in order, and what each table is for."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

from pricer.loader.book_rows import ConstituentRow, trade_columns
from pricer.loader.columns import Column, columns_of
from pricer.loader.market_rows import MARKET_ROWS
from pricer.loader.names import Identifier
from pricer.market.market import CORRELATIONS


@dataclass(frozen=True, slots=True)
class TableSchema:
    """A table's purpose in one sentence, and its columns by name."""

    purpose: str
    columns: Mapping[str, Column]


BOOK: Mapping[str, TableSchema] = MappingProxyType(
    {
        "trades": TableSchema("One row per trade.", trade_columns()),
        "constituents": TableSchema(
            "One row per trade and underlying. Ranked aggregates take no weights; performance options need an "
            "initial fixing.",
            columns_of(ConstituentRow),
        ),
    }
)

_MARKET_PURPOSES = {
    "snapshot": "One row: when the market was taken, and the currency of totals.",
    "underlyings": "One row per underlying.",
    "dividends": "One row per dividend, in cash or as a fraction of the price. The table may be left empty.",
    "repo": "One row per underlying and date or tenor, for underlyings that grow at repo rates. May be left out.",
    "volatilities": (
        "One row per quote. An expiry is quoted by strikes (in currency or relative to the forward; three at least), "
        "or by one volatility at the forward, with its skew and curvature if they are known."
    ),
    CORRELATIONS: (
        "A square matrix: one row and one column per underlying, headed by its id, and per currency pair such as "
        "EURUSD. The diagonal, and one of two mirrored cells, may be blank."
    ),
    "price_history": (
        "One row per day and underlying or currency pair. Correlations come from it where correlation_source in the "
        'table snapshot is "price history"; its last levels are compared with spots. May be left out.'
    ),
    "curves": "One row per discount curve: one curve per currency and collateral.",
    "curve_points": (
        "One row per point: a date or a tenor, and a zero rate or a discount factor; or a tenor and a quoted rate. "
        "All points of a curve are given in one way; deposits and overnight swaps may be mixed."
    ),
    "fx": "One row per pair of currencies, in one direction. The table may be left empty for one currency.",
    "fx_volatilities": "One row per pair and expiry, for trades that depend on exchange rates. May be left out.",
    "credit": "One row per name and tenor of its credit default swaps. May be left out.",
    "funding": "One row per date or tenor: what the desk pays and earns on unsecured cash. May be left out.",
    "agreements": "One row per netting set. May be left out.",
}

_CORRELATION_COLUMNS = {
    "underlying": Column(
        Identifier(), "the id of an underlying, or a currency pair; head one further column with each of them", "ORLUMA"
    )
}

MARKET: Mapping[str, TableSchema] = MappingProxyType(
    {
        name: TableSchema(purpose, columns_of(MARKET_ROWS[name]) if name in MARKET_ROWS else _CORRELATION_COLUMNS)
        for name, purpose in _MARKET_PURPOSES.items()
    }
)
