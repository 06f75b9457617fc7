"""What was found in a market's tables, and what it costs."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Sequence
from dataclasses import replace
from typing import TypeVar

from pricer.core.issues import Issue, Severity
from pricer.loader.belonging import belongings
from pricer.loader.columns import TableRow
from pricer.loader.faults import Fault
from pricer.loader.table import UNREAD, Row, Table
from pricer.loader.text import misspelt, quoted

R = TypeVar("R", bound=TableRow)


class Findings:
    """Every issue in the order found, and those that cost an item its place, by the item's id."""

    def __init__(self, issues: Iterable[Issue] = ()) -> None:
        self.issues: list[Issue] = list(issues)
        self._rejected: dict[str, list[Issue]] = defaultdict(list)
        self._prefix = ""

    def under(self, kind: str) -> Findings:
        """The same findings, which know the items named to them as "kind:name"."""
        view = Findings()
        view.issues, view._rejected, view._prefix = self.issues, self._rejected, f"{kind}:"
        return view

    def add(self, issues: Iterable[Issue]) -> None:
        """Remember issues that cost nothing."""
        self.issues.extend(issues)

    def reject(self, name: str, issues: Iterable[Issue]) -> None:
        """Remember issues; those that are more than warnings cost the item ``name``."""
        issues = list(issues)
        self.issues.extend(issues)
        self.charge(name, issues)

    def charge(self, name: str, issues: Iterable[Issue]) -> None:
        """Let issues that are already told cost the item ``name``."""
        grave = [issue for issue in issues if issue.severity is not Severity.WARNING]
        if grave:
            self._rejected[self._prefix + name].extend(grave)

    def is_rejected(self, name: str) -> bool:
        return bool(self._rejected.get(self._prefix + name))

    @property
    def rejected(self) -> dict[str, tuple[Issue, ...]]:
        return {name: tuple(issues) for name, issues in self._rejected.items() if issues}


def as_warnings(issues: Iterable[Issue]) -> list[Issue]:
    """Issues of a table on which nothing depends."""
    return [replace(issue, severity=Severity.WARNING) for issue in issues]


def by_own_id(table: Table[R], column: str, findings: Findings) -> dict[str, Row[R]]:
    """Rows by the id that they define. An id defined twice is rejected; rows without an id are told."""
    rows: dict[str, Row[R]] = {}
    for row in table.rows:
        name = row.get(column)
        if name is UNREAD:
            findings.add(row.issues)
            continue
        findings.reject(name, row.issues)
        first = rows.setdefault(name, row)
        if first is not row:
            found = f"{quoted(name)}, also in row {first.number}"
            fault = Fault(
                f"duplicate-{column}".replace("_", "-"),
                found,
                f"each {column} once",
                "Delete or rename one of the two rows.",
            )
            findings.reject(name, [table.issue(row.number, column, fault)])
    return rows


def by_owner(table: Table[R], column: str, owners: Iterable[str], findings: Findings) -> dict[str, list[Row[R]]]:
    """Rows by the id that they refer to.

    A row with a fault costs its owner; one whose id cannot be followed costs those that may
    have lost it, be they its neighbours or the id most like its own; ids that are like none
    are told once each, and cost nothing.
    """
    known = frozenset(owners)
    rows: dict[str, list[Row[R]]] = defaultdict(list)
    strays: dict[str, list[int]] = defaultdict(list)
    meant: dict[str, str | None] = {}
    for row, belonging in belongings(table.rows, column, known):
        if belonging.owner is not None:
            rows[belonging.owner].append(row)
            findings.reject(belonging.owner, row.issues)
            continue
        if belonging.name and belonging.name not in meant:
            meant[belonging.name] = misspelt(belonging.name, known)
        # An id that is like a known one means that one, wherever the row stands.
        likely = meant.get(belonging.name)
        if belonging.name and (not belonging.suspects or likely not in (None, *belonging.suspects)):
            strays[belonging.name].append(row.number)
            continue
        issues = list(row.issues)
        if belonging.name:
            suspects = " or ".join(map(quoted, belonging.suspects))
            mend = f"Did you mean {suspects}? Correct the id."
            fault = Fault(f"unknown-{column}", quoted(belonging.name), f"a known {column}", mend)
            issues.append(table.issue(row.number, column, fault))
        findings.add(issues)
        for suspect in belonging.suspects:
            findings.charge(suspect, issues)
    for name, numbers in strays.items():
        likely = meant[name]
        issue = _stray(table, column, name, numbers, likely)
        findings.add([issue])
        if likely is not None:
            findings.charge(likely, [issue])
    return rows


def by_name(table: Table[R], column: str, findings: Findings) -> dict[str, list[Row[R]]]:
    """Rows by an id that several rows share and no other table defines; a row with a fault costs its id."""
    rows: dict[str, list[Row[R]]] = defaultdict(list)
    for row in table.rows:
        name = row.get(column)
        if name is UNREAD:
            findings.add(row.issues)
            continue
        findings.reject(name, row.issues)
        rows[name].append(row)
    return rows


def _stray(table: Table[R], column: str, name: str, numbers: Sequence[int], meant: str | None) -> Issue:
    more = f" (and {len(numbers) - 1} more rows)" if len(numbers) > 1 else ""
    mend = "Not used. Add it to its own table, or delete these rows."
    if meant is not None:
        mend = f"Did you mean {quoted(meant)}? Correct the id, or add it to its own table, or delete these rows."
    fault = Fault(f"unknown-{column}", f"{quoted(name)}{more}", f"a known {column}", mend)
    return table.issue(numbers[0], column, fault)


def repeated_dates(table: Table[R], rows: Sequence[Row[R]], column: str) -> list[Issue]:
    """An issue for every row whose date one of ``rows`` before it has already given."""
    first: dict[object, int] = {}
    issues = []
    for row in rows:
        day = row.get(column)
        if day is UNREAD:
            continue
        earlier = first.setdefault(day, row.number)
        if earlier != row.number:
            found = f"the date {day}, also in row {earlier}"
            fault = Fault("repeated-date", found, "each date once", "Delete one of the two rows.")
            issues.append(table.issue(row.number, column, fault))
    return issues
