"""The points of a curve on their dates: tenors counted, those that are over told, none given twice."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date
from typing import Generic, Protocol, TypeVar

from pricer.core.issues import Issue, Severity
from pricer.loader.columns import TableRow
from pricer.loader.credit_rows import FundingRow
from pricer.loader.faults import Fault
from pricer.loader.table import Row, Table
from pricer.loader.underlying_rows import RepoRow
from pricer.market.calendars import add_tenor


class _DatedRow(Protocol):
    @property
    def date(self) -> date | None: ...

    @property
    def tenor(self) -> str | None: ...


R = TypeVar("R", bound=TableRow)
#: Rows of curves of which every point is kept.
P = TypeVar("P", RepoRow, FundingRow)


@dataclass(frozen=True, slots=True)
class Point(Generic[P]):
    """A row of a curve, its date, and the column that gave the date."""

    day: date
    column: str  # "date" or "tenor"
    row: int
    value: P


def dated(row: _DatedRow, calendar: str, valuation_date: date) -> tuple[date, str]:
    """The date of a point by its own date or its tenor, and the column that gave it."""
    if row.date is not None:
        return row.date, "date"
    return add_tenor(calendar, valuation_date, row.tenor or ""), "tenor"


def coming_points(
    table: Table[P], rows: Sequence[Row[P]], calendar: str, valuation_date: date
) -> tuple[list[Point[P]], list[Issue]]:
    """The usable rows after the valuation date, by date, and everything found on the way.

    Points that are over are warned of and left out; a date that comes twice is an error, and so is
    a curve of which no point is left.
    """
    points = [
        Point(*dated(row.value, calendar, valuation_date), row.number, row.value)
        for row in rows
        if row.value is not None
    ]
    points.sort(key=lambda point: point.day)
    issues = [stale_point(table, p.row, p.column, p.day, valuation_date) for p in points if p.day <= valuation_date]
    coming = [point for point in points if point.day > valuation_date]
    issues += repeated_points(table, [(point.day, point.row, point.column) for point in coming])
    if points and not coming:
        issues.append(no_points(table, points[0].row, points[0].column, valuation_date))
    return coming, issues


def stale_point(table: Table[R], row: int, column: str, day: date, valuation_date: date) -> Issue:
    """The warning about a point that is over."""
    expected = f"a date after the valuation date {valuation_date}"
    fault = Fault("stale-point", f"the date {day}", expected, "Ignored. Delete the row.")
    return table.issue(row, column, fault, Severity.WARNING)


def no_points(table: Table[R], row: int, column: str, valuation_date: date) -> Issue:
    """The error about a curve of which every point is over."""
    fault = Fault("no-curve-points", f"no point after {valuation_date}", "at least one", "Add points to the curve.")
    return table.issue(row, column, fault)


def repeated_points(table: Table[R], points: Sequence[tuple[date, int, str]]) -> list[Issue]:
    """Errors about dates that come twice among (date, row, column)."""
    first: dict[date, int] = {}
    issues = []
    for day, row, column in points:
        earlier = first.setdefault(day, row)
        if earlier != row:
            found = f"a second point on {day}, as in row {earlier}"
            fault = Fault("repeated-date", found, "each date once in a curve", "Delete one of the two rows.")
            issues.append(table.issue(row, column, fault))
    return issues
