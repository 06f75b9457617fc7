"""What was wrong, where, what was expected, and how to mend it.

Every part of the tool that refuses or corrects something says so with an
:class:`Issue`; nothing is refused by a bare exception text.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace
from enum import StrEnum


class Severity(StrEnum):
    """How far an issue reaches."""

    FATAL = "fatal"  # the file or the market cannot be used at all
    ERROR = "error"  # one trade, or one market item, cannot be used
    WARNING = "warning"  # used, but a person should look


@dataclass(frozen=True, slots=True)
class Issue:
    """One problem, with its place and its remedy.

    ``column`` is the column's name, ``cell`` the spreadsheet reference (``H12``);
    both are None where the problem is wider than a cell. ``trade_id`` names the
    trade that cannot be priced because of it, if there is one. ``code`` is a short
    stable word for machines (``"unknown-underlying"``).
    """

    code: str
    found: str
    expected: str
    mend: str
    severity: Severity = Severity.ERROR
    file: str | None = None
    sheet: str | None = None
    row: int | None = None
    column: str | None = None
    cell: str | None = None
    trade_id: str | None = None

    def place(self) -> str:
        """The place in words: ``book.xlsx, sheet trades, row 12, column "strike" (cell H12)``."""
        parts = []
        if self.file is not None:
            parts.append(self.file)
        # A .csv file holds one table and is named after it.
        if self.sheet is not None and not (self.file or "").lower().endswith(".csv"):
            parts.append(f"sheet {self.sheet}")
        if self.row is not None:
            parts.append(f"row {self.row}")
        if self.column is not None:
            cell = f" (cell {self.cell})" if self.cell is not None else ""
            parts.append(f'column "{self.column}"{cell}')
        if not parts and self.trade_id is not None:
            parts.append(f"trade {self.trade_id}")
        return ", ".join(parts)

    def __str__(self) -> str:
        text = f"found {self.found}; expected {self.expected}. {self.mend}"
        place = self.place()
        return f"{place}: {text}" if place else text

    def for_trade(self, trade_id: str) -> Issue:
        """The same issue, charged to a trade."""
        return replace(self, trade_id=trade_id)


class InputError(Exception):
    """Nothing could be done with an input; carries every issue found on the way."""

    def __init__(self, issues: Iterable[Issue]) -> None:
        self.issues: tuple[Issue, ...] = tuple(issues)
        super().__init__("\n".join(str(issue) for issue in self.issues))
