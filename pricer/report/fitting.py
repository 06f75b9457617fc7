"""How a table's columns come out: their values, decimals, headings and widths, and the heights of wrapped rows."""

from __future__ import annotations

import math
import textwrap
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from pricer.report.columns import FIXED_DECIMALS, Column, Kind
from pricer.report.styles import PRICE_DECIMALS, Mark, decimals_for
from pricer.report.widths import fits, heading_lines, plain_width

if TYPE_CHECKING:
    import pandas

LINE_HEIGHT = 13.0  # points; also the height of a row of one line
_HEADING_LINES = 4
_INDENT = 1.3  # of text, in characters


@dataclass(frozen=True, slots=True)
class Table:
    """What a sheet shows. ``marks`` has one mark a row; ``total`` is a last row outside the filter."""

    title: str
    heading: str
    note: str
    columns: tuple[Column, ...]
    frame: pandas.DataFrame
    marks: Sequence[Mark]
    empty: str  # said where there is no row
    frozen: int = 1  # columns that stay in view
    total: Mapping[str, Any] | None = None


@dataclass(frozen=True, slots=True)
class Fitted:
    """A table's columns made ready: one item a column in each of the parts."""

    headers: Sequence[str]
    values: Sequence[list[Any]]  # with the total's below them
    decimals: Sequence[int]
    widths: Sequence[float]  # in characters
    heading_lines: int


def fit(table: Table, reporting_currency: str) -> Fitted:
    """The columns as wide as they need to be: content up to each column's cap, and headings of few lines."""
    headers = [column.header.format(reporting=reporting_currency) for column in table.columns]
    values = {column.name: _values(table, column) for column in table.columns}
    decimals = {column.name: _decimals(table.columns, column, values) for column in table.columns}
    widths, lines = [], 1
    for column, header in zip(table.columns, headers, strict=True):
        # Printed columns come first: those for the screen get no taller heading than they have.
        most = _HEADING_LINES if column.printed else lines
        width = _width(column, header, _shown(column, values, decimals), most)
        widths.append(width)
        lines = max(lines, len(heading_lines(header, width, indent(column))))
    return Fitted(headers, list(values.values()), list(decimals.values()), widths, lines)


def heading_height(lines: int, filtered: bool = True) -> float:
    """Points of a heading row; where it is ``filtered`` a little more than it needs, for the button sits there."""
    return LINE_HEIGHT * (lines + (0.75 if filtered else 0.25))


def prose_heights(prose: Sequence[tuple[Sequence[Any], float]], n_rows: int) -> list[float]:
    """Row heights for wrapped text, of columns each with its width; not every program grows a row by itself."""
    return [
        LINE_HEIGHT * max(len(textwrap.wrap(texts[i] or "", int(1.1 * width))) or 1 for texts, width in prose) + 2.0
        for i in range(n_rows)
    ]


def indent(column: Column) -> float:
    """Characters that stay free left of a column's text."""
    return 0.0 if column.kind.numeric else _INDENT


def _values(table: Table, column: Column) -> list[Any]:
    """The column's values with None where there is none, and the total's below them."""
    series = table.frame[column.name]
    values: list[Any] = series.astype(object).where(series.notna(), None).tolist()
    if column.kind is Kind.DATE:
        values = [value if value is None else value.date() for value in values]
    return values if table.total is None else [*values, table.total.get(column.name)]


def _decimals(columns: Sequence[Column], column: Column, values: Mapping[str, list[Any]]) -> int:
    """Decimals of an amount: those of the column it is like, judged with the standard errors beside that one."""
    if column.kind is not Kind.AMOUNT:
        return 0
    base = column.like or column.name
    errors = [c.name for c in columns if c.like == base and c.name.endswith("standard_error")]
    return decimals_for(
        [x for x in values[base] if x is not None], [x for name in errors for x in values[name] if x is not None]
    )


def _shown(column: Column, values: Mapping[str, list[Any]], decimals: Mapping[str, int]) -> int:
    """Characters of the longest cell as it is displayed."""
    cells = [value for value in values[column.name] if value is not None]
    if not cells:
        return 0
    if column.kind.numeric:
        given = {**FIXED_DECIMALS, Kind.AMOUNT: decimals[column.name], Kind.PRICE: PRICE_DECIMALS}
        places = given.get(column.kind, 0)
        finite = [cell for cell in cells if math.isfinite(cell)] or [0.0]
        return max(len(f"{extreme:,.{places}f}") for extreme in (min(finite), max(finite)))
    if column.kind is Kind.DATE:
        return 10
    return max(plain_width(cell) for cell in set(cells))


def _width(column: Column, header: str, shown: int, most_lines: int) -> float:
    """Width in characters: the content up to the column's cap, and a heading of few lines."""
    content = shown + 1 if column.kind.numeric else min(shown, column.widest)
    width, room = max(content + 2, 6), indent(column)
    while True:
        lines = heading_lines(header, width, room)
        if len(lines) <= most_lines and fits(lines, width, room):
            return float(width)
        width += 1
