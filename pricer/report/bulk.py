"""Large tables written straight as SpreadsheetML, several times faster than cell by cell.

openpyxl lays out every sheet (headings, widths, styles, print set-up) and saves it without the table's rows; the rows
are then poured into the sheet's ``sheetData`` element while the package is copied to its place. Element and
attribute names: ECMA-376, part 1, 18.3.1.73 (row), 18.3.1.4 (c), 18.3.1.96 (v), 18.3.1.53 (is).
"""

from __future__ import annotations

import io
import math
import re
import zipfile
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import date
from pathlib import Path
from typing import TYPE_CHECKING, Any
from xml.sax.saxutils import escape

from pricer.report.text import clean

if TYPE_CHECKING:
    from openpyxl import Workbook

_DIMENSION = re.compile(r'(<dimension ref="A1)[^"]*(")')
_END_OF_ROWS = "</sheetData>"
_DAY_ZERO = date(1899, 12, 30)  # serial numbers count days from here, right from March 1900 on
_LONGEST_TEXT = 32_767  # what one cell can hold


@dataclass(frozen=True, slots=True)
class BulkColumn:
    """One column of values: None, text, a number or a date each; ``styles`` are the cells' indices into the styles."""

    letter: str
    values: Sequence[Any]
    styles: Sequence[int]


@dataclass(frozen=True, slots=True)
class Bulk:
    """Rows to be poured into a sheet from ``first_row`` on; all columns are equally long.

    ``heights`` are the rows' heights in points; without them the rows have the usual height.
    """

    first_row: int
    columns: tuple[BulkColumn, ...]
    heights: Sequence[float] = ()

    def xml(self) -> str:
        """The rows as ``row`` elements."""
        n_rows = len(self.columns[0].values)
        numbers = range(self.first_row, self.first_row + n_rows)
        cells = zip(*(_cells(column, numbers) for column in self.columns), strict=True)
        heights = [f' ht="{height}" customHeight="1"' for height in self.heights] or [""] * n_rows
        return "".join(
            f'<row r="{r}"{height}>{"".join(row)}</row>' for r, height, row in zip(numbers, heights, cells, strict=True)
        )

    def last_cell(self) -> str:
        """The reference of the last cell, such as ``M1004``."""
        return f"{self.columns[-1].letter}{self.first_row + len(self.columns[0].values) - 1}"


def save_with_bulk(workbook: Workbook, bulks: Mapping[str, Bulk], target: Path) -> None:
    """Save ``workbook`` at ``target`` with the rows of ``bulks`` (by sheet title) at the end of their sheets."""
    laid_out = io.BytesIO()
    workbook.save(laid_out)
    by_path = {workbook[title].path.lstrip("/"): bulk for title, bulk in bulks.items()}
    with zipfile.ZipFile(laid_out) as source, zipfile.ZipFile(target, "w", zipfile.ZIP_DEFLATED) as package:
        for name in source.namelist():
            content = source.read(name)
            if name in by_path:
                content = _poured(content.decode("utf-8"), by_path.pop(name)).encode("utf-8")
            package.writestr(name, content)
    if by_path:
        raise RuntimeError(f"the workbook has no part {', '.join(by_path)}")


def _poured(sheet: str, bulk: Bulk) -> str:
    head, end, tail = sheet.partition(_END_OF_ROWS)
    if not end:
        raise RuntimeError("a sheet that takes rows must have a heading row")
    head = _DIMENSION.sub(rf"\g<1>:{bulk.last_cell()}\g<2>", head, count=1)
    return head + bulk.xml() + end + tail


def _cells(column: BulkColumn, rows: range) -> list[str]:
    letter = column.letter
    return [
        f'<c r="{letter}{r}" s="{style}"{_content(value)}'
        for r, value, style in zip(rows, column.values, column.styles, strict=True)
    ]


def _content(value: Any) -> str:
    """The rest of a ``c`` element. Text is always an inline string, so it can never be read as a formula."""
    if type(value) is float and math.isfinite(value):
        return f"><v>{value!r}</v></c>"
    if value is None or value == "":
        return "/>"
    if isinstance(value, date):
        return f"><v>{(value - _DAY_ZERO).days}</v></c>"
    if isinstance(value, int):
        return f"><v>{value}</v></c>"
    # A cell cannot hold an infinity; it is shown as a word rather than left out.
    text = escape(clean(str(value))[:_LONGEST_TEXT])
    return f' t="inlineStr"><is><t xml:space="preserve">{text}</t></is></c>'
