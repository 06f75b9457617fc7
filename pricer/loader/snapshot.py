"""From the rows of a market to its underlyings, curves and correlations; one bad item costs only itself."""

from __future__ import annotations

from dataclasses import replace
from datetime import date
from pathlib import Path
from typing import Any, TypeVar

from pricer.core.issues import InputError, Issue, Severity
from pricer.core.source import Place
from pricer.loader.columns import TableRow, columns_of
from pricer.loader.correlations import CorrelationTable, read_correlations
from pricer.loader.discount_curves import read_curves
from pricer.loader.faults import Fault
from pricer.loader.files import read_sheets
from pricer.loader.findings import Findings, by_own_id
from pricer.loader.headers import find_sheet, match_header, unread_sheets
from pricer.loader.market_rows import (
    MARKET_ROWS,
    CurvePointRow,
    CurveRow,
    DividendRow,
    FxRow,
    SnapshotRow,
    UnderlyingRow,
    VolatilityRow,
)
from pricer.loader.sheets import Sheet, Sheets
from pricer.loader.table import Table, read_table
from pricer.loader.underlyings import read_underlyings
from pricer.market import quality
from pricer.market.correlation import CorrelationMatrix, Repair, checked
from pricer.market.fx import FxRates
from pricer.market.market import CORRELATIONS, Market

R = TypeVar("R", bound=TableRow)

#: How grave it is that a table is missing; None: it may be.
_ABSENCE = {
    "snapshot": Severity.FATAL,
    "underlyings": Severity.FATAL,
    "curves": Severity.FATAL,
    "curve_points": Severity.FATAL,
    "volatilities": Severity.ERROR,
    CORRELATIONS: Severity.ERROR,
    "dividends": None,
    "fx": None,
}


def load_market(path: str | Path, *, valuation_date: date | None = None) -> Market:
    """The market in a workbook or in a folder of .csv files.

    ``valuation_date`` replaces the snapshot's own. What cannot be used is in
    ``Market.rejected`` with its issues; every problem is in ``Market.issues``. Raises
    :class:`InputError` with every problem found when no market is left.
    """
    sheets = read_sheets(path, (*MARKET_ROWS, CORRELATIONS))
    tables = _Tables(sheets)
    snapshot = tables.get("snapshot", SnapshotRow)
    underlying_rows = tables.get("underlyings", UnderlyingRow)
    curve_rows, point_rows = tables.get("curves", CurveRow), tables.get("curve_points", CurvePointRow)
    dividends, volatilities = tables.get("dividends", DividendRow), tables.get("volatilities", VolatilityRow)
    fx_rows = tables.get("fx", FxRow)
    correlation_sheet = tables.sheet(CORRELATIONS)
    findings = tables.findings
    row = None if snapshot is None else _snapshot_row(snapshot, findings)
    if underlying_rows is None or curve_rows is None or point_rows is None or row is None or tables.are_fatal():
        raise InputError(findings.issues)

    if dividends is None:
        findings.add([_no_dividends(sheets)])
    today = row.valuation_date
    if valuation_date is not None and valuation_date != today and snapshot is not None:
        mend = f"Valued at {valuation_date} as asked; tenors count from there."
        note = Fault("other-valuation-date", f"the snapshot date {today}", f"the asked date {valuation_date}", mend)
        findings.add([snapshot.issue(snapshot.rows[0].number, "valuation_date", note, Severity.WARNING)])
        today = valuation_date

    underlyings = read_underlyings(underlying_rows, dividends, volatilities, today, findings)
    curves = read_curves(curve_rows, point_rows, today, findings)
    fx = FxRates.from_pairs(_pairs(fx_rows, findings))
    matrix = None if correlation_sheet is None else _matrix(correlation_sheet, underlying_rows, findings)
    correlation, repair = _checked(matrix, list(underlyings), findings)
    if not underlyings or not curves:
        findings.add([_nothing_left(sheets, "underlying" if not underlyings else "curve")])
        raise InputError(findings.issues)

    market = Market(
        name=sheets.name,
        valuation_date=today,
        reporting_currency=row.reporting_currency,
        underlyings=underlyings,
        curves=curves,
        correlation=correlation,
        fx=fx,
        sources=sheets.sources,
        rejected=findings.rejected,
    )
    place = _Places(snapshot if today == row.valuation_date else None, underlying_rows, curve_rows, dividends, fx_rows,
                    matrix)  # fmt: skip
    findings.add(quality.gates(market, repair, place))
    return replace(market, issues=tuple(findings.issues))


class _Tables:
    """The market's tables by name, with everything found about sheets and headers."""

    def __init__(self, sheets: Sheets) -> None:
        self._sheets = sheets
        self.findings = Findings(unread_sheets(sheets))

    def sheet(self, name: str) -> Sheet | None:
        sheet, issues = find_sheet(self._sheets, name, required=_ABSENCE[name])
        self.findings.add(issues)
        return sheet

    def get(self, name: str, model: type[R]) -> Table[R] | None:
        sheet = self.sheet(name)
        if sheet is None:
            return None
        header, issues = match_header(sheet, columns_of(model))
        self.findings.add(issues)
        return None if header is None else read_table(sheet, header, model)

    def are_fatal(self) -> bool:
        return any(issue.severity is Severity.FATAL for issue in self.findings.issues)


