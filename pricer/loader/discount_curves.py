"""Discount curves from the tables of curves and of their points."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date

from pricer.core.issues import Issue
from pricer.loader.curve_points import dated, no_points, repeated_points, stale_point
from pricer.loader.faults import Fault, number_in_words
from pricer.loader.findings import Findings, by_own_id, by_owner
from pricer.loader.market_rows import CurvePointRow, CurveRow
from pricer.loader.table import Row, Table
from pricer.loader.text import quoted
from pricer.market.curves import DiscountCurve
from pricer.market.quoted_curves import CONVENTIONS, QuoteKind, RateQuote

_Points = Table[CurvePointRow]

#: The columns of quoted rates, and what they quote.
_QUOTES = {"deposit_rate_decimal": QuoteKind.DEPOSIT, "overnight_swap_rate_decimal": QuoteKind.OVERNIGHT_SWAP}
_VALUES = ("zero_rate_decimal", "discount_factor", *_QUOTES)


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
    row: int
    column: str  # of the date: "date" or "tenor"
    value_column: str
    tenor: str | None

    @property
    def is_factor(self) -> bool:
        return self.value_column == "discount_factor"

    @property
    def quote(self) -> RateQuote | None:
        """What is quoted, if the value is a quoted rate."""
        kind = _QUOTES.get(self.value_column)
        return None if kind is None else RateQuote(kind, self.tenor or "", self.value)

    @property
    def way(self) -> str:
        """How the point is given, in the words of messages: points of one curve are given in one way."""
        return "quoted rate" if self.value_column in _QUOTES else self.value_column


def _curve(
    row: CurveRow, table: _Points, rows: Sequence[Row[CurvePointRow]], valuation_date: date, findings: Findings
) -> DiscountCurve | None:
    issues: list[Issue] = []
    points = [_point(point.value, point.number, row, valuation_date) for point in rows if point.value is not None]
    points.sort(key=lambda point: point.day)
    issues += [_not_after(table, p, valuation_date) for p in points if p.day <= valuation_date]
    points = [point for point in points if point.day > valuation_date]
    plain = [point for point in points if point.quote is None]
    issues += repeated_points(table, [(point.day, point.row, point.column) for point in plain])
    issues += _repeated_quotes(table, [point for point in points if point.quote is not None])
    if len({point.way for point in points}) > 1:
        odd = next(point for point in points if point.way != points[0].way)
        expected = f"a {points[0].way} in all points of curve {quoted(row.curve)}, or in none"
        found = f"the {odd.value_column} {number_in_words(odd.value)}"
        fault = Fault("mixed-quotes", found, expected, "Give all points of a curve in one way.")
        issues.append(table.issue(odd.row, odd.value_column, fault))
    elif points and points[0].quote is not None and row.currency not in CONVENTIONS:
        fault = Fault(
            "no-conventions",
            f"a quoted rate in {row.currency}",
            f"quoted rates in {', '.join(CONVENTIONS)} only, whose conventions are known",
            "Give zero rates or discount factors in all points of the curve.",
        )
        issues.append(table.issue(points[0].row, points[0].value_column, fault))
    if not points:
        issues.append(no_points(table, rows[0].number, "curve", valuation_date))
    findings.reject(row.curve, issues)
    if findings.is_rejected(row.curve):
        return None
    quotes = tuple(point.quote for point in points if point.quote is not None)
    try:
        return _made(row, points, quotes, valuation_date)
    except ValueError as error:
        text = str(error)
        last = max((p for p in points if p.quote is not None and str(p.quote) in text), key=_day, default=points[0])
        column = last.value_column if last.quote is not None else "curve"
        fault = Fault("unusable-curve", text, "points that make a curve", "Correct or delete the point named.")
        findings.reject(row.curve, [table.issue(last.row, column, fault)])
        return None


def _made(row: CurveRow, points: Sequence[_Point], quotes: Sequence[RateQuote], valuation_date: date) -> DiscountCurve:
    if quotes:
        return DiscountCurve.from_quotes(row.curve, row.currency, row.collateral, valuation_date, quotes, row.day_count)
    make = DiscountCurve.from_discount_factors if points[0].is_factor else DiscountCurve.from_zero_rates
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


def _day(point: _Point) -> date:
    return point.day


def _point(row: CurvePointRow, number: int, curve: CurveRow, valuation_date: date) -> _Point:
    day, column = dated(row, curve.calendar or "NONE", valuation_date)
    value_column = next(name for name in _VALUES if getattr(row, name) is not None)
    return _Point(day, getattr(row, value_column), number, column, value_column, row.tenor)


def _not_after(table: _Points, point: _Point, valuation_date: date) -> Issue:
    """A discount factor of 1 tonight is true and needless; anything else that is not in the future is stale."""
    if point.day == valuation_date and point.is_factor and point.value != 1.0:
        fault = Fault(
            "out-of-range", number_in_words(point.value), "1 on the valuation date", "Correct it, or delete the row."
        )
        return table.issue(point.row, point.value_column, fault)
    return stale_point(table, point.row, point.column, point.day, valuation_date)


def _repeated_quotes(table: _Points, points: Sequence[_Point]) -> list[Issue]:
    """A deposit and a swap of one tenor end on different days or are told by the bootstrap; two of a kind never do."""
    first: dict[tuple[str, str | None], int] = {}
    issues = []
    for point in points:
        earlier = first.setdefault((point.value_column, point.tenor), point.row)
        if earlier != point.row:
            found = f"a second {point.value_column} of {point.tenor}, as in row {earlier}"
            fault = Fault("repeated-tenor", found, "each tenor once for a kind of quote", "Delete one of the two rows.")
            issues.append(table.issue(point.row, "tenor", fault))
    return issues
