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
from pricer.report.styles import PRICE_DECIMALS, Mark, body_style, decimals_for
from pricer.report.text import looks_like_formula
from pricer.report.widths import fits, heading_lines, plain_width

if TYPE_CHECKING:
    import pandas
    from openpyxl import Workbook

    from pricer.run.outcome import RunFacts

HEADING_ROW = 4
_FIRST_ROW = HEADING_ROW + 1
_HEADING_LINES = 4
_LINE_HEIGHT = 13.0  # points; also the height of a row of one line
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


def add_table_sheet(workbook: Workbook, table: Table, facts: RunFacts) -> Bulk | None:
    """Add the sheet without its rows; return them, to be poured in when the workbook is saved."""
    from openpyxl.utils import get_column_letter

    sheet = workbook.create_sheet(table.title)
    letters = [get_column_letter(i) for i in range(1, len(table.columns) + 1)]
    put_text(sheet, 1, 1, table.heading, "title")
    put_text(sheet, 2, 1, table.note, "subtitle")
    values = {column.name: _values(table, column) for column in table.columns}
    decimals = {column.name: _decimals(table.columns, column, values) for column in table.columns}
    headers = [column.header.format(reporting=facts.reporting_currency) for column in table.columns]
    widths, lines = [], 1
    for i, (letter, column, header) in enumerate(zip(letters, table.columns, headers, strict=True), 1):
        # Printed columns come first: those for the screen get no taller heading than they have.
        most = _HEADING_LINES if column.printed else lines
        width = _width(column, header, _shown(column, values, decimals), most)
        widths.append(width)
        lines = max(lines, len(heading_lines(header, width, _indent(column))))
        put_text(sheet, HEADING_ROW, i, header, "heading number" if column.kind.numeric else "heading")
        sheet.column_dimensions[letter].width = width
    # A little more than the headings need: the filter's button sits there.
    sheet.row_dimensions[HEADING_ROW].height = _LINE_HEIGHT * (lines + 0.75)
    sheet.sheet_format.defaultRowHeight = _LINE_HEIGHT
    sheet.sheet_format.customHeight = True
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
                letter,
                values[column.name],
                _style_indices(workbook, column, decimals[column.name], marks, values[column.name], vertical),
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
    workbook: Workbook, column: Column, decimals: int, marks: Sequence[Mark], values: Sequence[Any], vertical: str
) -> list[int]:
    from openpyxl.cell import WriteOnlyCell

    wanted = [(mark, isinstance(x, str) and looks_like_formula(x)) for mark, x in zip(marks, values, strict=True)]
    index: dict[tuple[Mark, bool], int] = {}
    for mark, quoted in dict.fromkeys(wanted):
        cell = WriteOnlyCell(workbook.worksheets[0])  # belongs to no sheet: it only looks the index up
        cell.style = body_style(workbook, column.kind, decimals, mark, vertical)
        if quoted:
            cell.quotePrefix = True
        index[mark, quoted] = cell.style_id
    return [index[key] for key in wanted]


def _shown(column: Column, values: Mapping[str, list[Any]], decimals: Mapping[str, int]) -> int:
    """Characters of the longest cell as it is displayed."""
    cells = [value for value in values[column.name] if value is not None]
    if not cells:
        return 0
    if column.kind.numeric:
        places = {Kind.AMOUNT: decimals[column.name], Kind.FIXED: 2, Kind.PRICE: PRICE_DECIMALS}.get(column.kind, 0)
        finite = [cell for cell in cells if math.isfinite(cell)] or [0.0]
        return max(len(f"{extreme:,.{places}f}") for extreme in (min(finite), max(finite)))
    if column.kind is Kind.DATE:
        return 10
    return max(plain_width(cell) for cell in set(cells))


def _width(column: Column, header: str, shown: int, most_lines: int) -> float:
    """Width in characters: the content up to the column's cap, and a heading of few lines."""
    content = shown + 1 if column.kind.numeric else min(shown, column.widest)
    width, indent = max(content + 2, 6), _indent(column)
    while True:
        lines = heading_lines(header, width, indent)
        if len(lines) <= most_lines and fits(lines, width, indent):
            return float(width)
        width += 1


def _indent(column: Column) -> float:
    return 0.0 if column.kind.numeric else _INDENT
