"""The tables of a market. The correlations are a matrix and have their own reader."""

from __future__ import annotations

from collections.abc import Mapping
from datetime import date
from types import MappingProxyType
from typing import Annotated

from pydantic import ValidationInfo, field_validator

from pricer.loader.columns import Column, TableRow
from pricer.loader.days import Day
from pricer.loader.faults import blank_cell, unwanted
from pricer.loader.names import CalendarName, Choice, Currency, CurrencyPair, Identifier, Tenor
from pricer.loader.numbers import Number
from pricer.market.calendars import CURRENCY_CALENDARS, DAY_COUNTS

#: Decimals beyond these sizes are percentage points in the wrong place.
HIGHEST_VOLATILITY, HIGHEST_RATE, HIGHEST_DISCOUNT_FACTOR = 3.0, 1.0, 3.0


class SnapshotRow(TableRow):
    """When the market was taken, and the currency of totals."""

    valuation_date: Annotated[date, Column(Day(), "the date of the snapshot", "2026-03-31")]
    reporting_currency: Annotated[str, Column(Currency(), "the currency of all totals", "EUR")]


class _OnCalendar(TableRow):
    """Shared rule: a blank calendar is the currency's own, if it has one."""

    @field_validator("calendar", check_fields=False)
    @classmethod
    def fill_calendar(cls, calendar: str | None, info: ValidationInfo) -> str | None:
        currency = info.data.get("currency")
        if calendar is not None or currency is None:
            return calendar
        if currency not in CURRENCY_CALENDARS:
            raise blank_cell(f"none is known for {currency}")
        return CURRENCY_CALENDARS[currency]


class UnderlyingRow(_OnCalendar):
    """A share or index."""

    underlying: Annotated[str, Column(Identifier(), "the underlying's id", "ORLUMA")]
    currency: Annotated[str, Column(Currency(), "the currency of its price", "EUR")]
    spot: Annotated[float, Column(Number(above=0.0), "its price", "84.20", "in its currency")]
    calendar: Annotated[
        str | None,
        Column(CalendarName(), "its trading calendar", "TARGET", "", None, "for the currency's own calendar"),
    ]
    lot_size: Annotated[
        float, Column(Number(above=0.0), "the number of shares that trade together", "1", "", 1.0, "for 1")
    ]
    dividend_yield_decimal: Annotated[
        float,
        Column(
            Number(percent=True, decimal_limit=HIGHEST_RATE),
            "its continuous dividend yield per year",
            "0.021",
            "as a decimal (0.021 = 2.1 %)",
            0.0,
            "for none",
        ),
    ]


class DividendRow(TableRow):
    """A proportional dividend."""

    underlying: Annotated[str, Column(Identifier(), "the id of an underlying in the table underlyings", "ORLUMA")]
    ex_date: Annotated[date, Column(Day(), "the ex-dividend date", "2027-05-12")]
    fraction_of_spot_decimal: Annotated[
        float,
        Column(
            Number(at_least=0.0, below=1.0, percent=True, decimal_limit=1.0),
            "the part of the price that is paid out",
            "0.018",
            "as a decimal (0.018 = 1.8 %)",
        ),
    ]


class VolatilityRow(TableRow):
    """The implied volatility of an underlying for one expiry."""

    underlying: Annotated[str, Column(Identifier(), "the id of an underlying in the table underlyings", "ORLUMA")]
    expiry_date: Annotated[date, Column(Day(), "the expiry date of the quote", "2027-06-18")]
    volatility_decimal: Annotated[
        float,
        Column(
            Number(above=0.0, percent=True, decimal_limit=HIGHEST_VOLATILITY),
            "the volatility per year",
            "0.225",
            "as a decimal (0.225 = 22.5 %)",
        ),
    ]


class CurveRow(_OnCalendar):
    """A discount curve and its conventions."""

    curve: Annotated[str, Column(Identifier(), "the curve's id", "EUR-STANDARD")]
    currency: Annotated[str, Column(Currency(), "the currency that it discounts", "EUR")]
    collateral: Annotated[
        str,
        Column(Identifier(), "the collateral that it stands for", "USD", "", "", "for the currency's standard curve"),
    ]
    day_count: Annotated[str, Column(Choice.of(DAY_COUNTS), "the day count of its rates", "ACT/365F")]
    calendar: Annotated[
        str | None,
        Column(CalendarName(), "the calendar of its tenors", "TARGET", "", None, "for the currency's own calendar"),
    ]


class CurvePointRow(TableRow):
    """One point of a curve: a date or a tenor, a zero rate or a discount factor."""

    curve: Annotated[str, Column(Identifier(), "the id of a curve in the table curves", "EUR-STANDARD")]
    date: Annotated[date | None, Column(Day(), "the point's date", "2027-03-31", "", None, "where there is a tenor")]
    tenor: Annotated[str | None, Column(Tenor(), "the point's tenor", "1Y", "", None, "where there is a date")]
    zero_rate_decimal: Annotated[
        float | None,
        Column(
            Number(percent=True, decimal_limit=HIGHEST_RATE),
            "the zero rate, continuously compounded",
            "0.0225",
            "as a decimal (0.0225 = 2.25 %)",
            None,
            "where there is a discount factor",
        ),
    ]
    discount_factor: Annotated[
        float | None,
        Column(
            Number(above=0.0, decimal_limit=HIGHEST_DISCOUNT_FACTOR),
            "the discount factor",
            "0.9777",
            "",
            None,
            "where there is a zero rate",
        ),
    ]

    @field_validator("tenor", "discount_factor")
    @classmethod
    def check_one_of_two(cls, value: object, info: ValidationInfo) -> object:
        other = "date" if info.field_name == "tenor" else "zero_rate_decimal"
        if other not in info.data:
            return value
        first = info.data[other]
        if first is None and value is None:
            raise blank_cell(f"there is no {other} either")
        if first is not None and value is not None:
            raise unwanted(value, f"points without a {other}", other)
        return value


class FxRow(TableRow):
    """A spot exchange rate."""

    pair: Annotated[
        str, Column(CurrencyPair(), "two currencies, the second being counted per unit of the first", "EURUSD")
    ]
    spot: Annotated[
        float, Column(Number(above=0.0), "the rate", "1.1032", "in units of the second for one of the first")
    ]


#: The tables of a market, in the order of the templates; correlations come after volatilities.
MARKET_ROWS: Mapping[str, type[TableRow]] = MappingProxyType(
    {
        "snapshot": SnapshotRow,
        "underlyings": UnderlyingRow,
        "dividends": DividendRow,
        "volatilities": VolatilityRow,
        "curves": CurveRow,
        "curve_points": CurvePointRow,
        "fx": FxRow,
    }
)
