"""Which sheet holds a table, and which column is which."""

from __future__ import annotations

import re
from bisect import bisect_left
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from itertools import groupby

from pricer.core.issues import Issue, Severity
from pricer.loader.columns import Column
from pricer.loader.faults import in_words
from pricer.loader.sheets import Cell, Merged, Sheet, Sheets, is_blank, letters
from pricer.loader.text import clean, fold, nearest, quoted, slip_of

#: From this likeness on, an unknown column next to a missing optional one is taken for a slip of the finger.
SURELY_MEANT = 0.85
#: A unit at the end of a column's name, as people write it. A name that differs in nothing else is surely meant.
_UNIT = re.compile(r"(?:decimals?|dec|percent(?:age)?|pct|%|bps?|basispoints?|(?:vol)?points|days)$")


@dataclass(frozen=True, slots=True)
class Header:
    """The header's row, how many cells it has, and each known column's position, counted from 0."""

    row: int
    width: int
    positions: Mapping[str, int]

    def holds_row(self, cells: Sequence[Cell]) -> bool:
        """Whether a known column holds something: a note beside or below the table makes no row."""
        return any(at < len(cells) and not is_blank(cells[at]) for at in self.positions.values())


def find_sheet(sheets: Sheets, name: str, *, required: Severity | None) -> tuple[Sheet | None, list[Issue]]:
    """The one sheet that holds the table ``name``.

    ``required`` is the severity of its absence, None if it may be absent.
    """
    found = sheets.named(name)
    if len(found) > 1:
        names = " and ".join(quoted(sheet.name) for sheet in found)
        issue = Issue(
            "duplicate-sheet",
            f"{len(found)} tables that are named alike: {names}",
            f"one table {name}",
            "Rename or remove all but one.",
            Severity.FATAL,
            sheets.file,
        )
        return None, [issue]
    if found:
        return found[0], []
    guess = nearest(name, sheets.unread, likeness=SURELY_MEANT if required is None else 0.6)
    if required is None and guess is None:
        return None, []
    there = f", but {', '.join(map(quoted, sheets.unread))}" if sheets.unread else ""
    issue = Issue(
        "missing-sheet",
        f"no table {name}{there}",
        f"a table named {name}",
        f'Did you mean "{guess}"? Rename it.' if guess else "Add it; the command template writes an empty one.",
        required or Severity.FATAL,  # an optional table that is there but misspelt must not be ignored
        sheets.file,
    )
    return None, [issue]


def unread_sheets(sheets: Sheets) -> list[Issue]:
    """A warning for each sheet that no table is named after."""
    return [
        Issue(
            "unread-sheet",
            f"a table {quoted(name)} that is not read",
            "the tables of the template only",
            "Ignored. Rename it if it belongs to the input.",
            Severity.WARNING,
            sheets.file,
            name,
        )
        for name in sheets.unread
    ]


def match_header(sheet: Sheet, columns: Mapping[str, Column]) -> tuple[Header | None, list[Issue]]:
    """The columns of a sheet, found by name whatever their order; None when the table cannot be used."""
    if not sheet.rows:
        return None, [_issue(sheet, None, "empty-sheet", "no header", _first_names(columns), "Add the header row.")]
    row, cells = sheet.rows[0]
    names = [(i, _header_text(cell)) for i, cell in enumerate(cells) if not is_blank(cell)]
    if not any(fold(text) in map(fold, columns) for _, text in names):
        found = ", ".join(quoted(text) for _, text in names[:4])
        mend = "Delete what stands above the header row, or add it."
        return None, [_issue(sheet, row, "no-header", found, _first_names(columns), mend)]

    issues: list[Issue] = []
    positions: dict[str, int] = {}
    unknown: dict[str, int] = {}
    by_folded = {fold(name): name for name in columns}
    for i, text in names:
        name = by_folded.get(fold(text))
        if name is None:
            unknown[text] = i
        elif name in positions:
            expected = f"one column {name}, as in cell {letters(positions[name] + 1)}{row}"
            found = f"a second column {name}"
            mend = "Remove or rename one of the two."
            issues.append(_issue(sheet, row, "duplicate-column", found, expected, mend, name, i))
        else:
            positions[name] = i
    issues += _missing(sheet, row, columns, positions, unknown)
    issues += _merged_header(sheet, row, len(cells))
    header = Header(row, len(cells), positions)
    usable = not issues
    issues += _unknown(sheet, row, unknown)
    issues += _odd_layout(sheet, header)
    return (header if usable else None), issues


def _missing(
    sheet: Sheet, row: int, columns: Mapping[str, Column], positions: Mapping[str, int], unknown: dict[str, int]
) -> list[Issue]:
    """Missing columns; an unknown column that was surely meant is taken out of ``unknown``."""
    issues = []
    by_stem = {_without_unit(text): text for text in unknown}
    same_stem = {
        name: by_stem[stem] for name in columns if name not in positions and (stem := _without_unit(name)) in by_stem
    }
    # Before likeness is asked: "skew" is the skew, however alike another missing column may be.
    for name in sorted(columns, key=lambda name: name not in same_stem):
        column = columns[name]
        if name in positions:
            continue
        guess = same_stem.get(name)
        if guess is not None and guess in unknown:
            issues.append(_other_unit(sheet, row, name, column, guess, unknown.pop(guess)))
            continue
        guess = nearest(name, unknown, likeness=0.6 if column.is_needed else SURELY_MEANT) or slip_of(name, unknown)
        if guess is not None:
            i = unknown.pop(guess)
            rename = "Rename the column." if column.is_needed else "Rename the column, or delete it."
            found, mend = f"the column {quoted(guess)}", f'Did you mean "{name}"? {rename}'
            issues.append(_issue(sheet, row, "misspelt-column", found, f"a column {name}", mend, guess, i))
        elif column.is_needed:
            mend = f"Add it: {column.meaning}, e.g. {column.example}."
            issues.append(_issue(sheet, row, "missing-column", f"no column {name}", f"a column {name}", mend))
    return issues