def _snapshot_row(table: Table[SnapshotRow], findings: Findings) -> SnapshotRow | None:
    """The one row that says when; a fault in it is fatal."""
    for row in table.rows:
        findings.add(
            replace(issue, severity=Severity.FATAL) if issue.severity is Severity.ERROR else issue
            for issue in row.issues
        )
    if len(table.rows) != 1:
        row_number = table.rows[1].number if table.rows else table.header.row
        fault = Fault("not-one-row", f"{len(table.rows)} rows", "exactly one row", "Keep the row of this market.")
        findings.add([table.issue(row_number, "valuation_date", fault, Severity.FATAL)])
        return None
    return table.rows[0].value


def _pairs(table: Table[FxRow] | None, findings: Findings) -> dict[str, float]:
    """Quotes by pair; a faulty pair, or one quoted both ways, is left out."""
    if table is None:
        return {}
    rows = by_own_id(table, "pair", findings)
    for name, row in rows.items():
        inverse = rows.get(name[3:] + name[:3])
        if inverse is not None:
            fault = Fault("pair-both-ways", f"the pair {name}, and its inverse in row {inverse.number}",
                          "each pair of currencies in one direction", "Delete one of the two rows.")  # fmt: skip
            findings.reject(name, [table.issue(row.number, "pair", fault)])
    return {name: row.value.spot for name, row in rows.items() if row.value and not findings.is_rejected(name)}


def _matrix(sheet: Sheet, underlyings: Table[UnderlyingRow], findings: Findings) -> CorrelationTable | None:
    if sheet.merged:
        ranges = ", ".join(merged.text for merged in sheet.merged)
        mend = "Unmerge them and fill in every cell."
        issue = Issue("merged-cells", f"the merged cells {ranges}", "one correlation in each cell", mend,
                      file=sheet.file, sheet=sheet.name)  # fmt: skip
        findings.reject(CORRELATIONS, [issue])
        return None
    known = [name for row in underlyings.rows if isinstance(name := row.get("underlying"), str)]
    matrix = read_correlations(sheet, known)
    findings.add(matrix.issues)
    for name, issues in matrix.refused.items():
        findings.charge(f"{CORRELATIONS}:{name}", issues)
    if not matrix.ids:
        findings.charge(CORRELATIONS, matrix.issues)
    return matrix


def _checked(
    table: CorrelationTable | None, underlyings: list[str], findings: Findings
) -> tuple[CorrelationMatrix | None, Repair | None]:
    """The matrix as the market trusts it; None with an issue where it contradicts itself too much."""
    if table is None or not table.ids:
        return None, None
    try:
        return checked(table.ids, table.matrix)
    except ValueError as error:
        repair: Repair | None = getattr(error, "repair", None)
        where = None if repair is None else table.place(*repair.pair)
        issue = Issue(
            "inconsistent-correlations",
            str(error),
            "correlations that can hold together (no negative eigenvalue)",
            "Review the correlations of this pair, or estimate all of them from the same history.",
            file=table.sheet.file,
            sheet=table.sheet.name,
            row=None if where is None else where.row,
            column=None if where is None else where.column,
            cell=None if where is None else where.cell,
        )
        findings.reject(CORRELATIONS, [issue])
        return None, None


def _no_dividends(sheets: Sheets) -> Issue:
    """They may have been left out on purpose, or forgotten: forwards differ."""
    return Issue(
        "no-dividends",
        "no table dividends",
        "a table named dividends, which may be empty",
        "No discrete dividends are known: forwards fall by dividend yields only. Add the table, empty if there are "
        "none.",
        Severity.WARNING,
        sheets.file,
    )


def _nothing_left(sheets: Sheets, what: str) -> Issue:
    return Issue(
        f"no-{what}s",
        f"no usable {what}",
        f"at least one {what}",
        "Mend the problems listed, or add what is missing.",
        Severity.FATAL,
        sheets.file,
    )


class _Places:
    """Where the market's items stand, by the keys of :func:`pricer.market.quality.gates`."""

    def __init__(
        self,
        snapshot: Table[SnapshotRow] | None,
        underlyings: Table[UnderlyingRow],
        curves: Table[CurveRow],
        dividends: Table[DividendRow] | None,
        fx: Table[FxRow] | None,
        matrix: CorrelationTable | None,
    ) -> None:
        self._matrix = matrix
        tables: list[tuple[str, Table[Any] | None, str, str]] = [  # the key, its id's column, the column shown
            ("dividend_yield", underlyings, "underlying", "dividend_yield_decimal"),
            ("curve", curves, "curve", "curve"),
            ("dividends", dividends, "underlying", "underlying"),
            ("fx", fx, "pair", "pair"),
        ]
        self._cells = {
            f"{key}:{row.get(name)}": table.place(row.number, column)
            for key, table, name, column in tables
            if table is not None
            for row in reversed(table.rows)
        }
        if snapshot is not None:
            self._cells["valuation_date"] = snapshot.place(snapshot.rows[0].number, "valuation_date")

    def __call__(self, key: str) -> Place | None:
        kind, _, rest = key.partition(":")
        if kind != "correlation" or self._matrix is None:
            return self._cells.get(key)
        first, _, second = rest.partition(":")
        return self._matrix.place(first, second)
