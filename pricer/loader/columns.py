"""Columns and rows: one model per table, shared by the reader, the writer and the templates."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache
from typing import Any

from pydantic import BaseModel, ConfigDict, GetCoreSchemaHandler
from pydantic_core import core_schema

from pricer.loader.faults import Fault, Reading, blank_cell
from pricer.loader.kinds import Kind
from pricer.loader.sheets import Cell, is_blank

#: A column without a meaning for blank cells.
REQUIRED = object()


@dataclass(frozen=True, slots=True)
class Column:
    """One column of a table.

    ``meaning`` completes "Enter ..."; ``example`` is a cell as a person would type it;
    ``blank`` is the value of a blank cell and ``blank_words`` completes "clear the cell
    ...". ``must_exist`` says that the table is unusable without the column, even though
    some cells may be blank.
    """

    kind: Kind
    meaning: str
    example: str
    unit: str = ""
    blank: object = REQUIRED
    blank_words: str = ""
    must_exist: bool = False

    @property
    def is_required(self) -> bool:
        """Whether every row needs a value."""
        return self.blank is REQUIRED

    @property
    def is_needed(self) -> bool:
        """Whether the table needs the column."""
        return self.is_required or self.must_exist

    def read(self, cell: Cell, reading: Reading) -> object:
        """The cell's value; raises :class:`Fault`."""
        if is_blank(cell):
            if self.blank is REQUIRED:
                raise blank_cell()
            return self.blank
        return self.kind.read(cell, reading)

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> core_schema.CoreSchema:
        """A field with a column is read by it, and by nothing else: its kind makes the field's type."""
        return core_schema.with_info_plain_validator_function(self._validate)

    def _validate(self, cell: Any, info: core_schema.ValidationInfo) -> object:
        if cell is None and self.blank is not REQUIRED:
            return self.blank
        reading = info.context or Reading()
        reading.column = info.field_name
        return self.read(cell, reading)

    def completed(self, fault: Fault) -> Fault:
        """The fault with this column's expectation and remedy where it has none of its own."""
        blank = fault.code == "blank-cell"
        expected = (fault.expected or self.kind.words()) + (f", as {fault.because}" if fault.because else "")
        return Fault(fault.code, fault.found, expected, fault.mend or self.remedy(or_clear=not blank))

    def remedy(self, *, or_clear: bool = True) -> str:
        """How to mend a cell of this column."""
        unit = f", {self.unit}" if self.unit else ""
        clear = f", or clear the cell {self.blank_words}" if self.blank_words and or_clear else ""
        return f"Enter {self.meaning}{unit}, e.g. {self.example}{clear}."


class TableRow(BaseModel):
    """One row of a table, with all its faults gathered at once.

    Subclasses annotate each field with a :class:`Column`, which reads the cell. Rules between columns are field
    validators that look at the columns before theirs, so that they too are told per cell;
    a rule is silent where a column it looks at is itself faulty.
    """

    model_config = ConfigDict(frozen=True, extra="forbid")


@cache
def columns_of(model: type[TableRow]) -> dict[str, Column]:
    """The model's columns by name, in order."""
    return {
        name: next(part for part in field.metadata if isinstance(part, Column))
        for name, field in model.model_fields.items()
    }
