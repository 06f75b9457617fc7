"""Repo rates of underlyings and the desk's own funding: what one pays, and what one earns, by date."""

from __future__ import annotations

from collections.abc import Mapping
from datetime import date

from pricer.core.issues import Issue
from pricer.loader.credit_rows import FundingRow
from pricer.loader.curve_points import Point, coming_points
from pricer.loader.faults import Fault
from pricer.loader.findings import Findings, by_owner
from pricer.loader.market_rows import UnderlyingRow
from pricer.loader.table import Row, Table
from pricer.loader.underlying_rows import RepoRow
from pricer.market.calendars import CURRENCY_CALENDARS
from pricer.market.funding import FundingCurve
from pricer.market.repo import RepoCurve

#: The key of ``Market.rejected`` under which unusable funding spreads are explained.
FUNDING = "funding"


def read_repo(
    table: Table[RepoRow] | None,
    underlyings: Mapping[str, Row[UnderlyingRow]],
    valuation_date: date,
    findings: Findings,
) -> dict[str, RepoCurve]:
    """The usable repo curves by underlying; a faulty row costs the underlying, whose forward would be wrong."""
    if table is None:
        return {}
    out: dict[str, RepoCurve] = {}
    for name, rows in by_owner(table, "underlying", underlyings, findings).items():
        underlying = underlyings[name].value
        if underlying is None:
            continue
        points, issues = coming_points(table, rows, underlying.calendar or "NONE", valuation_date)
        findings.reject(name, issues)
        if findings.is_rejected(name) or not points:
            continue
        try:
            out[name] = RepoCurve.from_zero_rates(
                name,
                underlying.currency,
                valuation_date,
                [point.day for point in points],
                [point.value.long_rate_decimal for point in points],
                [point.value.short_rate_decimal for point in points],
            )
        except ValueError as error:
            findings.reject(name, [_crossed(table, points, "short_rate_decimal", error)])
    return out


def read_funding(
    table: Table[FundingRow] | None, reporting_currency: str, valuation_date: date, findings: Findings
) -> FundingCurve | None:
    """The funding curve; None where there is none, or where a row of it is faulty.

    Tenors are counted on the calendar of the reporting currency.
    """
    if table is None or not table.rows:
        return None
    calendar = CURRENCY_CALENDARS.get(reporting_currency, "WEEKENDS")
    points, issues = coming_points(table, table.rows, calendar, valuation_date)
    findings.reject(FUNDING, [*(issue for row in table.rows for issue in row.issues), *issues])
    if findings.is_rejected(FUNDING) or not points:
        return None
    try:
        return FundingCurve.from_zero_spreads(
            valuation_date,
            [point.day for point in points],
            [point.value.borrowing_spread_decimal for point in points],
            [point.value.lending_spread_decimal for point in points],
        )
    except ValueError as error:
        findings.reject(FUNDING, [_crossed(table, points, "lending_spread_decimal", error)])
        return None


def _crossed(
    table: Table[RepoRow] | Table[FundingRow],
    points: list[Point[RepoRow]] | list[Point[FundingRow]],
    column: str,
    error: ValueError,
) -> Issue:
    """Zero rates in order whose forward rates are not; told at the date at which the span ends."""
    text = str(error)
    row = next((point.row for point in points if f"to {point.day} the forward" in text), points[0].row)
    fault = Fault(
        "rates-crossed",
        text,
        "forward rates earned that do not exceed those paid",
        "Correct the rates at the two ends of this span.",
    )
    return table.issue(row, column, fault)
