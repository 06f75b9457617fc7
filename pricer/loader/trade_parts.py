"""All that the tables of a book say about one trade, and what is wrong with it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from datetime import date
from functools import lru_cache
from typing import Any

from pricer.core.issues import Issue, Severity
from pricer.loader.book_models import BOOK_COLUMNS, TRADES
from pricer.loader.faults import Fault
from pricer.loader.table import UNREAD, Row, Table
from pricer.loader.trade_words import NOTE, PERFORMANCE
from pricer.market.calendars import CURRENCY_CALENDARS, advance


@dataclass(slots=True)
class TradeParts:
    """The trade's row, those of its underlyings and those of its features; faults are gathered on the way."""

    tables: Mapping[str, Table[Any]]
    row: Row[Any]
    legs: Sequence[Row[Any]]
    features: Mapping[str, Sequence[Row[Any]]]  # table name -> rows
    issues: list[Issue] = field(default_factory=list)

    def rows(self, table: str) -> Sequence[Row[Any]]:
        """The trade's rows of a table of features."""
        return self.features.get(table, ())

    def tell(self, table: str, row: int, column: str, fault: Fault, severity: Severity = Severity.ERROR) -> None:
        """Remember a fault at its cell; what it does not say is completed by its column."""
        told = BOOK_COLUMNS[table][column].completed(fault)
        self.issues.append(self.tables[table].issue(row, column, told, severity))

    def tell_trade(self, column: str, fault: Fault, severity: Severity = Severity.ERROR) -> None:
        """Remember a fault at a cell of the trade's own row."""
        self.tell(TRADES, self.row.number, column, fault, severity)

    @property
    def is_sound(self) -> bool:
        """Whether nothing worse than a warning was found."""
        return all(issue.severity is Severity.WARNING for issue in self.issues)

    def get(self, column: str) -> Any:
        """The trade's value in a column; None where it is blank, of another product, or could not be read."""
        value = self.row.get(column)
        return None if value is UNREAD else value

    @property
    def terms(self) -> Any:
        """The row as its model has it, of a trade whose row is sound."""
        return self.row.value

    @property
    def underlyings(self) -> list[Any]:
        """The rows of the constituents as their model has them, of a trade whose rows are sound."""
        return [leg.value for leg in self.legs]

    @property
    def is_note(self) -> bool:
        return bool(self.get("product") == NOTE)

    @property
    def on_performance(self) -> bool:
        return bool(self.get("underlying_level") == PERFORMANCE)

    @property
    def settlement_calendar(self) -> str | None:
        """None where neither the trade nor its currency names one."""
        return self.get("settlement_calendar") or CURRENCY_CALENDARS.get(self.get("currency") or "")

    @property
    def observation_calendar(self) -> str | None:
        return self.get("observation_calendar") or self.settlement_calendar

    def paid_after(self, day: date) -> date:
        """The payment date of what ``day`` decides, by the trade's settlement lag."""
        calendar, lag = self.settlement_calendar, self.get("settlement_lag_days")
        return day if calendar is None or lag is None else payment_date(calendar, day, lag)


@lru_cache(maxsize=65_536)
def payment_date(calendar: str, day: date, lag: int) -> date:
    """The day that lies ``lag`` business days after ``day``."""
    return advance(calendar, day, lag)
