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
    "dividends": "One row per proportional dividend. The table may be left empty.",
    "volatilities": "One row per underlying and expiry. Between expiries, total variance is interpolated.",
    CORRELATIONS: (
        "A square matrix: one row and one column per underlying, headed by its id. The diagonal, and one of two "
        "mirrored cells, may be blank."
    ),
    "curves": "One row per discount curve: one curve per currency and collateral.",
    "curve_points": "One row per point: a date or a tenor, a zero rate or a discount factor.",
    "fx": "One row per pair of currencies, in one direction. The table may be left empty for one currency.",
}

_CORRELATION_COLUMNS = {
    "underlying": Column(
        Identifier(), "the underlying's id; head one further column with each underlying's id", "ORLUMA"
    )
}

MARKET: Mapping[str, TableSchema] = MappingProxyType(
    {
        name: TableSchema(purpose, columns_of(MARKET_ROWS[name]) if name in MARKET_ROWS else _CORRELATION_COLUMNS)
        for name, purpose in _MARKET_PURPOSES.items()
    }
)
