"""The correlation matrix of a market: from its own table, or estimated from past levels."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date

from pricer.core.issues import Issue
from pricer.loader.correlations import CorrelationTable, inverted, read_correlations
from pricer.loader.findings import Findings
from pricer.loader.history_correlations import correlations_of
from pricer.loader.price_history import PriceHistory, read_price_history
from pricer.loader.sheets import Sheet
from pricer.loader.table import Table
from pricer.loader.underlying_rows import PriceHistoryRow
from pricer.market.correlation import CorrelationMatrix, Repair, checked
from pricer.market.correlation_estimate import CorrelationEstimate
from pricer.market.fx import FxRates
from pricer.market.market import CORRELATIONS


@dataclass(frozen=True, slots=True)
class Correlations:
    """The matrix (None where there is no usable one), the repair it took, and what it was read or estimated from."""

    matrix: CorrelationMatrix | None = None
    repair: Repair | None = None
    source: CorrelationTable | PriceHistory | None = None
    estimate: CorrelationEstimate | None = None


def read_correlation_source(
    source: Sheet | Table[PriceHistoryRow] | None,
    known: Sequence[str],
    usable: Sequence[str],
    fx: FxRates,
    valuation_date: date,
    half_life: float,
    findings: Findings,
) -> Correlations:
    """Correlations of underlyings and currency pairs.

    ``known`` are all listed underlyings, ``usable`` those that are left. Pairs may stand either
    way round if the market has a rate or a volatility of them.
    """
    if source is None:
        return Correlations()
    pairs = [first + second for first, second in {**fx.quotes, **fx.volatilities}]
    names = [*known, *pairs, *map(inverted, pairs)]
    if isinstance(source, Sheet):
        return _from_table(source, names, findings)
    history = read_price_history(source, names, valuation_date, findings)
    wanted = [*usable, *(first + second for first, second in fx.volatilities)]
    found = correlations_of(history, wanted, valuation_date, half_life, findings)
    if found is None:
        return Correlations(source=history)
    return Correlations(found.matrix, found.repair, history, found)


def _from_table(sheet: Sheet, known: Sequence[str], findings: Findings) -> Correlations:
    if sheet.merged:
        ranges = ", ".join(merged.text for merged in sheet.merged)
        mend = "Unmerge them and fill in every cell."
        issue = Issue("merged-cells", f"the merged cells {ranges}", "one correlation in each cell", mend,
                      file=sheet.file, sheet=sheet.name)  # fmt: skip
        findings.reject(CORRELATIONS, [issue])
        return Correlations()
    table = read_correlations(sheet, known)
    findings.add(table.issues)
    for name, issues in table.refused.items():
        findings.charge(f"{CORRELATIONS}:{name}", issues)
    if not table.ids:
        findings.charge(CORRELATIONS, table.issues)
        return Correlations(source=table)
    try:
        return Correlations(*checked(table.ids, table.matrix), table)
    except ValueError as error:
        findings.reject(CORRELATIONS, [_contradiction(table, error)])
        return Correlations(source=table)


def _contradiction(table: CorrelationTable, error: ValueError) -> Issue:
    repair: Repair | None = getattr(error, "repair", None)
    where = None if repair is None else table.place(*repair.pair)
    return Issue(
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
