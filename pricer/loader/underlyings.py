"""Underlyings with their dividends and volatilities, from three tables."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import date

from pricer.core.issues import Severity
from pricer.loader.faults import Fault
from pricer.loader.findings import Findings, by_own_id, by_owner, repeated_dates
from pricer.loader.market_rows import DividendRow, UnderlyingRow, VolatilityRow
from pricer.loader.table import Row, Table
from pricer.market.dividends import Dividends, ProportionalDividend
from pricer.market.underlying import Underlying
from pricer.market.volatility import CalendarArbitrageError, VolatilityCurve


def read_underlyings(
    table: Table[UnderlyingRow],
    dividends: Table[DividendRow] | None,
    volatilities: Table[VolatilityRow] | None,
    valuation_date: date,
    findings: Findings,
) -> dict[str, Underlying]:
    """The usable underlyings by id.

    A faulty row or dividend costs the underlying, a faulty volatility only its volatility.
    """
    rows = by_own_id(table, "underlying", findings)
    paid = {} if dividends is None else by_owner(dividends, "underlying", rows, findings)
    if dividends is not None:
        for name, payments in paid.items():
            findings.reject(name, repeated_dates(dividends, payments, "ex_date"))
    sound = [name for name in rows if not findings.is_rejected(name)]
    quotes = {} if volatilities is None else by_owner(volatilities, "underlying", rows, findings)
    out: dict[str, Underlying] = {}
    for name in sound:
        row = rows[name].value
        if row is None or row.calendar is None:
            continue
        curve = None
        if volatilities is not None and quotes.get(name):
            findings.reject(name, repeated_dates(volatilities, quotes[name], "expiry_date"))
            if not findings.is_rejected(name):
                curve = _volatility(volatilities, quotes[name], valuation_date, name, findings)
        given = [payment.value for payment in paid.get(name, ()) if payment.value is not None]
        proportional = [ProportionalDividend(dividend.ex_date, dividend.fraction_of_spot_decimal) for dividend in given]
        out[name] = Underlying(
            underlying_id=name,
            currency=row.currency,
            spot=row.spot,
            calendar=row.calendar,
            lot_size=row.lot_size,
            dividends=Dividends(row.dividend_yield_decimal, tuple(sorted(proportional, key=lambda d: d.ex_date))),
            volatility=curve,
        )
    return out


def _volatility(
    table: Table[VolatilityRow],
    rows: Sequence[Row[VolatilityRow]],
    valuation_date: date,
    name: str,
    findings: Findings,
) -> VolatilityCurve | None:
    quotes = {
        row.value.expiry_date: (row.value.volatility_decimal, row.number) for row in rows if row.value is not None
    }
    for day in [day for day in quotes if day <= valuation_date]:
        found, expected = f"the date {day}", f"an expiry after the valuation date {valuation_date}"
        fault = Fault("expired-quote", found, expected, "Ignored. Delete the row.")
        findings.add([table.issue(quotes.pop(day)[1], "expiry_date", fault, Severity.WARNING)])
    if not quotes:
        return None
    days = sorted(quotes)
    try:
        return VolatilityCurve.from_quotes(valuation_date, days, [quotes[day][0] for day in days])
    except CalendarArbitrageError as error:
        later = quotes[error.later]
        fault = Fault(
            "calendar-arbitrage",
            f"{later[0]:g}: {error}",
            "total variance (volatility squared times years) that does not fall with time",
            f"Correct this volatility or that of {error.earlier}.",
        )
        findings.reject(name, [table.issue(later[1], "volatility_decimal", fault)])
    except ValueError as error:
        fault = Fault(
            "unusable-volatilities", str(error), "a volatility curve", "Correct the underlying's volatilities."
        )
        findings.reject(name, [table.issue(quotes[days[0]][1], "volatility_decimal", fault)])
    return None
