"""Writing single cells on the sheets that are not tables."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, cast

from pricer.report.columns import Kind
from pricer.report.styles import Mark, body_style
from pricer.report.text import clean, looks_like_formula

if TYPE_CHECKING:
    from openpyxl import Workbook
    from openpyxl.cell.cell import Cell
    from openpyxl.worksheet.worksheet import Worksheet


def put_text(sheet: Worksheet, row: int, column: int, text: str, style: str = "label") -> Cell:
    """A text cell: never a formula, whatever it begins with, nor made one by editing. An empty text leaves a blank."""
    cell = cast("Cell", sheet.cell(row, column))
    if text:
        cell.value = clean(text)
        cell.data_type = "s"
    cell.style = style
    if looks_like_formula(text):
        cell.quotePrefix = True
    return cell


def put_number(
    sheet: Worksheet, row: int, column: int, number: float, kind: Kind, decimals: int = 0, mark: Mark = Mark.NONE
) -> Cell:
    """A number, or a styled blank where there is none."""
    cell = cast("Cell", sheet.cell(row, column))
    if math.isfinite(number):
        cell.value = number
    cell.style = body_style(workbook_of(sheet), kind, decimals, mark)
    return cell


def workbook_of(sheet: Worksheet) -> Workbook:
    """The workbook that the sheet belongs to."""
    return cast("Workbook", sheet.parent)
