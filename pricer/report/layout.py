"""Where things go on the summary: two blocks of six columns, packed on landscape A4 so that nothing is cut in two."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

from pricer.report.cells import put_number, put_text, workbook_of
from pricer.report.columns import Kind
from pricer.report.page import BOTTOM, PAPER_HEIGHT, PAPER_WIDTH, SIDE, TOP
from pricer.report.styles import body_style, decimals_for
from pricer.report.top import Line

if TYPE_CHECKING:
    from openpyxl.worksheet.worksheet import Worksheet

LEFT, RIGHT = 2, 9  # first columns of the two blocks
LAST = 14
_BLOCK = (27.0, 10.0, 12.0, 17.0, 17.0, 15.0)
N_COLUMNS = len(_BLOCK)
_WIDTHS = (1.5, *_BLOCK, 3.0, *_BLOCK)
ROW_HEIGHT = 14.0  # points
HEADING_HEIGHT = 28.0
_POINTS_PER_MM = 72.0 / 25.4
# A character is 7 pixels wide, 96 pixels to the inch. Where columns come out wider the scale is smaller, and more fits.
_SCALE = (PAPER_WIDTH - 2.0 * SIDE) / (sum(_WIDTHS) * 7.0 / 96.0 * 25.4)
_PAGE_HEIGHT = 0.97 * (PAPER_HEIGHT - TOP - BOTTOM) * _POINTS_PER_MM / _SCALE
_CHART_ROWS = (13, 24)  # fewest and most rows of a chart


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
    def height(self) -> float:
        """Height in points, with the row of air below it."""
        return HEADING_HEIGHT + ROW_HEIGHT * (2 + max(1, len(self.lines)))

    @property
    def n_rows(self) -> int:
        return 3 + max(1, len(self.lines))


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
        from openpyxl.worksheet.pagebreak import Break

        if height > self._left_on_page and self.row > 1:
            self.sheet.row_breaks.append(Break(id=self.row - 1))
            self._left_on_page = _PAGE_HEIGHT

    def chart_rows(self) -> int:
        """Rows for a chart on the rest of the page, or on a new page if too little is left; see ``take_rows``."""
        self.reserve(self.least_chart_height)
        return min(_CHART_ROWS[1], int(self._left_on_page / ROW_HEIGHT) - 2)

    @property
    def least_chart_height(self) -> float:
        """Points that the smallest chart needs, with its title and a row of air."""
        return (_CHART_ROWS[0] + 2) * ROW_HEIGHT

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

    def tables(self, left: BlockTable, right: BlockTable) -> int:
        """Two tables side by side; returns the first row of their lines."""
        self.reserve(max(left.height, right.height))
        first = self.row
        self.take()
        self.take(HEADING_HEIGHT)
        self.take_rows(max(left.n_rows, right.n_rows) - 2)
        for table, column in ((left, LEFT), (right, RIGHT)):
            self.put(table, first, column)
        return first + 2

    def put(self, table: BlockTable, row: int, column: int) -> None:
        """Write a table whose rows have been taken."""
        self.section(row, column, table.title)
        if not table.lines:
            put_text(self.sheet, row + 1, column, table.empty, "note")
            return
        decimals = _decimals(table)
        for i, heading in enumerate(table.headings):
            put_text(self.sheet, row + 1, column + i, heading, "heading number" if i else "heading")
        for j, line in enumerate(table.lines):
            style = body_style(workbook_of(self.sheet), Kind.STATUS, mark=line.mark)
            put_text(self.sheet, row + 2 + j, column, line.name, style)
            for i, (number, kind) in enumerate(zip(line.numbers, table.kinds, strict=True)):
                put_number(self.sheet, row + 2 + j, column + 1 + i, number, kind, decimals[i], line.mark)


def _decimals(table: BlockTable) -> list[int]:
    """Decimals per column; the last column is the standard error of the one before it."""
    columns = list(zip(*(line.numbers for line in table.lines), strict=True))
    own = [decimals_for(column) for column in columns]
    shared = decimals_for(columns[-2], columns[-1]) if table.decimals is None else table.decimals
    return [*own[:-2], shared, shared]
