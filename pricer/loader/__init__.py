"""Readers: workbooks or folders of CSV in, a frozen book and market out, every problem with its cell."""

from __future__ import annotations

from datetime import date
from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from pricer.contracts.book import Book
    from pricer.loader.write import Tables
    from pricer.market.market import Market

__all__ = ["load_book", "load_market", "write_book", "write_tables", "write_templates"]

# Each function imports its module when called, so that importing this package loads no spreadsheet library.


def load_book(path: str | Path) -> Book:
    """The book in the workbook or folder of .csv files at ``path``.

    Trades that cannot be used are in ``Book.refusals``, every problem is in
    ``Book.issues``. Raises :class:`pricer.core.issues.InputError` with everything found
    when the input holds no readable table of trades.
    """
    from pricer.loader import assemble

    return assemble.load_book(path)


def load_market(path: str | Path, *, valuation_date: date | None = None) -> Market:
    """The market in the workbook or folder of .csv files at ``path``.

    ``valuation_date`` replaces the snapshot's own. Items that cannot be used are in
    ``Market.rejected``, every problem is in ``Market.issues``. Raises
    :class:`pricer.core.issues.InputError` when the market is unusable as a whole.
    """
    from pricer.loader import snapshot

    return snapshot.load_market(path, valuation_date=valuation_date)


def write_templates(folder: str | Path) -> tuple[Path, ...]:
    """Write ``book.xlsx`` and ``market.xlsx``, empty and annotated, into ``folder``; return their paths.

    Raises FileExistsError when one of them is there: a filled-in workbook is never overwritten.
    """
    from pricer.loader.template import write_templates as write

    return write(folder)


def write_tables(tables: Tables, path: str | Path) -> None:
    """Write tables (name -> rows by column) as a workbook if ``path`` ends in .xlsx, else as a folder of .csv files."""
    from pricer.loader import write

    write.write_tables(tables, path)


def write_book(book: Book, path: str | Path) -> None:
    """Write a book's trades so that :func:`load_book` reads them back unchanged.

    Raises ValueError for a payment date that no settlement lag of the currency's calendar gives.
    """
    from pricer.loader import book_tables, write

    write.write_tables(book_tables.book_tables(book), path)
