"""A small book and market on disk, cut from the sample, for tests that run commands."""

from __future__ import annotations

import importlib
import sys
from pathlib import Path
from types import ModuleType

from pricer.loader import write_tables

ROOT = Path(__file__).parents[2]
SAMPLE = ROOT / "sample_books" / "saltmarsh_desk"
BROKEN_MARKET = ROOT / "sample_books" / "saltmarsh_desk_broken_market"


def sample_maker() -> ModuleType:
    """The script that writes the sample, as a module."""
    return _of_sample("make_sample")


def saltmarsh(name: str) -> ModuleType:
    """One of the modules that the script is made of."""
    return _of_sample(f"saltmarsh.{name}")


def _of_sample(name: str) -> ModuleType:
    folder = str(ROOT / "sample_books")  # where the script itself would find its modules
    if folder not in sys.path:
        sys.path.append(folder)
    return importlib.import_module(name)


def small_book(*trade_ids: str) -> dict[str, list[dict]]:
    """Tables of the sample's trades with these ids, in the order asked."""
    tables = sample_maker().book_tables()
    by_id = {row["trade_id"]: row for row in tables["trades"]}
    others = {
        name: [row for row in rows if row["trade_id"] in trade_ids] for name, rows in tables.items() if name != "trades"
    }
    return {
        "trades": [by_id[trade_id] for trade_id in trade_ids],
        **{name: rows for name, rows in others.items() if rows},
    }


def write_desk(folder: Path, *trade_ids: str) -> tuple[Path, Path]:
    """A book of these trades and the sample's market as workbooks in ``folder``."""
    book, market = folder / "book.xlsx", folder / "market.xlsx"
    write_tables(small_book(*trade_ids), book)
    write_tables(sample_maker().market_tables(), market)
    return book, market
