"""Empty workbooks that explain themselves, written from the same row models that the reader uses."""

from __future__ import annotations

import os
from collections.abc import Mapping, Sequence
from datetime import date
from pathlib import Path
from typing import TYPE_CHECKING

from openpyxl import Workbook
from openpyxl.cell.cell import MergedCell
from openpyxl.comments import Comment
from openpyxl.styles import Alignment, Font, PatternFill
from openpyxl.worksheet.datavalidation import DataValidation
from openpyxl.worksheet.properties import PageSetupProperties

from pricer.loader.columns import Column
from pricer.loader.contract_examples import WHOLE_BOOK
from pricer.loader.days import FIRST_DATE, LAST_DATE, Day
from pricer.loader.examples import EXAMPLE_MARKET, EXAMPLE_PRICE_HISTORY
from pricer.loader.names import Choice, Currency, FreeText, Identifier
from pricer.loader.schema import BOOK, MARKET, TableSchema
from pricer.loader.sheets import letters
from pricer.loader.write import Tables, column_order, fill_cell

if TYPE_CHECKING:
    from openpyxl.worksheet.worksheet import Worksheet

#: Rows that get drop-down lists and formats: more than a desk's book has.
PREPARED_ROWS = 20_000

_TITLE = Font(bold=True, size=14)
_BOLD = Font(bold=True)
_NEEDED = PatternFill("solid", start_color="FFD3E1EF")
_OPTIONAL = PatternFill("solid", start_color="FFF6F6F2")
_TEXT, _DATE = "@", "yyyy-mm-dd"

_RULES = (
    "Fill in one sheet per table; row 1 holds the column names. Point at a name to read its note.",
    "Columns are found by name: their order is free, and optional ones may be deleted.",
    "Column names on blue need a value in every row, the others only where their note says so.",
    "Columns that end in _decimal, weights and performances are decimals: 0.225 means 22.5 %.",
    "Sheets whose note below says so may be left empty, or deleted.",
    "Dates are date cells, or text such as 2026-09-18.",
    "The sheets read me and examples are never read. Copy rows from examples and change them.",
    "The same tables may be given as a folder of .csv files (UTF-8, decimal points) named after the sheets.",
)


def write_templates(folder: str | Path) -> tuple[Path, ...]:
    """Write ``book.xlsx`` and ``market.xlsx`` into ``folder``, which is made if needed; return their paths.

    Raises FileExistsError, and writes neither, when one of them is there: it may be filled in.
    """
    folder = Path(folder)
    parts = {
        folder / "book.xlsx": ("A book of multi-asset options", BOOK, WHOLE_BOOK),
        folder / "market.xlsx": ("A market snapshot", MARKET, {**EXAMPLE_MARKET, **EXAMPLE_PRICE_HISTORY}),
    }
    for path in parts:
        if os.path.lexists(path):
            raise FileExistsError(
                f"{path} exists and may be filled in, so no template is written over it. Name another folder, or move "
                "the file away."
            )
    folder.mkdir(parents=True, exist_ok=True)
    for path, (title, tables, rows) in parts.items():
        _template(title, tables, rows).save(path)
    return tuple(parts)


def _template(title: str, tables: Mapping[str, TableSchema], rows: Tables) -> Workbook:
    workbook = Workbook()
    workbook.remove(workbook.worksheets[0])
    _read_me(workbook.create_sheet("read me"), title, tables)
    for name, table in tables.items():
        _empty_table(workbook.create_sheet(name), table.columns)
    _examples(workbook.create_sheet("examples"), tables, rows)
    for sheet in workbook.worksheets:
        sheet.page_setup.orientation = "landscape"
        sheet.sheet_properties.pageSetUpPr = PageSetupProperties(fitToPage=True)
        sheet.page_setup.fitToHeight = 0
    workbook.active = workbook.worksheets[1]
    return workbook


