"""From a sheet to validated rows, with every problem of every row told at its cell."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Generic, TypeVar

from pydantic import ValidationError

from pricer.core.issues import Issue, Severity
from pricer.core.source import Place
from pricer.loader.columns import Column, TableRow, columns_of
from pricer.loader.faults import Fault, Reading, in_words, unwanted
from pricer.loader.headers import Header
from pricer.loader.sheets import Cell, Sheet, is_blank, letters

R = TypeVar("R", bound=TableRow)

#: Stands for a cell that could not be read.
UNREAD: Any = object()


@dataclass(frozen=True, slots=True)
class Row(Generic[R]):
    """A row as it was read: ``value`` is None when something in it was refused."""

    number: int
    value: R | None
    readable: Mapping[str, object]  # what could be read of a refused row
    issues: tuple[Issue, ...]

    def get(self, column: str) -> Any:
        """The value in ``column``; :data:`UNREAD` where it could not be read."""
        return getattr(self.value, column) if self.value is not None else self.readable.get(column, UNREAD)

    @property
    def is_refused(self) -> bool:
        return self.value is None


@dataclass(frozen=True, slots=True)
class Table(Generic[R]):
    """A table's rows and where they stand."""

    sheet: Sheet
    header: Header
    rows: Sequence[Row[R]]

    def place(self, row: int, column: str) -> Place | None:
        """The cell of a column in a row; None if the table lacks the column."""
        position = self.header.positions.get(column)
        if position is None:
            return None
        return Place(self.sheet.file, self.sheet.name, row, column, f"{letters(position + 1)}{row}")

    def issue(self, row: int, column: str | None, fault: Fault, severity: Severity = Severity.ERROR) -> Issue:
        """The fault as an issue at its cell."""
        return _issue(self.sheet, self.header, row, column, fault, severity)


def read_table(sheet: Sheet, header: Header, model: type[R] | Callable[[Cell], type[R]], *, by: str = "") -> Table[R]:
    """Read every row below the header.

    ``model`` is the row model, or a function that chooses it from the cell in column ``by``.
    """
    merged = _merged_rows(sheet, header)
    rows: list[Row[R]] = []
    reading = Reading(sheet.typed)
    for number, cells in sheet.rows[1:]:
        named = header.named_cells(cells)
        chosen: type[R] = model if isinstance(model, type) else model(named.get(by))
        columns = columns_of(chosen)
        own = {name: named.get(name) for name in columns}
        misfit = [*merged.get(number, ()), *_width_faults(sheet, header, cells)]
        misfit += [
            (name, unwanted(in_words(cell), "another product", by))
            for name, cell in named.items()
            if name not in columns and not is_blank(cell)
        ]
        rows.append(_read_row(sheet, header, number, own, chosen, reading, misfit))
    return Table(sheet, header, rows)


def _read_row(
    sheet: Sheet,
    header: Header,
    number: int,
    cells: dict[str, Cell],
    model: type[R],
    reading: Reading,
    misfit: Sequence[tuple[str | None, Fault]],
) -> Row[R]:
    reading.notes.clear()
    value: R | None = None
    faults = list(misfit)
    try:
        value = model.model_validate(cells, context=reading)
    except ValidationError as error:
        faults.extend(_faults(error, cells))
    if not faults and not reading.notes:
        return Row(number, value, {}, ())
    columns = columns_of(model)

    def issues(found: Iterable[tuple[str | None, Fault]], severity: Severity) -> list[Issue]:
        return [
            _issue(sheet, header, number, name, columns[name].completed(fault) if name in columns else fault, severity)
            for name, fault in found
        ]

    told = (*issues(faults, Severity.ERROR), *issues(reading.notes, Severity.WARNING))
    if faults:
        return Row(number, None, _readable(cells, columns, sheet.typed), told)
    return Row(number, value, {}, told)


def _faults(error: ValidationError, cells: Mapping[str, Cell]) -> list[tuple[str | None, Fault]]:
    """Column and fault of everything that the model refused."""
    out: list[tuple[str | None, Fault]] = []
    for item in error.errors(include_url=False, include_input=False):
        name = str(item["loc"][0]) if item["loc"] else None
        fault = item.get("ctx", {}).get("error")
        if not isinstance(fault, Fault):
            fault = Fault("invalid-value", in_words(cells[name]) if name else "the row", item["msg"])
        out.append((name, fault))
    return out


def _readable(cells: Mapping[str, Cell], columns: Mapping[str, Column], typed: bool) -> dict[str, object]:
    out: dict[str, object] = {}
    for name, cell in cells.items():
        try:
            out[name] = columns[name].read(cell, Reading(typed))
        except Fault:
            continue
    return out


def _merged_rows(sheet: Sheet, header: Header) -> dict[int, list[tuple[str | None, Fault]]]:
    """The faults of rows that a merged range reaches into: only its first cell holds a value."""
    out: dict[int, list[tuple[str | None, Fault]]] = {}
    for merged in sheet.merged:
        touched = [name for name, i in header.positions.items() if merged.first_column <= i + 1 <= merged.last_column]
        if not touched:
            continue
        fault = Fault(
            "merged-cells",
            f"the merged cells {merged.text}",
            "one value in each cell",
            "Unmerge them and fill in every cell.",
        )
        last = min(merged.last_row, sheet.rows[-1][0])
        for row in range(max(merged.first_row, header.row + 1), last + 1):
            out.setdefault(row, []).append((touched[0], fault))
    return out


def _width_faults(sheet: Sheet, header: Header, cells: Sequence[Cell]) -> list[tuple[str | None, Fault]]:
    """In a .csv file, a row of another width than the header has lost or gained a cell somewhere."""
    if sheet.typed or len(cells) == header.width:
        return []
    if len(cells) > header.width and all(is_blank(cell) for cell in cells[header.width :]):
        return []
    mend = (
        "Put text that holds the separator in quotation marks, and write decimals with a point."
        if len(cells) > header.width
        else "Fill in the missing cells; the file may have been cut short here."
    )
    return [(None, Fault("row-width", f"{len(cells)} cells", f"{header.width} cells as in the header", mend))]


def _issue(sheet: Sheet, header: Header, row: int, column: str | None, fault: Fault, severity: Severity) -> Issue:
    position = header.positions.get(column) if column is not None else None
    return Issue(
        code=fault.code,
        found=fault.found,
        expected=fault.expected,
        mend=fault.mend,
        severity=severity,
        file=sheet.file,
        sheet=sheet.name,
        row=row,
        column=column,
        cell=None if position is None else f"{letters(position + 1)}{row}",
    )
