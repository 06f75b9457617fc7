"""One table on a sheet of its own: heading, frozen panes, filter, fitted widths, print set-up."""

from __future__ import annotations

import math
import textwrap
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from pricer.report.bulk import Bulk, BulkColumn
from pricer.report.cells import put_text
from pricer.report.columns import Column, Kind
from pricer.report.page import set_up_page
from pricer.report.styles import Mark, body_style, decimals_for

if TYPE_CHECKING:
    import pandas
    from openpyxl import Workbook

    from pricer.run.outcome import RunFacts

HEADING_ROW = 4
_FIRST_ROW = HEADING_ROW + 1
_HEADING_LINES = 4
_LINE_HEIGHT = 13.0


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


def add_table_sheet(workbook: Workbook, table: Table, facts: RunFacts) -> Bulk | None:
    """Add the sheet without its rows; return them, to be poured in when the workbook is saved."""
    from openpyxl.utils import get_column_letter

    sheet = workbook.create_sheet(table.title)
    letters = [get_column_letter(i) for i in range(1, len(table.columns) + 1)]
    put_text(sheet, 1, 1, table.heading, "title")
    put_text(sheet, 2, 1, table.note, "subtitle")
    values = {column.name: _values(table, column) for column in table.columns}
    decimals = {column.name: _decimals(table.columns, column, values) for column in table.columns}
    widths = [_width(column, _shown(column, values, decimals), facts) for column in table.columns]
    lines = 1
    for i, (letter, column, width) in enumerate(zip(letters, table.columns, widths, strict=True), 1):
        header = column.header.format(reporting=facts.reporting_currency)
        put_text(sheet, HEADING_ROW, i, header, "heading number" if column.kind.numeric else "heading")
        sheet.column_dimensions[letter].width = width
        lines = max(lines, len(_wrapped(header, width)))
    # A little more than the headings need: the filter's button sits there.
    sheet.row_dimensions[HEADING_ROW].height = _LINE_HEIGHT * (lines + 0.75)
    sheet.row_dimensions[1].height = 24.0
    n_rows = len(table.frame)
    sheet.freeze_panes = f"{get_column_letter(table.frozen + 1)}{_FIRST_ROW}"
    sheet.print_title_rows = f"{HEADING_ROW}:{HEADING_ROW}"
    set_up_page(sheet, facts)
    printed = [letter for letter, column in zip(letters, table.columns, strict=True) if column.printed]
    last_row = HEADING_ROW + max(1, n_rows + (table.total is not None))
    sheet.print_area = f"A1:{printed[-1]}{last_row}"
    if not n_rows:
        put_text(sheet, _FIRST_ROW, 1, table.empty, "note")
        return None
    sheet.auto_filter.ref = f"A{HEADING_ROW}:{letters[-1]}{HEADING_ROW + n_rows}"
    marks = [*table.marks, Mark.TOTAL] if table.total is not None else list(table.marks)
    prose = [(values[c.name], width) for c, width in zip(table.columns, widths, strict=True) if c.kind is Kind.PROSE]
    vertical = "top" if prose else "center"
    return Bulk(
        _FIRST_ROW,
        tuple(
            BulkColumn(
                letter, values[column.name], _style_indices(workbook, column, decimals[column.name], marks, vertical)
            )
            for letter, column in zip(letters, table.columns, strict=True)
        ),
        heights=_heights(prose, n_rows) if prose else (),
    )


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


def _heights(prose: Sequence[tuple[list[Any], float]], n_rows: int) -> list[float]:
    """Row heights for wrapped text; not every program grows a row by itself."""
    return [
        _LINE_HEIGHT * max(len(textwrap.wrap(texts[i] or "", int(1.1 * width))) or 1 for texts, width in prose) + 2.0
        for i in range(n_rows)
    ]


def _style_indices(
    workbook: Workbook, column: Column, decimals: int, marks: Sequence[Mark], vertical: str
) -> list[int]:
    from openpyxl.cell import WriteOnlyCell

    index: dict[Mark, int] = {}
    for mark in set(marks):
        cell = WriteOnlyCell(workbook.worksheets[0])  # belongs to no sheet: it only looks the index up
        cell.style = body_style(workbook, column.kind, decimals, mark, vertical)
        index[mark] = cell.style_id
    return [index[mark] for mark in marks]


def _shown(column: Column, values: Mapping[str, list[Any]], decimals: Mapping[str, int]) -> int:
    """Characters of the longest cell as it is displayed."""
    cells = [value for value in values[column.name] if value is not None]
    if not cells:
        return 0
    if column.kind.numeric:
        places = {Kind.AMOUNT: decimals[column.name], Kind.FIXED: 2}.get(column.kind, 0)
        finite = [cell for cell in cells if math.isfinite(cell)] or [0.0]
        return max(len(f"{extreme:,.{places}f}") for extreme in (min(finite), max(finite)))
    if column.kind is Kind.DATE:
        return 10
    return max(_text_width(cell) for cell in set(cells))


def _text_width(text: str) -> int:
    """Width in digits: capitals are wider than digits, the other letters a little narrower."""
    return len(text) + math.ceil(0.25 * sum(c.isupper() for c in text))


def _width(column: Column, shown: int, facts: RunFacts) -> float:
    """Width in characters: the content up to the column's cap, and a heading of few lines."""
    header = column.header.format(reporting=facts.reporting_currency)
    content = shown + 1 if column.kind.numeric else min(shown, column.widest)
    width = max(content + 2, max(len(word) for word in header.split()) + 3, 6)
    while len(_wrapped(header, width)) > (_HEADING_LINES if column.printed else 3):
        width += 1
    return float(width)


def _wrapped(text: str, width: float) -> list[str]:
    """The lines of a bold heading in a column ``width`` characters wide, with air beside it."""
    return textwrap.wrap(text, max(1, int(width) - 3)) or [""]
