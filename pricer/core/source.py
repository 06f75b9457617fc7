"""Which file and cell an input came from."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class SourceFile:
    """A file that was read, and its SHA-256 digest in hexadecimal."""

    name: str
    sha256: str


@dataclass(frozen=True, slots=True)
class Place:
    """Where a fact was read: a cell of a sheet (or of a CSV file), rows counted from 1."""

    file: str
    sheet: str
    row: int
    column: str
    cell: str
