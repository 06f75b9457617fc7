"""What is wrong with one cell, before its place is known."""

from __future__ import annotations

from dataclasses import dataclass, field
from datetime import date, datetime

from pricer.loader.sheets import Cell, ErrorValue, UncalculatedFormula
from pricer.loader.text import quoted


class Fault(ValueError):  # noqa: N818  told as an issue, never shown as an exception
    """A cell that cannot be used. An empty ``expected`` or ``mend`` is filled in by its column.

    ``because`` is the rule's reason, said after what was expected: "a number above 0, as ...".
    """

    def __init__(self, code: str, found: str, expected: str = "", mend: str = "", *, because: str = "") -> None:
        super().__init__(f"found {found}; expected {expected}. {mend}")
        self.code, self.found, self.expected, self.mend, self.because = code, found, expected, mend, because


@dataclass(slots=True)
class Reading:
    """How the cells of one row are read: whether they are typed, and what was odd but usable."""

    typed: bool = True
    notes: list[tuple[str, Fault]] = field(default_factory=list)  # (column name, what was odd)
    column: str = ""  # the one being read

    def note(self, fault: Fault) -> None:
        """Remember something that a person should look at in the current column."""
        self.notes.append((self.column, fault))


def in_words(cell: Cell) -> str:
    """The cell as a message shows it."""
    match cell:
        case None:
            return "a blank cell"
        case bool():
            return "the truth value TRUE" if cell else "the truth value FALSE"
        case str():
            return quoted(cell)
        case datetime():
            return f"the time {cell:%Y-%m-%d %H:%M:%S}"
        case date():
            return f"the date {cell:%Y-%m-%d}"
        case ErrorValue(text):
            return f"the spreadsheet error {text}"
        case UncalculatedFormula(text):
            return f"the formula {quoted(text)} without a stored result"
        case _:
            return number_in_words(cell)


def number_in_words(number: float) -> str:
    """The shortest text that reads back as the number, without a useless ``.0``."""
    return repr(number).removesuffix(".0")


def blank_cell(because: str = "") -> Fault:
    """Nothing where something is needed."""
    return Fault("blank-cell", "a blank cell", because=because)


def unwanted(value: object, owner: str, governed_by: str) -> Fault:
    """A value that only ``owner`` may have, in a row whose column ``governed_by`` says otherwise."""
    match value:
        case float():
            found = number_in_words(value)
        case date():
            found = f"the date {value}"
        case tuple():
            found = quoted("; ".join(map(number_in_words, value)))
        case _:
            found = str(value)
    mend = f"Clear the cell, or correct {governed_by}."
    return Fault("unwanted-value", found, f"a blank cell, as this is for {owner} only", mend)


def check_paid_after(paid: date | None, day: date | None, what: str, owner: str, column: str) -> None:
    """Raise the fault of a payment date without the ``day`` in ``column`` that it belongs to, or before it."""
    if paid is None:
        return
    if day is None:
        raise unwanted(paid, owner, column)
    if paid < day:
        expected = f"a date from {what} {day} on"
        raise Fault("dates-out-of-order", f"the date {paid}", expected, "Correct one of the two dates.")


def only_for(owner: str, belongs: bool, value: object, governed_by: str) -> None:
    """Raise the fault of a value that ``owner`` alone must have, if it is missing or not theirs."""
    if belongs and value is None:
        raise blank_cell(f"{owner} need one")
    if not belongs and value is not None:
        raise unwanted(value, owner, governed_by)
