"""From the rows of a market to its underlyings, curves and correlations; one bad item costs only itself."""

from __future__ import annotations

from dataclasses import replace
from datetime import date
from pathlib import Path
from typing import Any, TypeVar

from pricer.core.issues import InputError, Issue, Severity
from pricer.loader.columns import TableRow, columns_of
from pricer.loader.correlation_source import read_correlation_source
from pricer.loader.credit_rows import AgreementRow, CreditRow, FundingRow
from pricer.loader.credit_spreads import read_credit
from pricer.loader.discount_curves import read_curves
from pricer.loader.exchange_rates import read_exchange_rates
from pricer.loader.faults import Fault
from pricer.loader.files import read_sheets
from pricer.loader.findings import Findings, as_warnings
from pricer.loader.fixings import read_fixings
from pricer.loader.headers import find_sheet, match_header, unread_sheets
from pricer.loader.market_places import Places
from pricer.loader.market_rows import (
    MARKET_ROWS,
    PRICE_HISTORY,
    TABLE,
    CurvePointRow,
    CurveRow,
    FxRow,
    FxVolatilityRow,
    SnapshotRow,
    UnderlyingRow,
)
from pricer.loader.netting_agreements import read_agreements
from pricer.loader.sheets import Sheet, Sheets
from pricer.loader.table import Table, read_table
from pricer.loader.text import quoted
from pricer.loader.two_sided_rates import read_funding
from pricer.loader.underlying_rows import DividendRow, FixingRow, PriceHistoryRow, RepoRow, VolatilityRow
from pricer.loader.underlyings import read_underlyings
from pricer.loader.volatilities import read_volatilities
from pricer.market import quality
from pricer.market.market import CORRELATIONS, Market
from pricer.market.market_quotes import MarketQuotes

R = TypeVar("R", bound=TableRow)

#: How grave it is that a table is missing; None, as for tables that are not named here: it may be.
_ABSENCE = {
    "snapshot": Severity.FATAL,
    "underlyings": Severity.FATAL,
    "curves": Severity.FATAL,
    "curve_points": Severity.FATAL,
    "volatilities": Severity.ERROR,
}


#: Kinds of the market's items, as its quality gates name them: the table, the columns of the id and that of the cell.
_CELLS: tuple[tuple[str, str, tuple[str, ...], str], ...] = (
    ("valuation_date", "snapshot", (), "valuation_date"),
    ("spot", "underlyings", ("underlying",), "spot"),
    ("dividend_yield", "underlyings", ("underlying",), "dividend_yield_decimal"),
    ("dividends", "dividends", ("underlying",), "underlying"),
    ("dividends", "dividends", ("underlying", "ex_date"), "ex_date"),
    ("repo", "repo", ("underlying",), "underlying"),
    ("repo", "repo", ("underlying", "date"), "date"),
    ("volatility", "volatilities", ("underlying", "expiry_date"), "volatility_decimal"),
    ("curve", "curves", ("curve",), "curve"),
    ("curve_points", "curve_points", ("curve", "tenor"), "tenor"),
    ("curve_points", "curve_points", ("curve", "date"), "date"),
    ("fx", "fx", ("pair",), "pair"),
    ("fx_volatilities", "fx_volatilities", ("pair",), "pair"),
    ("fx_volatilities", "fx_volatilities", ("pair", "expiry_date"), "volatility_decimal"),
    ("credit", "credit", ("name",), "name"),
    ("agreements", "agreements", ("netting_set",), "currency"),
    ("fixings", "fixings", ("underlying", "date"), "level"),
)


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
    dividends, repo_rows = tables.get("dividends", DividendRow), tables.get("repo", RepoRow)
    volatilities = tables.get("volatilities", VolatilityRow)
    fx_rows, fx_volatilities = tables.get("fx", FxRow), tables.get("fx_volatilities", FxVolatilityRow)
    credit_rows, funding_rows = tables.get("credit", CreditRow), tables.get("funding", FundingRow)
    agreement_rows, fixing_rows = tables.get("agreements", AgreementRow), tables.get("fixings", FixingRow)
    findings = tables.findings
    row = None if snapshot is None else _snapshot_row(snapshot, findings)
    matrix, past = (None, None) if row is None else tables.correlations(row.correlation_source)
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

    known = [name for other in underlying_rows.rows if isinstance(name := other.get("underlying"), str)]
    underlyings, repo = read_underlyings(underlying_rows, dividends, repo_rows, today, findings)
    curves = read_curves(curve_rows, point_rows, today, findings)

    levels, surfaces = read_volatilities(volatilities, known, underlyings, curves, repo, today, findings)
    underlyings = {name: replace(item, volatility=levels.get(name)) for name, item in underlyings.items()}
    fx = read_exchange_rates(fx_rows, fx_volatilities, today, findings)
    hazards, credit_quotes = read_credit(credit_rows, curves, findings)
    funding = read_funding(funding_rows, row.reporting_currency, today, findings)
    agreements = read_agreements(agreement_rows, findings)
    fixings = read_fixings(fixing_rows, known, findings)
    estimated, half_life = row.correlation_source == PRICE_HISTORY, row.correlation_half_life_days
    correlations = read_correlation_source(matrix, past, estimated, known, underlyings, fx, today, half_life, findings)
    if not underlyings or not curves:
        findings.add([_nothing_left(sheets, "underlying" if not underlyings else "curve")])
        raise InputError(findings.issues)

    market = Market(
        name=sheets.name,
        valuation_date=today,
        reporting_currency=row.reporting_currency,
        underlyings=underlyings,
        curves=curves,
        correlation=correlations.matrix,
        fx=fx,
        sources=sheets.sources,
        rejected=findings.rejected,
        surfaces=surfaces,
        repo=repo,
        credit=hazards,
        funding=funding,
        agreements=agreements,
        fixings=fixings,
        quotes=MarketQuotes(credit_quotes, correlations.estimate, correlations.last_levels),
    )
    place = Places(correlations.source)
    for kind, name, ids, shown in _CELLS:
        if name != "snapshot" or today == row.valuation_date:
            place.add(kind, tables.read.get(name), ids, shown)
    place.add_quotes(volatilities, market)
    review = quality.review(market, correlations.repair, place)
    findings.add(review.issues)
    for name, issues in review.refused.items():
        findings.charge(name, issues)
    return replace(market, issues=tuple(findings.issues), rejected=findings.rejected, doubts=review.doubts)


