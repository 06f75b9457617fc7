"""Tables written as a workbook or as a folder of .csv files, such that the reader gets back what was written."""

from __future__ import annotations

import csv
import re
from collections.abc import Mapping, Sequence
from datetime import date
from pathlib import Path
from typing import TYPE_CHECKING

from pricer.loader.csv_folder import guarded
from pricer.loader.faults import number_in_words
from pricer.loader.schema import BOOK, MARKET

if TYPE_CHECKING:
    from openpyxl.cell.cell import Cell

#: Table name -> rows, each a mapping from column to value. None, or no entry, is a blank cell.
Tables = Mapping[str, Sequence[Mapping[str, object]]]

#: Text that a reader of workbooks would take for an escaped character.
_LOOKS_ESCAPED = re.compile(r"_(?=x[0-9A-Fa-f]{4}_)")


def write_tables(tables: Tables, path: str | Path) -> None:
    """Write a workbook if ``path`` ends in .xlsx, else a folder with one .csv file a table.

    Known columns come in their usual order, others after them. Text is always written as
    text: a name that begins with ``=`` is never a formula.
    """
    path = Path(path)
    if path.suffix.lower() == ".xlsx":
        path.parent.mkdir(parents=True, exist_ok=True)
        _write_workbook(tables, path)
        return
    path.mkdir(parents=True, exist_ok=True)
    for name, rows in tables.items():
        columns = column_order(name, rows)
        with (path / f"{name}.csv").open("w", encoding="utf-8", newline="") as stream:
            writer = csv.writer(stream, lineterminator="\n")
            writer.writerow(columns)
            writer.writerows([_csv_text(row.get(column)) for column in columns] for row in rows)


def column_order(table: str, rows: Sequence[Mapping[str, object]]) -> list[str]:
    """The columns of a table as written: the known ones, without rare ones that no row has, then whatever else is."""
    schema = {**BOOK, **MARKET}.get(table)
    known = {} if schema is None else dict.fromkeys(schema.columns)
    if schema is not None and schema.rare:
        filled = {column for row in rows for column, value in row.items() if value is not None and value != ""}
        known = {column: None for column in known if column not in schema.rare or column in filled}
    given = dict.fromkeys(column for row in rows for column in row)
    rare = frozenset() if schema is None else schema.rare
    return [*known, *(column for column in given if column not in known and column not in rare)]


def _write_workbook(tables: Tables, path: Path) -> None:
    from openpyxl import Workbook
    from openpyxl.cell import WriteOnlyCell

    workbook = Workbook(write_only=True)
    for name, rows in tables.items():
        sheet = workbook.create_sheet(name)
        sheet.freeze_panes = "A2"
        columns = column_order(name, rows)
        for row in ({column: column for column in columns}, *rows):
            sheet.append([_filled(WriteOnlyCell(sheet), row.get(column)) for column in columns])
    workbook.save(path)


def _filled(cell: Cell, value: object) -> Cell | None:
    if value is None or value == "":
        return None
    fill_cell(cell, value)
    return cell


def fill_cell(cell: Cell, value: object) -> None:
    """Put exactly ``value`` into a cell: text stays text, a number keeps its last digit, a date is a date."""
    if isinstance(value, bool) or value is None:
        cell.value = value
    elif isinstance(value, date):
        cell.value = value
        cell.number_format = "yyyy-mm-dd"
    elif isinstance(value, int | float):
        # The library would round to 16 digits; the shortest text that reads back the same needs up to 17.
        cell.value = number_in_words(float(value))
        cell.data_type = "n"
    else:
        cell.value = _LOOKS_ESCAPED.sub("_x005F_", str(value))
        cell.data_type = "s"


def _csv_text(value: object) -> str:
    if value is None:
        return ""
    if isinstance(value, bool | int | date):
        return str(value)
    return number_in_words(value) if isinstance(value, float) else guarded(str(value))
