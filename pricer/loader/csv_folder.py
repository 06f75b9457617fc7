"""A folder of .csv files: one table a file, named after the table."""

from __future__ import annotations

import csv
from io import StringIO

from pricer.loader.sheets import Cell, Sheet, UnreadableError

#: Text that a spreadsheet program would take for a formula when it opens a .csv file.
FORMULA_STARTS = ("=", "+", "-", "@")

_DELIMITERS = (",", ";", "\t")


def read_csv(data: bytes, file: str, name: str) -> Sheet:
    """One table from the bytes of a .csv file: UTF-8 with or without mark, comma, semicolon or tab.

    Rows that have more or fewer cells than the header keep them: the header's reader says so.
    Raises :class:`UnreadableError` for another encoding or a broken quotation.
    """
    text = _decoded(data)
    delimiter = _delimiter(text)
    reader = csv.reader(StringIO(text, newline=""), delimiter=delimiter, strict=True)
    rows: list[tuple[int, list[Cell]]] = []
    number = 0
    try:
        for number, record in enumerate(reader, start=1):
            if any(field.strip() for field in record):
                rows.append((number, [_unguarded(field) for field in record]))
    except csv.Error as error:
        raise UnreadableError(
            "damaged-csv",
            f"{error} in row {number + 1}",
            "cells that are separated and quoted in one way throughout",
            "Close the open quotation mark, or export the table again.",
        ) from None
    return Sheet(file, name, rows, typed=False, is_open_ended=not text.endswith(("\n", "\r")))


def guarded(text: str) -> str:
    """The text as it is safe in a .csv file: an apostrophe keeps it from being run as a formula."""
    return f"'{text}" if text.startswith((*FORMULA_STARTS, "'")) else text


def _unguarded(text: str) -> str | None:
    if len(text) > 1 and text[0] == "'" and text[1] in ("'", *FORMULA_STARTS):
        return text[1:]
    return text or None


def _decoded(data: bytes) -> str:
    if data.startswith((b"\xff\xfe", b"\xfe\xff")):
        raise UnreadableError(
            "not-utf-8", "UTF-16 text", "UTF-8 text", 'Save it as "CSV UTF-8" in the spreadsheet program.'
        )
    try:
        text = data.decode("utf-8").removeprefix("\ufeff")
    except UnicodeDecodeError as error:
        line = data[: error.start].count(b"\n") + 1
        raise UnreadableError(
            "not-utf-8",
            f"byte 0x{data[error.start]:02X} at position {error.start} (line {line}), which is not UTF-8",
            "UTF-8 text",
            'Save it as "CSV UTF-8" in the spreadsheet program.',
        ) from None
    if "\0" in text:
        raise UnreadableError(
            "damaged-csv",
            f"a NUL character at position {text.index(chr(0))}",
            "plain text",
            "Copy or export the file again.",
        )
    return text


def _delimiter(text: str) -> str:
    """The delimiter that the header uses most; a comma when it uses none."""
    header = next((line for line in text.splitlines() if line.strip()), "")
    outside = "".join(header.split('"')[::2])
    return max(_DELIMITERS, key=outside.count)
