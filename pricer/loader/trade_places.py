"""Where each trade's cells stand, worked out when asked: a large book has millions of them."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from types import MappingProxyType
from typing import Any

from pricer.core.source import Place
from pricer.loader.book_models import (
    BARRIERS,
    CALLS,
    CONSTITUENTS,
    COUPONS,
    EXERCISES,
    RULES,
    SCHEDULES,
    TRADES,
    WRITERS,
)
from pricer.loader.table import Row, Table

#: A constituent's cell is asked for as its column and its underlying: ``underlying:ORLUMA``.
LEG_COLUMNS = ("underlying", "weight", "initial_fixing", "barrier_level", "variance_weight")

#: Keys that stand for a column of the trade's first row in a table of features.
FEATURE_KEYS: Mapping[str, tuple[str, str]] = MappingProxyType(
    {
        "barrier": (BARRIERS, "kind"),
        "call": (CALLS, "direction"),
        "coupon": (COUPONS, "direction"),
        "exercise": (EXERCISES, "by"),
        "writer": (WRITERS, "writer"),
        "assets": (WRITERS, "assets"),
        "recovery": (WRITERS, "recovery_decimal"),
    }
)

#: Keys of the first date, or rule, of a trade's schedules; ``schedule:call`` is that of one purpose,
#: ``schedule:call:2027-03-19`` the row of one date.
SCHEDULE_KEYS = ("schedule", "observation_dates")
_DATES = {SCHEDULES: "date", RULES: "frequency"}


@dataclass(frozen=True, slots=True, eq=False)
class TradePlaces(Mapping[tuple[str, str], Place]):
    """(trade id, key) -> cell, where a key is a column of the table trades or one of those above.

    ``payment_date`` stands for the settlement lag it follows from.
    """

    tables: Mapping[str, Table[Any]]
    row_of: Mapping[str, int]
    legs_of: Mapping[str, Mapping[str, int]]  # trade id -> underlying -> row
    features: Mapping[str, Mapping[str, Sequence[Row[Any]]]]  # table -> trade id -> rows

    def __getitem__(self, key: tuple[str, str]) -> Place:
        trade_id, column = key
        place = self._place(trade_id, *column.partition(":")[::2])
        if place is None:
            raise KeyError(key)
        return place

    def _place(self, trade_id: str, name: str, part: str) -> Place | None:
        if part and name in LEG_COLUMNS:
            row = self.legs_of.get(trade_id, {}).get(part)
            return None if row is None else self.tables[CONSTITUENTS].place(row, name)
        if name in SCHEDULE_KEYS:
            return self._date(trade_id, part)
        if not part and name in FEATURE_KEYS:
            table, column = FEATURE_KEYS[name]
            rows = self.features.get(table, {}).get(trade_id, ())
            return self.tables[table].place(rows[0].number, column) if rows else None
        if part or trade_id not in self.row_of:
            return None
        column = "settlement_lag_days" if name == "payment_date" else name
        return self.tables[TRADES].place(self.row_of[trade_id], column)

    def _date(self, trade_id: str, part: str) -> Place | None:
        purpose, _, day = part.partition(":")
        for table, column in _DATES.items():
            for row in self.features.get(table, {}).get(trade_id, ()):
                fits = not purpose or str(row.get("purpose")) == purpose
                if fits and (not day or str(row.get("date")) == day):
                    return self.tables[table].place(row.number, column)
        return None

    def __iter__(self) -> Iterator[tuple[str, str]]:
        positions = self.tables[TRADES].header.positions
        columns = (*positions, *(("payment_date",) if "settlement_lag_days" in positions else ()))
        leg_columns = [name for name in LEG_COLUMNS if name in self.tables[CONSTITUENTS].header.positions]
        for trade_id in self.row_of:
            yield from ((trade_id, column) for column in columns)
            for underlying in self.legs_of.get(trade_id, ()):
                yield from ((trade_id, f"{name}:{underlying}") for name in leg_columns)
            for name in (*FEATURE_KEYS, *SCHEDULE_KEYS):
                if self._place(trade_id, name, "") is not None:
                    yield trade_id, name
            purposes = {str(row.get("purpose")) for t in _DATES for row in self.features.get(t, {}).get(trade_id, ())}
            for purpose in sorted(purposes):
                if self._date(trade_id, purpose) is not None:
                    yield trade_id, f"schedule:{purpose}"

    def __len__(self) -> int:
        return sum(1 for _ in self)
