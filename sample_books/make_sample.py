"""Writes the sample: an invented desk's book and market, as workbooks and as CSV folders, and their broken twins.

Every name and figure is invented. Run from the top of the project:
``python sample_books/make_sample.py``.
"""

from __future__ import annotations

from pathlib import Path

from saltmarsh.market import market_tables
from saltmarsh.mistakes import broken_book, broken_market
from saltmarsh.trades import book_tables

from pricer.loader import write_tables

HERE = Path(__file__).parent


def main(folder: Path = HERE) -> None:
    """Write everything below ``folder``."""
    desk, broken = folder / "saltmarsh_desk", folder / "saltmarsh_desk_broken_market"
    book, market = book_tables(), market_tables()
    write_tables(broken_book(book), desk / "broken_book.xlsx")
    for name, tables in (("book", book), ("market", market)):
        write_tables(tables, desk / f"{name}.xlsx")
        write_tables(tables, desk / name)
    write_tables(broken_market(market), broken / "market.xlsx")
    write_tables(broken_market(market), broken / "market")


if __name__ == "__main__":
    main()
