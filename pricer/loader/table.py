"""From a sheet to validated rows, with every problem of every row told at its cell."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
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
        """The value in ``column``; :data:`UNREAD` where it could not be read, or the row's model lacks the column."""
        # A model's __dict__ holds its columns and nothing else; asking it for one that it lacks costs no exception.
        read = self.readable if self.value is None else self.value.__dict__
        return read.get(column, UNREAD)


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
    """Read every row below the header in which a known column holds something.

    ``model`` is the row model, or a function that chooses it from the cell in column ``by``.
    """
    merged = _merged_rows(sheet, header)
    choice = header.positions.get(by)
    readers: dict[type[R], _RowReader[R]] = {}
    rows: list[Row[R]] = []
    for number, cells in sheet.rows[1:]:
        if not header.holds_row(cells):
            continue
        faults = [*merged.get(number, ()), *_width_faults(sheet, header, cells)]
        cells = cells + [None] * (header.width - len(cells))
        chosen: type[R] = model if isinstance(model, type) else model(None if choice is None else cells[choice])
        reader = readers.get(chosen)
        if reader is None:
            reader = readers[chosen] = _RowReader(sheet, header, chosen, by)
        rows.append(reader.read(number, cells, faults))
    return Table(sheet, header, rows)


class _RowReader(Generic[R]):
    """Reads rows of one sheet by one model."""

    def __init__(self, sheet: Sheet, header: Header, model: type[R], by: str) -> None:
        self._sheet, self._header, self._model, self._by = sheet, header, model, by
        self._columns = columns_of(model)
        self._own = [(name, at) for name, at in header.positions.items() if name in self._columns]
        self._foreign = [(name, at) for name, at in header.positions.items() if name not in self._columns]
        self._absent: dict[str, Cell] = {name: None for name in self._columns if name not in header.positions}
        self._reading = Reading(sheet.typed)

    def read(self, number: int, cells: Sequence[Cell], misfit: Sequence[tuple[str | None, Fault]]) -> Row[R]:
        """The row; ``misfit`` are faults of the row as a whole."""
        reading = self._reading
        reading.notes.clear()
        faults = list(misfit)
        own = {name: cells[at] for name, at in self._own} | self._absent
        value: R | None = None
        try:
            value = self._model.model_validate(own, context=reading)
        except ValidationError as error:
            faults += _faults(error, own)
        faults += [
            (name, unwanted(in_words(cells[at]), "another product", self._by))
            for name, at in self._foreign
            if not is_blank(cells[at])
        ]
        if not faults and not reading.notes:
            return Row(number, value, {}, ())
        told = (*self._issues(number, faults, Severity.ERROR), *self._issues(number, reading.notes, Severity.WARNING))
        if faults:
            return Row(number, None, _readable(own, self._columns, self._sheet.typed), told)
        return Row(number, value, {}, told)

    def _issues(self, number: int, found: Iterable[tuple[str | None, Fault]], severity: Severity) -> Iterator[Issue]:
        for name, fault in found:
            column = self._columns.get(name) if name is not None else None
            told = fault if column is None else column.completed(fault)
            yield _issue(self._sheet, self._header, number, name, told, severity)


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
