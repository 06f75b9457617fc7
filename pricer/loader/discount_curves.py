"""Discount curves from the tables of curves and of their points."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date

from pricer.core.issues import Issue, Severity
from pricer.loader.faults import Fault, number_in_words
from pricer.loader.findings import Findings, by_own_id, by_owner
from pricer.loader.market_rows import CurvePointRow, CurveRow
from pricer.loader.table import Row, Table
from pricer.loader.text import quoted
from pricer.market.calendars import add_tenor
from pricer.market.curves import DiscountCurve

_Points = Table[CurvePointRow]


def read_curves(
    table: Table[CurveRow], points: _Points, valuation_date: date, findings: Findings
) -> dict[tuple[str, str], DiscountCurve]:
    """The usable curves by currency and collateral; a faulty row or point costs its curve."""
    rows = by_own_id(table, "curve", findings)
    _reject_rivals(table, list(rows.values()), findings)
    owned = by_owner(points, "curve", rows, findings)
    out: dict[tuple[str, str], DiscountCurve] = {}
    for name, row in rows.items():
        if not owned.get(name):
            found, mend = f"the curve {quoted(name)} without points", "Add its points to the table curve_points."
            fault = Fault("no-curve-points", found, "at least one point in the table curve_points", mend)
            findings.reject(name, [table.issue(row.number, "curve", fault)])
        if row.value is None or findings.is_rejected(name):
            continue
        curve = _curve(row.value, points, owned[name], valuation_date, findings)
        if curve is not None:
            out[curve.currency, curve.collateral] = curve
    return out


def _reject_rivals(table: Table[CurveRow], rows: Sequence[Row[CurveRow]], findings: Findings) -> None:
    """Two curves for one currency and collateral are both rejected: nobody knows which is meant."""
    first: dict[tuple[str, str], Row[CurveRow]] = {}
    for row in rows:
        if row.value is None:
            continue
        key = (row.value.currency, row.value.collateral)
        rival = first.setdefault(key, row)
        if rival is row or rival.value is None:
            continue
        under = f"under collateral {quoted(key[1])}" if key[1] else "without collateral"
        found = f"a second curve of {key[0]} {under}, as in row {rival.number}"
        fault = Fault(
            "duplicate-curve", found, "one curve per currency and collateral", "Delete or correct one of the two."
        )
        issue = table.issue(row.number, "curve", fault)
        findings.reject(row.value.curve, [issue])
        findings.charge(rival.value.curve, [issue])


@dataclass(frozen=True, slots=True)
class _Point:
    """A point of a curve: its date, and where and how it was given."""

    day: date
    value: float
    is_rate: bool
    row: int
    column: str  # of the date: "date" or "tenor"

    @property
    def value_column(self) -> str:
        return "zero_rate_decimal" if self.is_rate else "discount_factor"


def _curve(
    row: CurveRow, table: _Points, rows: Sequence[Row[CurvePointRow]], valuation_date: date, findings: Findings
) -> DiscountCurve | None:
    issues: list[Issue] = []
    points = [_point(point.value, point.number, row, valuation_date) for point in rows if point.value is not None]
    points.sort(key=lambda point: point.day)
    issues += [_not_after(table, p, valuation_date) for p in points if p.day <= valuation_date]
    points = [point for point in points if point.day > valuation_date]
    issues += _repeated(table, points)
    if len({point.is_rate for point in points}) > 1:
        odd = next(point for point in points if point.is_rate is not points[0].is_rate)
        expected = f"{points[0].value_column} in all points of curve {quoted(row.curve)}, or in none"
        fault = Fault("mixed-quotes", f"a {odd.value_column}", expected, "Give all points of a curve in one way.")
        issues.append(table.issue(odd.row, odd.value_column, fault))
    if not points:
        fault = Fault("no-curve-points", f"no point after {valuation_date}", "at least one", "Add points to the curve.")
        issues.append(table.issue(rows[0].number, "curve", fault))
    findings.reject(row.curve, issues)
    if findings.is_rejected(row.curve):
        return None
    make = DiscountCurve.from_zero_rates if points[0].is_rate else DiscountCurve.from_discount_factors
    try:
        return make(
            row.curve,
            row.currency,
            row.collateral,
            valuation_date,
            [point.day for point in points],
            [point.value for point in points],
            row.day_count,
            row.calendar or "NONE",
        )
    except ValueError as error:
        fault = Fault("unusable-curve", str(error), "points that make a curve", "Correct or delete the point named.")
        findings.reject(row.curve, [table.issue(points[0].row, "curve", fault)])
        return None


def _point(row: CurvePointRow, number: int, curve: CurveRow, valuation_date: date) -> _Point:
    is_rate = row.zero_rate_decimal is not None
    value = row.zero_rate_decimal if row.zero_rate_decimal is not None else row.discount_factor
    if row.date is not None:
        day, column = row.date, "date"
    else:
        day, column = add_tenor(curve.calendar or "NONE", valuation_date, row.tenor or ""), "tenor"
    return _Point(day, value or 0.0, is_rate, number, column)


def _not_after(table: _Points, point: _Point, valuation_date: date) -> Issue:
    """A discount factor of 1 tonight is true and needless; anything else that is not in the future is stale."""
    if point.day == valuation_date and not point.is_rate and point.value != 1.0:
        fault = Fault(
            "out-of-range", number_in_words(point.value), "1 on the valuation date", "Correct it, or delete the row."
        )
        return table.issue(point.row, point.value_column, fault)
    expected = f"a date after the valuation date {valuation_date}"
    fault = Fault("stale-point", f"the date {point.day}", expected, "Ignored. Delete the row.")
    return table.issue(point.row, point.column, fault, Severity.WARNING)


def _repeated(table: _Points, points: Sequence[_Point]) -> list[Issue]:
    first: dict[date, int] = {}
    issues = []
    for point in points:
        earlier = first.setdefault(point.day, point.row)
        if earlier != point.row:
            found = f"a second point on {point.day}, as in row {earlier}"
            fault = Fault("repeated-date", found, "each date once in a curve", "Delete one of the two rows.")
            issues.append(table.issue(point.row, point.column, fault))
    return issues
