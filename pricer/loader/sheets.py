"""Sheets: cells with their coordinates, read from a workbook or from a CSV file alike.

Rows and columns keep the numbers a spreadsheet program shows, so that every message can
name the cell.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import date, datetime
from functools import cache

from pricer.core.source import SourceFile
from pricer.loader.text import clean, fold


@dataclass(frozen=True, slots=True)
class ErrorValue:
    """A spreadsheet error such as ``#N/A``."""

    text: str


@dataclass(frozen=True, slots=True)
class UncalculatedFormula:
    """A formula whose result was never stored: the file was not saved by a spreadsheet program."""

    text: str


DIGITS = "0123456789"

Cell = None | str | float | bool | date | datetime | ErrorValue | UncalculatedFormula


@dataclass(frozen=True, slots=True)
class Merged:
    """A merged range, rows and columns counted from 1, both ends included."""

    text: str
    first_row: int
    last_row: int
    first_column: int
    last_column: int


@dataclass(frozen=True, slots=True)
class Sheet:
    """One table as it stands in a file.

    ``rows`` holds (row number, cells) of the rows that are not blank; cells are counted
    from column A and may end early. ``typed`` is True where cells know whether they are
    text or numbers (a workbook) and False where everything is text (CSV).
    """

    file: str
    name: str
    rows: list[tuple[int, list[Cell]]]
    typed: bool
    is_open_ended: bool = False  # a .csv file whose last row does not end: it may have been cut short
    merged: tuple[Merged, ...] = ()
    hidden_rows: tuple[int, ...] = ()
    hidden_columns: tuple[int, ...] = ()
    hidden: bool = False


@dataclass(frozen=True, slots=True)
class Sheets:
    """The tables of one input that were wanted.

    ``by_name`` is keyed by the folded name (``curvepoints``); more than one sheet under a
    name is the user's mistake. ``unread`` names the sheets that no one asked for.
    """

    name: str  # of the workbook without its ending, or of the folder; see files.read_sheets
    file: str  # as messages show it
    by_name: Mapping[str, Sequence[Sheet]]
    unread: tuple[str, ...]
    sources: tuple[SourceFile, ...]

    def named(self, name: str) -> Sequence[Sheet]:
        """The sheets whose name means ``name``."""
        return self.by_name.get(fold(name), ())


@cache
def letters(column: int) -> str:
    """Column letters of a column counted from 1: 1 is A, 27 is AA."""
    out = ""
    while column > 0:
        column, rest = divmod(column - 1, 26)
        out = chr(ord("A") + rest) + out
    return out


def coordinates(reference: str) -> tuple[int, int]:
    """Column and row, counted from 1, of a reference such as ``H12``."""
    split = len(reference.rstrip(DIGITS))
    return column_of(reference[:split]), int(reference[split:])


@cache
def column_of(column_letters: str) -> int:
    """The column, counted from 1, of its letters."""
    out = 0
    for letter in column_letters:
        out = out * 26 + ord(letter) - ord("A") + 1
    return out


def is_blank(cell: Cell) -> bool:
    """Nothing in the cell, or nothing that shows."""
    if cell is None:
        return True
    if not isinstance(cell, str):
        return False
    return not cell or cell.isspace() or not (cell.isascii() or clean(cell)[0])


class UnreadableError(Exception):
    """An input whose tables cannot be read at all: what was found, what was expected, how to mend it."""

    def __init__(self, code: str, found: str, expected: str, mend: str) -> None:
        super().__init__(f"found {found}; expected {expected}. {mend}")
        self.code, self.found, self.expected, self.mend = code, found, expected, mend
