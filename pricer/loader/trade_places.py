"""Where each trade's cells stand, worked out when asked: a large book has millions of them."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any

from pricer.core.source import Place
from pricer.loader.table import Table

#: A constituent's cell is asked for as its column and its underlying: ``underlying:ORLUMA``.
LEG_COLUMNS = ("underlying", "weight", "initial_fixing")


@dataclass(frozen=True, slots=True, eq=False)
class TradePlaces(Mapping[tuple[str, str], Place]):
    """(trade id, column) -> cell. ``payment_date`` stands for the settlement lag it follows from."""

    trades: Table[Any]
    constituents: Table[Any]
    row_of: Mapping[str, int]
    legs_of: Mapping[str, Mapping[str, int]]  # trade id -> underlying -> row

    def __getitem__(self, key: tuple[str, str]) -> Place:
        trade_id, column = key
        name, _, underlying = column.partition(":")
        place = None
        if underlying and name in LEG_COLUMNS:
            row = self.legs_of.get(trade_id, {}).get(underlying)
            place = None if row is None else self.constituents.place(row, name)
        elif trade_id in self.row_of:
            column = "settlement_lag_days" if column == "payment_date" else column
            place = self.trades.place(self.row_of[trade_id], column)
        if place is None:
            raise KeyError(key)
        return place

    def __iter__(self) -> Iterator[tuple[str, str]]:
        has_lag = "settlement_lag_days" in self.trades.header.positions
        columns = (*self.trades.header.positions, *(("payment_date",) if has_lag else ()))
        leg_columns = [name for name in LEG_COLUMNS if name in self.constituents.header.positions]
        for trade_id in self.row_of:
            yield from ((trade_id, column) for column in columns)
            for underlying in self.legs_of.get(trade_id, ()):
                yield from ((trade_id, f"{name}:{underlying}") for name in leg_columns)

    def __len__(self) -> int:
        return sum(1 for _ in self)
