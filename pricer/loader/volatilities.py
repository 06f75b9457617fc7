"""Volatilities of underlyings: a curve where only those at the forward are known, else a surface."""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from datetime import date
from typing import TypeVar

from pricer.core.issues import Issue, Severity
from pricer.loader.faults import Fault
from pricer.loader.findings import Findings, by_owner, repeated_dates
from pricer.loader.market_rows import FxVolatilityRow
from pricer.loader.table import Row, Table
from pricer.loader.underlying_rows import VolatilityRow
from pricer.market.affine_price import AffinePrice
from pricer.market.checked_surface import (
    CheckedSurface,
    QuoteFault,
    UnusableQuotesError,
    VolatilityQuote,
    build_surface,
)
from pricer.market.curves import DiscountCurve
from pricer.market.repo import RepoCurve
from pricer.market.underlying import Underlying
from pricer.market.volatility import CalendarArbitrageError, VolatilityCurve

V = TypeVar("V", VolatilityRow, FxVolatilityRow)

Curves = Mapping[tuple[str, str], DiscountCurve]


def read_volatilities(
    table: Table[VolatilityRow] | None,
    known: Collection[str],
    underlyings: Mapping[str, Underlying],
    discount_curves: Curves,
    repo: Mapping[str, RepoCurve],
    valuation_date: date,
    findings: Findings,
) -> tuple[dict[str, VolatilityCurve], dict[str, CheckedSurface]]:
    """Curves and surfaces by underlying; a faulty quote costs its underlying's volatility only.

    ``known`` are the ids of all underlyings, also of those that cannot be used.
    """
    curves: dict[str, VolatilityCurve] = {}
    surfaces: dict[str, CheckedSurface] = {}
    if table is None:
        return curves, surfaces
    quotes = by_owner(table, "underlying", known, findings)
    for name, underlying in underlyings.items():
        rows = quotes.get(name)
        if not rows:
            continue
        usable = [row.value for row in rows if row.value is not None]
        if all(quote.is_flat for quote in usable):
            curve = volatility_curve(table, rows, valuation_date, name, findings)
            if curve is not None:
                curves[name] = curve
            continue
        held = repo.get(name)
        growth = discount_curves.get((underlying.currency, "")) if held is None else held.mid
        surface = _surface(table, rows, underlying, growth, valuation_date, findings)
        if surface is not None:
            surfaces[name] = surface
    return curves, surfaces


def volatility_curve(
    table: Table[V], rows: Sequence[Row[V]], valuation_date: date, name: str, findings: Findings
) -> VolatilityCurve | None:
    """The curve through one volatility per expiry; None where there is no usable one."""
    findings.reject(name, repeated_dates(table, rows, "expiry_date"))
    if findings.is_rejected(name):
        return None
    coming = _coming(table, rows, valuation_date, findings)
    if not coming:
        return None
    quotes = {value.expiry_date: (value.volatility_decimal, number) for number, value in coming}
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
        fault = Fault("unusable-volatilities", str(error), "a volatility curve", "Correct the volatilities.")
        findings.reject(name, [table.issue(quotes[days[0]][1], "volatility_decimal", fault)])
    return None


def _coming(table: Table[V], rows: Sequence[Row[V]], valuation_date: date, findings: Findings) -> list[tuple[int, V]]:
    """Row numbers and values of the quotes that are not over; the others are told, once per expiry."""
    given = [(row.number, row.value) for row in rows if row.value is not None]
    over: dict[date, list[int]] = {}
    for number, value in given:
        if value.expiry_date <= valuation_date:
            over.setdefault(value.expiry_date, []).append(number)
    for day, numbers in over.items():
        more = f" (and {len(numbers) - 1} more rows)" if len(numbers) > 1 else ""
        expected = f"an expiry after the valuation date {valuation_date}"
        mend = "Ignored. Delete the rows." if more else "Ignored. Delete the row."
        fault = Fault("expired-quote", f"the date {day}{more}", expected, mend)
        findings.add([table.issue(numbers[0], "expiry_date", fault, Severity.WARNING)])
    return [(number, value) for number, value in given if value.expiry_date > valuation_date]


def _surface(
    table: Table[VolatilityRow],
    rows: Sequence[Row[VolatilityRow]],
    underlying: Underlying,
    growth: DiscountCurve | None,
    valuation_date: date,
    findings: Findings,
) -> CheckedSurface | None:
    name = underlying.underlying_id
    if findings.is_rejected(name):
        return None
    coming = _coming(table, rows, valuation_date, findings)
    if not coming:
        return None
    if growth is None:
        reason = f"{underlying.currency} has no usable standard curve"
        findings.reject(name, [_no_forward(table, coming[0][0], name, reason)])
        return None
    try:
        price = AffinePrice.of(name, underlying.spot, underlying.dividends, growth)
    except ValueError as error:  # cash dividends above the spot, which the quality gates tell at their own cell
        findings.charge(name, [_no_forward(table, coming[0][0], name, str(error))])
        return None
    quotes = [_quote(value) for _, value in coming]
    try:
        return build_surface(name, price, valuation_date, quotes)
    except UnusableQuotesError as error:
        findings.reject(name, [_unusable(table, coming, quotes, price, fault) for fault in error.faults])
    except ValueError as error:
        fault = Fault("unusable-volatilities", str(error), "a volatility surface", "Correct the volatilities.")
        findings.reject(name, [table.issue(coming[0][0], "volatility_decimal", fault)])
    return None


def _no_forward(table: Table[VolatilityRow], row: int, name: str, reason: str) -> Issue:
    fault = Fault(
        "no-forward",
        f"quotes by strike or skew of {name}, which has no forward: {reason}",
        "an underlying with a forward, from which strikes are measured",
        "Mend the underlying's curve or dividends first.",
    )
    return table.issue(row, "volatility_decimal", fault)


def _quote(row: VolatilityRow) -> VolatilityQuote:
    return VolatilityQuote(
        row.expiry_date,
        row.volatility_decimal,
        row.strike,
        row.strike_of_forward_decimal,
        row.skew_decimal,
        row.curvature_decimal,
    )


def _unusable(
    table: Table[VolatilityRow],
    coming: Sequence[tuple[int, VolatilityRow]],
    quotes: Sequence[VolatilityQuote],
    price: AffinePrice,
    fault: QuoteFault,
) -> Issue:
    """The fault at the row of its quote; of two at one strike, the later."""
    strike = fault.strike
    own = [
        (row, quote) for (row, _), quote in zip(coming, quotes, strict=True) if quote.expiry_date == fault.expiry_date
    ]
    row = own[0][0]
    if strike is not None:
        forward = price.at(fault.expiry_date).forward
        row = min(reversed(own), key=lambda item: abs(item[1].on(forward) - strike))[0]
    told = Fault("unusable-quote", fault.found, fault.expected, fault.mend)
    return table.issue(row, "volatility_decimal", told)
