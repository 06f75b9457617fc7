"""One sheet of a workbook, streamed from its XML.

One pass sees what two passes of a general reader would be needed for: a cell's value *and*
whether it is a formula without a stored result, hidden rows and merged ranges; and it keeps
a book of 100,000 trades within seconds. Format: ECMA-376, part 1, section 18.3.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from datetime import date, datetime, timedelta
from functools import lru_cache
from typing import IO
from xml.parsers import expat

from pricer.loader.sheets import (
    DIGITS,
    Cell,
    ErrorValue,
    Merged,
    UncalculatedFormula,
    UnreadableError,
    column_of,
    coordinates,
    is_blank,
)

_ESCAPED = re.compile(r"_x([0-9A-Fa-f]{4})_")


@dataclass(slots=True)
class SheetContent:
    """What one sheet's XML holds; see :class:`pricer.loader.sheets.Sheet`."""

    rows: list[tuple[int, list[Cell]]] = field(default_factory=list)
    merged: list[Merged] = field(default_factory=list)
    hidden_rows: list[int] = field(default_factory=list)
    hidden_columns: list[int] = field(default_factory=list)


def parse_sheet(
    stream: IO[bytes], strings: Sequence[str], date_styles: frozenset[str], *, from_1904: bool
) -> SheetContent:
    """The cells of one sheet.

    ``strings`` are the workbook's shared strings, ``date_styles`` the style numbers (as
    text) whose number format shows a date, ``from_1904`` the workbook's date system.
    """
    handler = _SheetHandler(strings, date_styles, from_1904=from_1904)
    parse_xml(stream, handler.start, handler.end, handler.characters)
    return handler.content


def parse_strings(stream: IO[bytes]) -> list[str]:
    """The shared strings, in order; phonetic hints are not part of a text."""
    handler = _StringsHandler()
    parse_xml(stream, handler.start, handler.end, handler.characters)
    return handler.strings


def parse_xml(
    stream: IO[bytes],
    start: Callable[[str, dict[str, str]], object],
    end: Callable[[str], object],
    characters: Callable[[str], object],
) -> None:
    """Feed the XML of ``stream`` to three handlers, with names free of their prefix.

    Workbooks have no document type; one that does may be built to exhaust the memory, so
    it is refused.
    """
    parser = expat.ParserCreate()

    def root(name: str, attributes: dict[str, str]) -> None:
        # Most files have no prefixes; only those that have pay for taking them off.
        if ":" in name:
            local = _LocalNames()
            parser.StartElementHandler = lambda name, attributes: start(local[name], attributes)
            parser.EndElementHandler = lambda name: end(local[name])
        else:
            parser.StartElementHandler, parser.EndElementHandler = start, end
        parser.StartElementHandler(name, attributes)

    parser.buffer_text = True
    parser.StartElementHandler = root
    parser.CharacterDataHandler = characters
    parser.StartDoctypeDeclHandler = _refuse_doctype
    parser.ParseFile(stream)


def unescape(text: str) -> str:
    """Characters that XML cannot hold are written ``_x000D_`` in workbooks."""
    return _ESCAPED.sub(lambda found: chr(int(found[1], 16)), text) if "_x" in text else text


@lru_cache(maxsize=4096)
def date_of_serial(serial: float, *, from_1904: bool) -> date | datetime | float:
    """The date of a spreadsheet's day number; a time of day makes it a datetime.

    The 1900 system counts a 29 February 1900 that never was, so its days before March 1900
    are one off. A number outside the calendar stays a number.
    """
    first_of_1900 = datetime(1899, 12, 31) if serial < 60.0 else datetime(1899, 12, 30)
    try:
        moment = (datetime(1904, 1, 1) if from_1904 else first_of_1900) + timedelta(seconds=round(serial * 86400.0))
    except OverflowError:
        return serial
    return moment if moment.hour or moment.minute or moment.second else moment.date()


class _LocalNames(dict[str, str]):
    """Element names without their namespace prefix, worked out once each."""

    def __missing__(self, name: str) -> str:
        out = self[name] = name.rpartition(":")[2]
        return out


