"""The table of correlations: a square matrix whose rows and columns are underlyings and currency pairs."""

from __future__ import annotations

from collections import Counter
from collections.abc import Collection
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from pricer.core.issues import Issue, Severity
from pricer.core.source import Place
from pricer.loader.faults import Fault, Reading, number_in_words
from pricer.loader.names import Identifier
from pricer.loader.numbers import Number
from pricer.loader.sheets import Cell, Sheet, is_blank, letters
from pricer.loader.text import nearest, quoted

_CORRELATION = Number(at_least=-1.0, at_most=1.0, percent=True, decimal_limit=2.0)
_ENTER = "Enter the correlation as a decimal in either, e.g. 0.45."
_REMEDY = "Enter a correlation as a decimal, e.g. 0.45, or clear one cell of a mirrored pair."
#: Mirrored entries that differ by rounding are averaged, those that differ by a little more are told too.
ROUNDING, SLIGHT = 1e-8, 1e-4


@dataclass(frozen=True, slots=True)
class CorrelationTable:
    """The matrix (n, n), NaN where a pair has no usable number, and everything found on the way.

    ``refused`` says of the ids that were left out which issues cost them their correlations, ``unknown`` the same
    of the pairs without a number, both being ids of the matrix.
    """

    ids: tuple[str, ...]
    matrix: NDArray[np.float64]
    issues: tuple[Issue, ...]
    sheet: Sheet
    rows: dict[str, int]
    columns: dict[str, int]
    refused: dict[str, tuple[Issue, ...]]
    unknown: dict[tuple[str, str], tuple[Issue, ...]]

    def place(self, first: str, second: str) -> Place | None:
        """The cell of a pair."""
        if first not in self.rows or second not in self.columns:
            return None
        row, column = self.rows[first], self.columns[second]
        return Place(self.sheet.file, self.sheet.name, row, second, f"{letters(column + 1)}{row}")


def read_correlations(sheet: Sheet, known: Collection[str]) -> CorrelationTable:
    """Read the matrix.

    Of a mirrored pair one cell may be blank, and so may the diagonal. A pair whose cells give
    no number is told and unknown. An id that is given twice, or without a single usable pair, is
    left out and told; one that is not ``known`` is left out too.
    """
    return _Matrix(sheet).read(known)


