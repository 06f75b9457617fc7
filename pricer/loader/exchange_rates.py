"""Exchange rates and their volatilities, from two tables."""

from __future__ import annotations

from datetime import date

from pricer.loader.correlations import both_ways, inverted
from pricer.loader.findings import Findings, by_name, by_own_id
from pricer.loader.market_rows import FxRow, FxVolatilityRow
from pricer.loader.table import Row, Table
from pricer.loader.volatilities import volatility_curve
from pricer.market.fx import FxRates
from pricer.market.volatility import VolatilityCurve

#: The keys of ``Market.rejected`` for volatilities of pairs begin so: "fx_volatilities:EURUSD".
FX_VOLATILITIES = "fx_volatilities"


def read_exchange_rates(
    rates: Table[FxRow] | None, volatilities: Table[FxVolatilityRow] | None, valuation_date: date, findings: Findings
) -> FxRates:
    """The usable rates and volatilities; a faulty pair, or one given both ways, is left out."""
    return FxRates.from_pairs(_pairs(rates, findings), _volatilities(volatilities, valuation_date, findings))


def _pairs(table: Table[FxRow] | None, findings: Findings) -> dict[str, float]:
    if table is None:
        return {}
    rows = by_own_id(table, "pair", findings)
    _reject_both_ways(table, rows, findings)
    return {name: row.value.spot for name, row in rows.items() if row.value and not findings.is_rejected(name)}


def _volatilities(
    table: Table[FxVolatilityRow] | None, valuation_date: date, findings: Findings
) -> dict[str, VolatilityCurve]:
    if table is None:
        return {}
    own = findings.under(FX_VOLATILITIES)
    rows = by_name(table, "pair", own)
    _reject_both_ways(table, {name: quotes[0] for name, quotes in rows.items()}, own)
    curves = {name: volatility_curve(table, quotes, valuation_date, name, own) for name, quotes in rows.items()}
    return {name: curve for name, curve in curves.items() if curve is not None}


def _reject_both_ways(
    table: Table[FxRow] | Table[FxVolatilityRow],
    rows: dict[str, Row[FxRow]] | dict[str, Row[FxVolatilityRow]],
    findings: Findings,
) -> None:
    first_rows: dict[str, int] = {name: row.number for name, row in rows.items()}
    for name, row in first_rows.items():
        inverse = first_rows.get(inverted(name))
        if inverse is not None:
            findings.reject(name, [table.issue(row, "pair", both_ways(name, inverse))])