def _refuse_doctype(*_: object) -> None:
    raise UnreadableError(
        "not-a-workbook",
        "a document type declaration inside the workbook",
        "a workbook as a spreadsheet program saves it",
        "Open it in a spreadsheet program and save it as .xlsx.",
    )


class _SheetHandler:
    """Gathers cells while the XML streams by."""

    def __init__(self, strings: Sequence[str], date_styles: frozenset[str], *, from_1904: bool) -> None:
        self.content = SheetContent()
        self._strings, self._date_styles, self._from_1904 = strings, date_styles, from_1904
        self._row, self._column = 0, 0
        self._cells: list[Cell] = []
        self._kind, self._style = "n", ""
        self._value = ""
        self._formula: str | None = None
        self._text = ""
        self._phonetic = False

    def start(self, name: str, attributes: dict[str, str]) -> None:
        if name == "c":
            reference = attributes.get("r")
            self._column = column_of(reference.rstrip(DIGITS)) if reference else self._column + 1
            self._kind, self._style = attributes.get("t", "n"), attributes.get("s", "")
            self._value, self._formula = "", None
        elif name == "v" or name == "f" or name == "is":
            self._text = ""
        elif name == "row":
            self._row = int(attributes["r"]) if "r" in attributes else self._row + 1
            self._column, self._cells = 0, []
            if attributes.get("hidden") in ("1", "true"):
                self.content.hidden_rows.append(self._row)
        elif name == "rPh":
            self._phonetic = True
        elif name == "mergeCell":
            self.content.merged.append(_merged(attributes["ref"]))
        elif name == "col" and attributes.get("hidden") in ("1", "true"):
            first, last = int(attributes["min"]), int(attributes["max"])
            self.content.hidden_columns.extend(range(first, min(last, first + 255) + 1))

    def characters(self, text: str) -> None:
        if not self._phonetic:
            self._text += text

    def end(self, name: str) -> None:
        if name == "v" or name == "is":
            self._value = self._text
        elif name == "c":
            cell = self._cell()
            if cell is not None:
                missing = self._column - len(self._cells) - 1
                if missing > 0:
                    self._cells.extend([None] * missing)
                if missing >= 0:
                    self._cells.append(cell)
                else:
                    self._cells[self._column - 1] = cell
        elif name == "row":
            if not all(map(is_blank, self._cells)):
                self.content.rows.append((self._row, self._cells))
        elif name == "f":
            self._formula = self._text
        elif name == "rPh":
            self._phonetic = False

    def _cell(self) -> Cell:
        kind, value = self._kind, self._value
        if kind == "s":
            return self._strings[int(value)] if value else None
        if kind == "inlineStr" or kind == "str":
            return unescape(value) or None
        if not value:
            return None if self._formula is None else UncalculatedFormula(f"={self._formula}")
        if kind == "n":
            number = float(value)
            return date_of_serial(number, from_1904=self._from_1904) if self._style in self._date_styles else number
        if kind == "b":
            return value in ("1", "true")
        if kind == "e":
            return ErrorValue(value)
        return _iso_moment(value) if kind == "d" else value


class _StringsHandler:
    """Gathers shared strings; rich text is the sum of its runs."""

    def __init__(self) -> None:
        self.strings: list[str] = []
        self._text: list[str] = []
        self._listening = self._phonetic = False

    def start(self, name: str, _: dict[str, str]) -> None:
        if name == "si":
            self._text.clear()
        elif name == "rPh":
            self._phonetic = True
        elif name == "t":
            self._listening = not self._phonetic

    def characters(self, text: str) -> None:
        if self._listening:
            self._text.append(text)

    def end(self, name: str) -> None:
        if name == "t":
            self._listening = False
        elif name == "rPh":
            self._phonetic = False
        elif name == "si":
            self.strings.append(unescape("".join(self._text)))


def _merged(reference: str) -> Merged:
    first, _, last = reference.partition(":")
    (c0, r0), (c1, r1) = coordinates(first), coordinates(last or first)
    return Merged(reference, r0, r1, c0, c1)


def _iso_moment(value: str) -> Cell:
    try:
        moment = datetime.fromisoformat(value)
    except ValueError:
        return value
    return moment if moment.time() != datetime.min.time() else moment.date()
