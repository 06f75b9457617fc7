"""Where things go on the summary: two blocks of six columns, packed on landscape A4 so that nothing is cut in two.

A heading covers two rows of the usual height, so that tables side by side need not begin in the same row.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

from pricer.report.cells import put_number, put_text, workbook_of
from pricer.report.columns import Kind
from pricer.report.page import page_height
from pricer.report.styles import body_style, decimals_for
from pricer.report.text import shorten
from pricer.report.top import Line

if TYPE_CHECKING:
    from openpyxl.worksheet.worksheet import Worksheet

LEFT, RIGHT = 2, 9  # first columns of the two blocks
LAST = 14
THIRDS = ((2, 4), (6, 4), (10, 5))  # first column and columns of three charts about equally wide
HALVES = ((LEFT, 6), (RIGHT, 6))
_BLOCK = (29.0, 9.0, 11.5, 17.0, 17.0, 16.5)
_NAME_LENGTH = 34  # characters that the first column of a block holds
N_COLUMNS = len(_BLOCK)
_WIDTHS = (1.5, *_BLOCK, 3.0, *_BLOCK)
ROW_HEIGHT = 14.0  # points
_PAGE_HEIGHT = page_height(sum(_WIDTHS))
_CHART_ROWS = (13, 34)  # fewest and most rows of a chart
_ABOVE_LINES = 3  # rows of a table's title and heading


@dataclass(frozen=True, slots=True)
class BlockTable:
    """A small table: six headings, five kinds of number and its lines."""

    title: str
    headings: tuple[str, str, str, str, str, str]
    kinds: tuple[Kind, Kind, Kind, Kind, Kind]
    lines: Sequence[Line]
    empty: str
    decimals: int | None = None  # of the last two columns; chosen by their size if None

    @property
    def n_rows(self) -> int:
        """Rows with title, heading and the row of air below."""
        return _ABOVE_LINES + max(1, len(self.lines)) + 1


class Canvas:
    """A sheet filled from top to bottom; knows how much of the current page is left."""

    def __init__(self, sheet: Worksheet) -> None:
        from openpyxl.utils import get_column_letter

        self.sheet = sheet
        self.row = 1
        self._left_on_page = _PAGE_HEIGHT
        for i, width in enumerate(_WIDTHS, 1):
            sheet.column_dimensions[get_column_letter(i)].width = width

    def reserve(self, height: float) -> None:
        """Begin a new page unless ``height`` points are left on this one."""
        if height > self._left_on_page and self.row > 1:
            self._begin_page()

    def _begin_page(self) -> None:
        from openpyxl.worksheet.pagebreak import Break

        self.sheet.row_breaks.append(Break(id=self.row - 1))
        self._left_on_page = _PAGE_HEIGHT

    def chart_rows(self) -> int:
        """Rows for a chart on the rest of the page, or on a new page if too little is left; see ``take_rows``."""
        self.reserve((_CHART_ROWS[0] + 2) * ROW_HEIGHT)  # with its title and a row of air
        return min(_CHART_ROWS[1], self._rows_left() - 2)

    def _rows_left(self) -> int:
        return int(self._left_on_page / ROW_HEIGHT)

    def take(self, height: float = ROW_HEIGHT) -> int:
        """The next row, made ``height`` points high."""
        row = self.row
        self.sheet.row_dimensions[row].height = height
        self._left_on_page -= height
        self.row += 1
        return row

    def take_rows(self, n_rows: int) -> int:
        """The first of ``n_rows`` rows of the usual height."""
        first = self.row
        for _ in range(n_rows):
            self.take()
        return first

    def section(self, row: int, column: int, title: str, n_columns: int = N_COLUMNS) -> None:
        """A section's title and the rule under it."""
        for i in range(n_columns):
            put_text(self.sheet, row, column + i, title if i == 0 else "", "section")

    def stacks(self, left: Sequence[BlockTable], right: Sequence[BlockTable]) -> dict[str, int]:
        """Two stacks of tables side by side, on new pages as needed; returns the first row of each table's lines."""
        first_lines: dict[str, int] = {}
        waiting = {LEFT: list(left), RIGHT: list(right)}
        self.reserve(ROW_HEIGHT * max(tables[0].n_rows for tables in waiting.values()))
        while True:
            room, used = self._rows_left(), 0
            for column, tables in waiting.items():
                taken = 0
                while tables and (taken + tables[0].n_rows <= room or not taken):
                    self.put(tables[0], self.row + taken, column)
                    first_lines[tables[0].title] = self.row + taken + _ABOVE_LINES
                    taken += tables.pop(0).n_rows
                used = max(used, taken)
            self.take_rows(used)
            if not any(waiting.values()):
                return first_lines
            self._begin_page()

    def put(self, table: BlockTable, row: int, column: int) -> None:
        """Write a table into rows that are taken for it."""
        self.section(row, column, table.title)
        if not table.lines:
            put_text(self.sheet, row + 1, column, table.empty, "note")
            return
        decimals = _decimals(table)
        for i, heading in enumerate(table.headings):
            for below in (1, 2):
                text, style = heading if below == 1 else "", "heading number" if i else "heading"
                put_text(self.sheet, row + below, column + i, text, style)
            self.sheet.merge_cells(start_row=row + 1, end_row=row + 2, start_column=column + i, end_column=column + i)
        for j, line in enumerate(table.lines):
            style = body_style(workbook_of(self.sheet), Kind.STATUS, mark=line.mark)
            put_text(self.sheet, row + _ABOVE_LINES + j, column, shorten(line.name, _NAME_LENGTH), style)
            for i, (number, kind) in enumerate(zip(line.numbers, table.kinds, strict=True)):
                put_number(self.sheet, row + _ABOVE_LINES + j, column + 1 + i, number, kind, decimals[i], line.mark)


def _decimals(table: BlockTable) -> list[int]:
    """Decimals per column; the last column is the standard error of the one before it."""
    columns = list(zip(*(line.numbers for line in table.lines), strict=True))
    own = [decimals_for(column) for column in columns]
    shared = decimals_for(columns[-2], columns[-1]) if table.decimals is None else table.decimals
    return [*own[:-2], shared, shared]
