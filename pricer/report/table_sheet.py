"""One table on a sheet of its own: heading, frozen panes, filter, fitted widths, print set-up."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from pricer.report.bulk import Bulk, BulkColumn
from pricer.report.cells import put_text
from pricer.report.columns import Column, Kind
from pricer.report.fitting import LINE_HEIGHT, Table, fit, heading_height, prose_heights
from pricer.report.page import set_up_page
from pricer.report.styles import Mark, body_style
from pricer.report.text import looks_like_formula

if TYPE_CHECKING:
    from openpyxl import Workbook

    from pricer.run.outcome import RunFacts

HEADING_ROW = 4
_FIRST_ROW = HEADING_ROW + 1


def add_table_sheet(workbook: Workbook, table: Table, facts: RunFacts) -> Bulk | None:
    """Add the sheet without its rows; return them, to be poured in when the workbook is saved."""
    from openpyxl.utils import get_column_letter

    sheet = workbook.create_sheet(table.title)
    letters = [get_column_letter(i) for i in range(1, len(table.columns) + 1)]
    put_text(sheet, 1, 1, table.heading, "title")
    put_text(sheet, 2, 1, table.note, "subtitle")
    fitted = fit(table, facts.reporting_currency)
    for i, (letter, column) in enumerate(zip(letters, table.columns, strict=True)):
        style = "heading number" if column.kind.numeric else "heading"
        put_text(sheet, HEADING_ROW, i + 1, fitted.headers[i], style)
        sheet.column_dimensions[letter].width = fitted.widths[i]
    sheet.row_dimensions[HEADING_ROW].height = heading_height(fitted.heading_lines)
    sheet.sheet_format.defaultRowHeight = LINE_HEIGHT
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
    prose = [
        (values, width)
        for column, values, width in zip(table.columns, fitted.values, fitted.widths, strict=True)
        if column.kind is Kind.PROSE
    ]
    vertical = "top" if prose else "center"
    parts = zip(letters, table.columns, fitted.values, fitted.decimals, strict=True)
    return Bulk(
        _FIRST_ROW,
        tuple(
            BulkColumn(letter, values, _style_indices(workbook, column, decimals, marks, values, vertical))
            for letter, column, values, decimals in parts
        ),
        heights=prose_heights(prose, n_rows) if prose else (),
    )


def _style_indices(
    workbook: Workbook, column: Column, decimals: int, marks: Sequence[Mark], values: Sequence[object], vertical: str
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
