"""Prices and hedges books of multi-asset options, and says how wrong each number may be.

>>> import pricer
>>> book, market = pricer.load_book("book.xlsx"), pricer.load_market("market.xlsx")  # doctest: +SKIP
>>> outcome = pricer.price(book, market)  # doctest: +SKIP
>>> pricer.tables(outcome)["valuations"]  # doctest: +SKIP
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from pricer.core.issues import InputError as InputError
    from pricer.core.issues import Issue as Issue
    from pricer.loader import load_book as load_book
    from pricer.loader import load_market as load_market
    from pricer.loader import write_templates as write_templates
    from pricer.report import tables as tables
    from pricer.report import write_report as write_report
    from pricer.run.outcome import Outcome as Outcome
    from pricer.run.pricing import price as price
    from pricer.run.settings import Settings as Settings

# Loaded on first use, so that the command line answers --help without loading the engine.
_HOMES = {
    "InputError": "pricer.core.issues",
    "Issue": "pricer.core.issues",
    "Outcome": "pricer.run.outcome",
    "Settings": "pricer.run.settings",
    "load_book": "pricer.loader",
    "load_market": "pricer.loader",
    "price": "pricer.run.pricing",
    "tables": "pricer.report",
    "write_report": "pricer.report",
    "write_templates": "pricer.loader",
}

__all__ = sorted(_HOMES)


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module 'pricer' has no attribute {name!r}")
    return getattr(import_module(_HOMES[name]), name)


def __dir__() -> list[str]:
    return __all__