def _other_unit(sheet: Sheet, row: int, name: str, column: Column, found: str, position: int) -> Issue:
    """A column whose name lacks its unit or has another: what the values are counted in is to be checked too."""
    values = f", with values {column.unit}" if column.unit else ""
    delete = "" if column.is_needed else ", or delete it"
    mend = f'Did you mean "{name}"? Rename the column{values}{delete}.'
    return _issue(
        sheet, row, "misspelt-column", f"the column {quoted(found)}", f"a column {name}", mend, found, position
    )


def _without_unit(name: str) -> str:
    """The name as names are compared, without brackets and without its unit, unless the unit is all of it."""
    folded = re.sub(r"[()\[\]]", "", fold(name))
    return _UNIT.sub("", folded) or folded


def _unknown(sheet: Sheet, row: int, unknown: Mapping[str, int]) -> list[Issue]:
    expected, mend = "the columns of the template only", "Ignored. Rename it if it belongs to the input."
    return [
        _issue(sheet, row, "unknown-column", f"the column {quoted(text)}", expected, mend, text, i, Severity.WARNING)
        for text, i in unknown.items()
    ]


def _merged_header(sheet: Sheet, row: int, width: int) -> list[Issue]:
    def reaches(merged: Merged) -> bool:
        return merged.first_row <= row <= merged.last_row and merged.first_column <= width

    expected, mend = "one column name in each cell", "Unmerge them and name every column."
    return [
        _issue(sheet, row, "merged-cells", f"the merged cells {merged.text}", expected, mend)
        for merged in sheet.merged
        if reaches(merged)
    ]


def _odd_layout(sheet: Sheet, header: Header) -> list[Issue]:
    """Warnings about what a person may not see: hidden parts, and values outside the named columns."""
    odd: list[tuple[str, str, str, str]] = []
    if sheet.is_open_ended:
        mend = "Check that the last row is whole: the file may have been cut short."
        odd.append(("open-end", "a last row without a line break", "a line break after every row", mend))
    if sheet.hidden:
        odd.append(("hidden-sheet", "a hidden sheet", "a visible sheet", "Read like any other."))
    data_rows = {number for number, _ in sheet.rows}
    rows = [row for row in sheet.hidden_rows if row in data_rows]
    if rows:
        mend = "Read like any other; remove what does not belong to the input."
        odd.append(("hidden-rows", f"hidden rows: {_ranges(rows)}", "visible rows", mend))
    used = {position + 1 for position in header.positions.values()}
    columns = [column for column in sheet.hidden_columns if column in used]
    if columns:
        text = ", ".join(map(letters, columns))
        odd.append(("hidden-columns", f"hidden columns: {text}", "visible columns", "Read like any other."))
    strays = _strays(sheet, header)
    if strays:
        more = f" and {len(strays) - 5} more" if len(strays) > 5 else ""
        cells = f"cell{'s' if len(strays) > 1 else ''} {', '.join(strays[:5])}{more}"
        text = f"values outside the named columns, in {cells}"
        mend = "Ignored. Name their column, or clear them."
        odd.append(("nameless-column", text, "values below a column name only", mend))
    return [
        Issue(code, found, expected, mend, Severity.WARNING, sheet.file, sheet.name)
        for code, found, expected, mend in odd
    ]


def _strays(sheet: Sheet, header: Header) -> list[str]:
    """Cells that hold something outside the named columns.

    In a .csv file they count up to the header's width only, where they stand beside a row: one that is
    wider has gained a cell somewhere, which is a fault of its own.
    """
    named = {i for i, cell in enumerate(sheet.rows[0][1]) if not is_blank(cell)}
    outside = [i for i in range(max(len(cells) for _, cells in sheet.rows)) if i not in named]
    found: list[str] = []
    for number, cells in sheet.rows[1:] if outside else ():
        end = len(cells) if sheet.typed or not header.holds_row(cells) else min(len(cells), header.width)
        inside = outside[: bisect_left(outside, end)]
        found += [f"{letters(i + 1)}{number}" for i in inside if not is_blank(cells[i])]
    return found


def _ranges(numbers: Iterable[int]) -> str:
    """``4-6, 9`` for 4, 5, 6 and 9."""
    runs = groupby(enumerate(sorted(set(numbers))), key=lambda item: item[1] - item[0])
    ends = [(run[0][1], run[-1][1]) for run in (list(group) for _, group in runs)]
    return ", ".join(f"{first}-{last}" if last > first else str(first) for first, last in ends)


def _header_text(cell: Cell) -> str:
    return clean(cell)[0] if isinstance(cell, str) else in_words(cell)


def _first_names(columns: Mapping[str, Column]) -> str:
    names = list(columns)
    return f"a header row with {', '.join(names[:4])}{' and further columns' if len(names) > 4 else ''}"


def _issue(
    sheet: Sheet,
    row: int | None,
    code: str,
    found: str,
    expected: str,
    mend: str,
    column: str | None = None,
    position: int | None = None,
    severity: Severity = Severity.FATAL,
) -> Issue:
    cell = None if position is None or row is None else f"{letters(position + 1)}{row}"
    return Issue(code, found, expected, mend, severity, sheet.file, sheet.name, row, column, cell)