class _Matrix:
    """The reading of one matrix, with the issues gathered so far."""

    def __init__(self, sheet: Sheet) -> None:
        self._sheet = sheet
        self._issues: list[Issue] = []
        self._rows: dict[str, int] = {}  # id -> row number
        self._cells: dict[str, list[Cell]] = {}
        self._columns: dict[str, int] = {}  # id -> position, counted from 0
        self._spoilt: list[tuple[str, str, Issue]] = []  # pairs without a usable number, the row's id first

    def read(self, known: Collection[str]) -> CorrelationTable:
        self._read_names()
        ids = [name for name in self._columns if name in self._rows and self._is_known(name, known)]
        for name in ids:
            inverse = inverted(name)
            if inverse in ids and self._rows[inverse] < self._rows[name]:
                self._spoil(name, name, self._tell(self._rows[name], 0, both_ways(name, self._rows[inverse])))
        values = {(a, b): self._value(a, b) for a in ids for b in ids}
        matrix = np.eye(len(ids))
        for i, a in enumerate(ids):
            for j, b in enumerate(ids[:i]):
                matrix[i, j] = matrix[j, i] = self._pair(a, b, values[a, b], values[b, a])
        kept = self._connected(ids)
        index = [ids.index(name) for name in kept]
        refused: dict[str, tuple[Issue, ...]] = {}
        unknown: dict[tuple[str, str], tuple[Issue, ...]] = {}
        for a, b, issue in self._spoilt:
            for name in {a, b}.difference(kept):
                refused[name] = (*refused.get(name, ()), issue)
            if {a, b} <= set(kept):
                i, j = kept.index(a), kept.index(b)
                pair = (a, b) if (b, a) not in unknown else (b, a)
                unknown[pair] = (*unknown.get(pair, ()), issue)
                matrix[index[i], index[j]] = matrix[index[j], index[i]] = np.nan
        return CorrelationTable(
            ids=tuple(kept),
            matrix=matrix[np.ix_(index, index)],
            issues=tuple(self._issues),
            sheet=self._sheet,
            rows=self._rows,
            columns=self._columns,
            refused=refused,
            unknown=unknown,
        )

    def _read_names(self) -> None:
        header_row, header = self._sheet.rows[0] if self._sheet.rows else (1, [])
        for position, cell in enumerate(header[1:], start=1):
            name = self._name(header_row, position, cell)
            if name is not None and name in self._columns:
                self._spoil(name, name, self._tell(header_row, position, _twice(name, "column")))
            elif name is not None:
                self._columns[name] = position
        for row, cells in self._sheet.rows[1:]:
            name = self._name(row, 0, cells[0] if cells else None)
            if name is not None and name in self._rows:
                self._spoil(name, name, self._tell(row, 0, _twice(name, "row")))
            elif name is not None:
                self._rows[name], self._cells[name] = row, cells
        for name in [
            *(name for name in self._columns if name not in self._rows),
            *(name for name in self._rows if name not in self._columns),
        ]:
            there, missing = ("column", "row") if name in self._columns else ("row", "column")
            row, position = (header_row, self._columns[name]) if there == "column" else (self._rows[name], 0)
            guess = nearest(name, (self._rows.keys() if there == "column" else self._columns.keys()) - {name})
            hint = f'Did you mean "{guess}"? ' if guess else ""
            found = f"the {there} {quoted(name)} without a {missing} of that name"
            expected = "the same underlyings in rows and columns"
            mend = f"{hint}Add the {missing}, or correct the name."
            self._spoil(name, name, self._tell(row, position, Fault("not-square", found, expected, mend)))

    def _name(self, row: int, position: int, cell: Cell) -> str | None:
        if is_blank(cell):
            return None
        reading = Reading(self._sheet.typed)
        try:
            name = Identifier().read(cell, reading)
        except Fault as fault:
            expected = "the id of an underlying"
            self._tell(row, position, Fault(fault.code, fault.found, expected, fault.mend or "Correct the name."))
            return None
        self._tell_notes(row, position, reading)
        return name

    def _is_known(self, name: str, known: Collection[str]) -> bool:
        if name in known:
            return True
        guess = nearest(name, known)
        mend = f'Did you mean "{guess}"? Ignored.' if guess else "Ignored. Add it to the market, or delete it."
        fault = Fault("unknown-underlying", quoted(name), "an underlying or a currency pair of the market", mend)
        self._tell(self._rows[name], 0, fault, Severity.WARNING)
        return False

    def _value(self, a: str, b: str) -> float | None:
        """The number in row ``a``, column ``b``; None for a blank cell, NaN for an unusable one."""
        cells, position = self._cells[a], self._columns[b]
        cell = cells[position] if position < len(cells) else None
        if is_blank(cell):
            return None
        reading = Reading(self._sheet.typed)
        try:
            number = _CORRELATION.read(cell, reading)
            if a == b and abs(number - 1.0) > ROUNDING:
                raise Fault("out-of-range", number_in_words(number), "1 on the diagonal", "Enter 1, or clear the cell.")
        except Fault as fault:
            expected = fault.expected or _CORRELATION.words()
            told = Fault(fault.code, fault.found, expected, fault.mend or _REMEDY)
            self._spoil(a, b, self._tell(self._rows[a], position, told))
            return float("nan")
        self._tell_notes(self._rows[a], position, reading)
        return number

    def _pair(self, a: str, b: str, one: float | None, other: float | None) -> float:
        """The correlation of a pair from its two cells."""
        given = [value for value in (one, other) if value is not None]
        here = self._rows[a], self._columns[b]
        if not given:
            found, expected = "a blank cell, and so is its mirror image", "the correlation in at least one of the two"
            self._spoil(a, b, self._tell(*here, Fault("blank-cell", found, expected, _ENTER)))
            return float("nan")
        difference = abs(given[0] - given[-1])
        if difference > ROUNDING:
            mirror = f"{letters(self._columns[a] + 1)}{self._rows[b]}"
            found = f"{number_in_words(given[0])}, but {number_in_words(given[1])} in cell {mirror}"
            expected = "the same correlation in both cells"
            mend = "Correct one of them, or clear it."
            if difference > SLIGHT:
                self._spoil(a, b, self._tell(*here, Fault("not-symmetric", found, expected, mend)))
            else:
                note = Fault("not-symmetric", found, expected, f"Their average is used. {mend}")
                self._tell(*here, note, Severity.WARNING)
        return 0.5 * (given[0] + given[-1])

    def _connected(self, ids: list[str]) -> list[str]:
        """The ids that are left without those spoilt by themselves, or in all their pairs; the most spoilt go first."""
        alone = {a for a, b, _ in self._spoilt if a == b}
        kept = [name for name in ids if name not in alone]
        while len(kept) > 1:
            spoilt = dict.fromkeys((a, b) for a, b, _ in self._spoilt if {a, b} <= set(kept))
            counts = Counter(name for pair in {frozenset(pair) for pair in spoilt} for name in pair)
            # Of equally spoilt ones, that of the row: a bad row costs its own underlying.
            lost = [name for name in [*(row for row, _ in spoilt), *counts] if counts[name] == len(kept) - 1]
            if not lost:
                break
            kept.remove(lost[0])
        return kept

    def _spoil(self, a: str, b: str, issue: Issue) -> None:
        self._spoilt.append((a, b, issue))

    def _tell_notes(self, row: int, position: int, reading: Reading) -> None:
        for _, note in reading.notes:
            self._tell(row, position, note, Severity.WARNING)

    def _tell(self, row: int, position: int, fault: Fault, severity: Severity = Severity.ERROR) -> Issue:
        column = (
            next((name for name, at in self._columns.items() if at == position), None) if position else "underlying"
        )
        where = (self._sheet.file, self._sheet.name, row, column or letters(position + 1))
        told = (fault.code, fault.found, fault.expected, fault.mend, severity)
        self._issues.append(Issue(*told, *where, f"{letters(position + 1)}{row}"))
        return self._issues[-1]


def inverted(pair: str) -> str:
    """The same currency pair the other way round."""
    return pair[3:] + pair[:3]


def both_ways(pair: str, row: int) -> Fault:
    """The fault of a pair that stands the other way round in an earlier row."""
    found = f"the pair {pair}, and its inverse in row {row}"
    return Fault("pair-both-ways", found, "each pair of currencies in one direction", "Delete one of the two rows.")


def _twice(name: str, what: str) -> Fault:
    return Fault("duplicate-underlying", f"a second {what} {quoted(name)}", f"one {what} per underlying", "Delete it.")