def _read_me(sheet: Worksheet, title: str, tables: Mapping[str, TableSchema]) -> None:
    sheet.append([title])
    sheet["A1"].font = _TITLE
    for rule in _RULES:
        sheet.append([None, rule])
    sheet.append([])
    for name, table in tables.items():
        sheet.append([name, table.purpose])
        sheet.cell(sheet.max_row, 1).font = _BOLD
    sheet.column_dimensions["A"].width = 16
    sheet.column_dimensions["B"].width = 110
    for row in sheet.iter_rows(min_col=2, max_col=2):
        row[0].alignment = Alignment(wrap_text=True, vertical="top")


def _empty_table(sheet: Worksheet, columns: Mapping[str, Column]) -> None:
    _header(sheet, 1, columns)
    sheet.freeze_panes = "B2"
    for position, (name, column) in enumerate(columns.items(), start=1):
        letter = letters(position)
        sheet.cell(1, position).comment = _note(name, column)
        dimension = sheet.column_dimensions[letter]
        dimension.width = max(len(name), len(column.example)) + 3
        dimension.number_format = _format(column)
        validation = _validation(column)
        if validation is not None:
            sheet.add_data_validation(validation)
            validation.add(f"{letter}2:{letter}{PREPARED_ROWS}")


def _header(sheet: Worksheet, row: int, columns: Mapping[str, Column]) -> None:
    for position, (name, column) in enumerate(columns.items(), start=1):
        cell = sheet.cell(row, position, name)
        cell.font = _BOLD
        cell.fill = _NEEDED if column.is_required else _OPTIONAL


def _note(name: str, column: Column) -> Comment:
    """The column's note: meaning, unit, whether it is needed, what is allowed, an example."""
    lines = [describe(column)]
    if column.is_required:
        lines.append("Needed in every row.")
    elif column.blank_words:
        lines.append(f"Leave blank {column.blank_words}.")
    lines += [f"Allowed: {column.kind.words()}.", f"Example: {column.example}"]
    text = "\n".join(lines)
    return Comment(text, "template", width=340, height=40 + 18 * sum(1 + len(line) // 52 for line in lines))


def describe(column: Column) -> str:
    """What a column holds, as a sentence."""
    unit = f", {column.unit}" if column.unit else ""
    return f"{column.meaning[0].upper()}{column.meaning[1:]}{unit}."


def _format(column: Column) -> str:
    # Text format keeps a spreadsheet program from turning names such as MAR-1 into dates.
    if isinstance(column.kind, Day):
        return _DATE
    return _TEXT if isinstance(column.kind, Identifier | FreeText | Currency) else "General"


def _validation(column: Column) -> DataValidation | None:
    choices: Sequence[str] = getattr(column.kind, "choices", ())
    if choices:
        strict = isinstance(column.kind, Choice)  # calendars may be joined, so their list is only a help
        validation = DataValidation(
            type="list", formula1=f'"{",".join(choices)}"', allow_blank=True, showErrorMessage=True
        )
        validation.errorStyle = "stop" if strict else "information"
        validation.error = f"Expected {column.kind.words()}"[:250]
        return validation
    if isinstance(column.kind, Day):
        validation = DataValidation(
            type="date",
            operator="between",
            formula1=str(_serial(FIRST_DATE)),
            formula2=str(_serial(LAST_DATE)),
            allow_blank=True,
            showErrorMessage=True,
        )
        validation.error = "Expected a date"
        return validation
    return None


def _serial(day: date) -> int:
    return (day - date(1899, 12, 30)).days


def _examples(sheet: Worksheet, tables: Mapping[str, TableSchema], rows: Tables) -> None:
    """One block per table: its name, its header, its rows, a blank row."""
    sheet.append(["Never read. Copy rows into the sheet of the same name, and change them."])
    row = 3
    for name, table in tables.items():
        sheet.cell(row, 1, name).font = _TITLE
        names = column_order(name, rows[name])
        _header(sheet, row + 1, {n: table.columns.get(n, next(iter(table.columns.values()))) for n in names})
        for offset, values in enumerate(rows[name], start=2):
            for position, column in enumerate(names, start=1):
                cell = sheet.cell(row + offset, position)
                if not isinstance(cell, MergedCell):
                    fill_cell(cell, values.get(column))
        row += len(rows[name]) + 3
    for position in range(1, sheet.max_column + 1):
        sheet.column_dimensions[letters(position)].width = 18
