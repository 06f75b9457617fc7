"""Several short tables below each other on one sheet, on one grid of columns."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date
from typing import TYPE_CHECKING, Any

from pricer.report.cells import put_number, put_text, workbook_of
from pricer.report.columns import Column, Kind
from pricer.report.fitting import LINE_HEIGHT, Fitted, Table, fit, heading_height, indent, prose_heights
from pricer.report.page import page_height, set_up_page
from pricer.report.styles import Mark, body_style
from pricer.report.widths import heading_lines

if TYPE_CHECKING:
    from openpyxl import Workbook
    from openpyxl.worksheet.worksheet import Worksheet

    from pricer.run.outcome import RunFacts

_TITLE_HEIGHT = 24.0
_SECTION_HEIGHT = 17.0
_ROWS_ABOVE = 3  # of a table's first row: air, section title, headings
_KEPT_TOGETHER = 3  # rows that stand on a page with their heading at least


@dataclass(frozen=True, slots=True)
class Stacked:
    """A table of a stack; ``spans`` says how many columns of the grid each of its columns covers, 1 if not given."""

    table: Table
    spans: tuple[int, ...] = ()

    def places(self) -> list[tuple[int, int]]:
        """First and last column of the grid of each column, counted from 1."""
        spans = self.spans or (1,) * len(self.table.columns)
        ends = [sum(spans[: i + 1]) for i in range(len(spans))]
        return [(end - span + 1, end) for end, span in zip(ends, spans, strict=True)]


def add_stacked_sheet(workbook: Workbook, title: str, note: str, stack: Sequence[Stacked], facts: RunFacts) -> None:
    """Add the sheet; every table has its heading above it and says so where it is empty."""
    from openpyxl.utils import get_column_letter
    from openpyxl.worksheet.pagebreak import Break

    sheet = workbook.create_sheet(title)
    fitted = [fit(each.table, facts.reporting_currency) for each in stack]
    widths = _grid(stack, fitted)
    for i, width in enumerate(widths, 1):
        sheet.column_dimensions[get_column_letter(i)].width = width
    put_text(sheet, 1, 1, title, "title")
    sheet.row_dimensions[1].height = _TITLE_HEIGHT
    put_text(sheet, 2, 1, note, "subtitle")
    page = page_height(sum(widths))
    row, left_on_page = 3, page - _TITLE_HEIGHT - LINE_HEIGHT
    for each, parts in zip(stack, fitted, strict=True):
        lines = _Lines(sheet, each, parts, widths)
        heights = lines.heights()
        if left_on_page < sum(heights[: 1 + _KEPT_TOGETHER]):
            sheet.row_breaks.append(Break(id=row - 1))
            left_on_page = page
        first_row = row + _ROWS_ABOVE
        row = lines.put(row)
        left_on_page -= heights[0]
        for i, height in enumerate(heights[1:]):
            # Broken here and not where a program runs out of page, or what follows would be placed by a wrong count.
            if left_on_page < height:
                sheet.row_breaks.append(Break(id=first_row + i - 1))
                left_on_page = page
            left_on_page -= height
    sheet.print_area = f"A1:{get_column_letter(len(widths))}{row - 1}"
    sheet.sheet_view.showGridLines = False
    set_up_page(sheet, facts)


def _grid(stack: Sequence[Stacked], fitted: Sequence[Fitted]) -> list[float]:
    """Widths of the grid: what the columns need that cover one of its columns alone."""
    n_columns = max(each.places()[-1][1] for each in stack)
    widths = [6.0] * n_columns
    for each, parts in zip(stack, fitted, strict=True):
        for (first, last), width in zip(each.places(), parts.widths, strict=True):
            if first == last:
                widths[first - 1] = max(widths[first - 1], width)
    return widths


class _Lines:
    """One table of the stack as it is written: air, section title, headings, rows."""

    def __init__(self, sheet: Worksheet, stacked: Stacked, fitted: Fitted, grid: Sequence[float]) -> None:
        self._sheet, self._table, self._fitted = sheet, stacked.table, fitted
        self._places = stacked.places()
        self._n_columns = len(grid)
        self._widths = [sum(grid[first - 1 : last]) for first, last in self._places]
        self._heading_lines = max(
            len(heading_lines(header, width, indent(column)))
            for header, width, column in zip(fitted.headers, self._widths, self._table.columns, strict=True)
        )

    def heights(self) -> list[float]:
        """Points: of everything above the first row, then of each row."""
        above = LINE_HEIGHT + _SECTION_HEIGHT
        n_rows = len(self._table.frame)
        if not n_rows:
            return [above, LINE_HEIGHT]
        columns = zip(self._table.columns, self._fitted.values, self._widths, strict=True)
        prose = [(values, width) for column, values, width in columns if column.kind is Kind.PROSE]
        rows = prose_heights(prose, n_rows) if prose else [LINE_HEIGHT + 1.0] * n_rows
        return [above + heading_height(self._heading_lines, filtered=False), *rows]

    def put(self, row: int) -> int:
        """Write from ``row`` on; returns the next row."""
        sheet, table = self._sheet, self._table
        for i in range(1, self._n_columns + 1):
            put_text(sheet, row + 1, i, table.heading if i == 1 else "", "section")
        sheet.row_dimensions[row + 1].height = _SECTION_HEIGHT
        row += 2
        if not len(table.frame):
            put_text(sheet, row, 1, table.empty, "note")
            return row + 1
        for i, (column, header) in enumerate(zip(table.columns, self._fitted.headers, strict=True)):
            self._cell(row, i, header, "heading number" if column.kind.numeric else "heading")
        sheet.row_dimensions[row].height = heading_height(self._heading_lines, filtered=False)
        for j, (mark, height) in enumerate(zip(table.marks, self.heights()[1:], strict=True), 1):
            sheet.row_dimensions[row + j].height = height
            for i, column in enumerate(table.columns):
                self._value(row + j, i, column, self._fitted.values[i][j - 1], mark)
        return row + len(table.frame) + 1

    def _value(self, row: int, i: int, column: Column, value: Any, mark: Mark) -> None:
        style = body_style(workbook_of(self._sheet), column.kind, self._fitted.decimals[i], mark, "top")
        if isinstance(value, str) or value is None:
            self._cell(row, i, value or "", style)
            return
        self._cell(row, i, "", style)
        if isinstance(value, date):
            self._sheet.cell(row, self._places[i][0]).value = value
        else:
            put_number(self._sheet, row, self._places[i][0], value, column.kind, self._fitted.decimals[i], mark)
            self._sheet.cell(row, self._places[i][0]).style = style

    def _cell(self, row: int, i: int, text: str, style: str) -> None:
        first, last = self._places[i]
        for column in range(first, last + 1):
            put_text(self._sheet, row, column, text if column == first else "", style)
        if last > first:
            self._sheet.merge_cells(start_row=row, end_row=row, start_column=first, end_column=last)
