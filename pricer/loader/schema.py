"""The tables of a book and of a market: their columns, in order, and what each table is for."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

from pricer.loader.book_models import BOOK_COLUMNS, RARE_COLUMNS
from pricer.loader.columns import Column, columns_of
from pricer.loader.market_rows import MARKET_ROWS
from pricer.loader.names import Identifier
from pricer.market.market import CORRELATIONS


@dataclass(frozen=True, slots=True)
class TableSchema:
    """A table's purpose in one sentence, and its columns; the ``rare`` ones are written only if they are used."""

    purpose: str
    columns: Mapping[str, Column]
    rare: frozenset[str] = frozenset()


_BOOK_PURPOSES = {
    "trades": "One row per trade.",
    "constituents": (
        "One row per trade and underlying. Ranked aggregates take no weights; performance options need an initial "
        "fixing, or dates that set it."
    ),
    "schedules": (
        "One row per date of a trade: dates that set its initial fixings, of its statistic, barriers, calls, coupons, "
        "accruals and rights to exercise. This table and those below may be left out."
    ),
    "schedule_rules": "One row per series of dates that follow a rule, instead of rows in the table schedules.",
    "barriers": "One row per barrier. A daily, continuous or expiry barrier needs no dates in the table schedules.",
    "calls": (
        "One row per trade with automatic calls whose trigger is not the usual one: the trade's aggregate, at or above "
        "its level."
    ),
    "coupons": "One row per trade with coupons that have a memory, or whose trigger is not the usual one.",
    "exercises": "One row per right of the holder to exercise early, or of the issuer to redeem early.",
    "writers": "One row per trade whose writer may default before paying.",
}

BOOK: Mapping[str, TableSchema] = MappingProxyType(
    {
        name: TableSchema(purpose, BOOK_COLUMNS[name], RARE_COLUMNS.get(name, frozenset()))
        for name, purpose in _BOOK_PURPOSES.items()
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
    "fixings": (
        "One row per underlying or currency pair and day: the official levels that trades observed so far. A European "
        "option needs none before it expires. May be left out."
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