class _Tables:
    """The market's tables by name, with everything found about sheets and headers."""

    def __init__(self, sheets: Sheets) -> None:
        self._sheets = sheets
        self.findings = Findings(unread_sheets(sheets))
        self.read: dict[str, Table[Any]] = {}

    def get(self, name: str, model: type[R], absence: Severity | None = None) -> Table[R] | None:
        sheet = self._sheet(name, absence or _ABSENCE.get(name))
        if sheet is None:
            return None
        header, issues = match_header(sheet, columns_of(model))
        self.findings.add(issues)
        if header is None:
            return None
        table = self.read[name] = read_table(sheet, header, model)
        return table

    def correlations(self, source: str | None) -> tuple[Sheet | None, Table[PriceHistoryRow] | None]:
        """The matrix, unless correlations come from the price history, and that history.

        A warning if both are there and nobody chose.
        """
        if source == PRICE_HISTORY:
            return None, self.get("price_history", PriceHistoryRow, Severity.ERROR)
        history = self._sheet("price_history", None)
        if source is None and history is not None and len(history.rows) > 1:
            self.findings.add([_unused(history)])
        return self._sheet(CORRELATIONS, Severity.ERROR), self._beside(history)

    def _beside(self, history: Sheet | None) -> Table[PriceHistoryRow] | None:
        """A history from which no correlations come: what is wrong with it costs nothing."""
        if history is None or not history.rows:
            return None
        header, issues = match_header(history, columns_of(PriceHistoryRow))
        self.findings.add(as_warnings(issues))
        return None if header is None else read_table(history, header, PriceHistoryRow)

    def _sheet(self, name: str, absence: Severity | None) -> Sheet | None:
        sheet, issues = find_sheet(self._sheets, name, required=absence)
        self.findings.add(issues)
        return sheet

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
        mend = "Keep the row of this market." if table.rows else "Add the row of this market below the header."
        found = f"{len(table.rows)} rows" if table.rows else "no row"
        fault = Fault("not-one-row", found, "exactly one row", mend)
        findings.add([table.issue(row_number, "valuation_date", fault, Severity.FATAL)])
        return None
    return table.rows[0].value


def _unused(history: Sheet) -> Issue:
    return Issue(
        "unused-table",
        "a table price_history, and a blank correlation_source in the table snapshot",
        f"correlation_source {quoted(TABLE)} or {quoted(PRICE_HISTORY)}",
        "Correlations come from the table correlations, not from the history; say so in correlation_source.",
        Severity.WARNING,
        history.file,
        history.name,
    )


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
