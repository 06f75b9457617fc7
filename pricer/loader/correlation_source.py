"""The correlation matrix of a market: from its own table, or estimated from past levels."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from datetime import date

from pricer.core.issues import Issue
from pricer.loader.correlations import CorrelationTable, inverted, read_correlations
from pricer.loader.findings import Findings, as_warnings
from pricer.loader.history_correlations import correlations_of
from pricer.loader.price_history import PriceHistory, read_price_history
from pricer.loader.sheets import Sheet
from pricer.loader.table import Table
from pricer.loader.underlying_rows import PriceHistoryRow
from pricer.market.calendars import CURRENCY_CALENDARS
from pricer.market.correlation import CorrelationMatrix, Repair, checked
from pricer.market.correlation_completion import completed
from pricer.market.correlation_estimate import CorrelationEstimate
from pricer.market.fx import FxRates, currencies_of
from pricer.market.market import CORRELATIONS
from pricer.market.underlying import Underlying


@dataclass(frozen=True, slots=True)
class Correlations:
    """The matrix (None where there is no usable one), the repair it took, and what it was read or estimated from."""

    matrix: CorrelationMatrix | None = None
    repair: Repair | None = None
    source: CorrelationTable | PriceHistory | None = None
    estimate: CorrelationEstimate | None = None
    last_levels: Mapping[str, tuple[date, float]] = field(default_factory=dict)


def read_correlation_source(
    matrix: Sheet | None,
    past: Table[PriceHistoryRow] | None,
    estimated: bool,
    known: Sequence[str],
    underlyings: Mapping[str, Underlying],
    fx: FxRates,
    valuation_date: date,
    half_life: float,
    findings: Findings,
) -> Correlations:
    """Correlations of underlyings and currency pairs, from the ``matrix``, or ``estimated`` from the ``past``.

    ``known`` are all listed underlyings, ``underlyings`` those that are left. Pairs may stand either
    way round if the market has a rate or a volatility of them. If nothing is estimated from the past, it gives its
    last levels only, and its faults, which cost nothing then, are warnings.
    """
    pairs = [first + second for first, second in {**fx.quotes, **fx.volatilities}]
    names = [*known, *pairs, *map(inverted, pairs)]
    beside = Findings()
    history = None if past is None else read_price_history(past, names, valuation_date, beside)
    findings.add(beside.issues if estimated else as_warnings(beside.issues))
    last = {} if history is None else history.last_levels(valuation_date)
    if not estimated:
        return replace(Correlations() if matrix is None else _from_table(matrix, names, findings), last_levels=last)
    if history is None:
        return Correlations()
    wanted = [*underlyings, *(first + second for first, second in fx.volatilities)]
    calendars = _calendars(underlyings, [*pairs, *map(inverted, pairs)])
    found = correlations_of(history, wanted, valuation_date, half_life, calendars, findings)
    if found is None:
        return Correlations(source=history, last_levels=last)
    return Correlations(found.matrix, found.repair, history, found, last)


def _calendars(underlyings: Mapping[str, Underlying], pairs: Sequence[str]) -> dict[str, str]:
    """The calendars on which ids have levels; a rate has them where both currencies settle."""
    own = {name: underlying.calendar for name, underlying in underlyings.items()}
    for pair in pairs:
        settled = [CURRENCY_CALENDARS[currency] for currency in currencies_of(pair) if currency in CURRENCY_CALENDARS]
        if settled:
            own[pair] = "+".join(settled)
    return own


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
    for (a, b), issues in table.unknown.items():
        findings.charge(f"{CORRELATIONS}:{a}:{b}", issues)
    try:
        return Correlations(*checked(table.ids, completed(table.matrix)), table)
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
