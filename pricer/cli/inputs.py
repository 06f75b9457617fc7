"""Reading the two inputs for a command: all problems of both are shown before it gives up."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import date
from pathlib import Path

import typer

from pricer.contracts.book import Book, Model
from pricer.core.issues import InputError, Issue
from pricer.market.market import Market


def parse_date(text: str | None) -> date | None:
    """An ISO date from the command line; anything else is a usage error."""
    if text is None:
        return None
    try:
        return date.fromisoformat(text)
    except ValueError:
        raise typer.BadParameter(f"found {text!r}; expected a date such as 2026-03-31.", param_hint="--date") from None


def parse_model(text: str | None) -> Model | None:
    """A model's name from the command line; anything else is a usage error."""
    if text is None:
        return None
    try:
        return Model(text.strip().lower().replace("-", " "))
    except ValueError:
        expected = " or ".join(f'"{model}"' for model in Model)
        raise typer.BadParameter(f"found {text!r}; expected {expected}.", param_hint="--model") from None


def strict_status(status: int, issues: Sequence[Issue]) -> int:
    """The exit status where any problem, be it only a warning, is one."""
    return max(status, 1) if issues else status


def read_inputs(book_path: Path, market_path: Path, valuation_date: date | None) -> tuple[Book, Market]:
    """Both inputs, or one :class:`InputError` with the problems of both."""
    from pricer.loader import load_book, load_market

    fatal: list[Issue] = []
    book = market = None
    try:
        book = load_book(book_path)
    except InputError as error:
        fatal.extend(error.issues)
    try:
        market = load_market(market_path, valuation_date=valuation_date)
    except InputError as error:
        fatal.extend(error.issues)
    if book is None or market is None:
        raise InputError(fatal)
    return book, market
