"""The tables of a market. The correlations are a matrix and have their own reader."""

from __future__ import annotations

from collections.abc import Mapping
from datetime import date
from types import MappingProxyType
from typing import Annotated

from pydantic import ValidationInfo, field_validator

from pricer.loader.columns import Column, TableRow
from pricer.loader.credit_rows import AgreementRow, CreditRow, FundingRow
from pricer.loader.days import Day
from pricer.loader.faults import unwanted
from pricer.loader.market_columns import (
    HIGHEST_DISCOUNT_FACTOR,
    DateOrTenor,
    OnCalendar,
    at_most_one,
    exactly_one,
    point_date,
    point_tenor,
    rate,
    volatility,
)
from pricer.loader.names import CalendarName, Choice, Currency, CurrencyPair, Identifier
from pricer.loader.numbers import Number
from pricer.loader.underlying_rows import DividendRow, FixingRow, PriceHistoryRow, RepoRow, VolatilityRow
from pricer.market.calendars import DAY_COUNTS
from pricer.market.correlation_estimate import HistoryRules

#: Where correlations come from.
TABLE, PRICE_HISTORY = "table", "price history"

DEFAULT_RULES = HistoryRules()


class SnapshotRow(TableRow):
    """When the market was taken, and the currency of totals."""

    valuation_date: Annotated[date, Column(Day(), "the date of the snapshot", "2026-03-31")]
    reporting_currency: Annotated[str, Column(Currency(), "the currency of all totals", "EUR")]
    correlation_source: Annotated[
        str | None,
        Column(
            Choice.of([TABLE, PRICE_HISTORY]),
            "where correlations come from",
            TABLE,
            "table: the table correlations; price history: an estimate from the table price_history",
            None,
            "for the table correlations",
        ),
    ]
    correlation_half_life_days: Annotated[
        float,
        Column(
            Number(above=0.0),
            "the age at which a past return counts half",
            "120",
            "in business days, for correlations from the price history",
            DEFAULT_RULES.half_life,
            f"for {DEFAULT_RULES.half_life:g}",
        ),
    ]


class UnderlyingRow(OnCalendar):
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
        rate("its continuous dividend yield per year", "0.021", "as a decimal (0.021 = 2.1 %)", 0.0, "for none"),
    ]


class CurveRow(OnCalendar):
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


class CurvePointRow(DateOrTenor):
    """One point of a curve: a date or a tenor, and a zero rate, a discount factor or a quoted rate."""

    curve: Annotated[str, Column(Identifier(), "the id of a curve in the table curves", "EUR-STANDARD")]
    date: Annotated[date | None, point_date()]
    tenor: Annotated[str | None, point_tenor()]
    zero_rate_decimal: Annotated[
        float | None,
        rate(
            "the zero rate, continuously compounded",
            "0.0225",
            "as a decimal (0.0225 = 2.25 %)",
            None,
            "where there is a discount factor or a quoted rate",
        ),
    ]
    deposit_rate_decimal: Annotated[
        float | None,
        rate(
            "the quoted rate of a deposit of this tenor",
            "0.0195",
            "simple, by the money market's day count, as a decimal (0.0195 = 1.95 %)",
            None,
            "where there is another kind of value",
        ),
    ]
    overnight_swap_rate_decimal: Annotated[
        float | None,
        rate(
            "the quoted fixed rate of a swap of this tenor against the overnight rate",
            "0.0212",
            "as a decimal (0.0212 = 2.12 %)",
            None,
            "where there is another kind of value",
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
            "where there is a rate",
        ),
    ]

    @field_validator("deposit_rate_decimal", "overnight_swap_rate_decimal")
    @classmethod
    def check_quote(cls, quote: float | None, info: ValidationInfo) -> float | None:
        """Quotes run for a tenor: the market's conventions turn it into dates."""
        earlier = ("zero_rate_decimal", "deposit_rate_decimal")
        quote = at_most_one(quote, info, *(name for name in earlier if name != info.field_name))
        if quote is not None and info.data.get("date") is not None:
            raise unwanted(quote, "rows with a tenor", "date")
        return quote

    @field_validator("discount_factor")
    @classmethod
    def check_one_value(cls, factor: float | None, info: ValidationInfo) -> float | None:
        return exactly_one(factor, info, "zero_rate_decimal", "deposit_rate_decimal", "overnight_swap_rate_decimal")


class FxRow(TableRow):
    """A spot exchange rate."""

    pair: Annotated[
        str, Column(CurrencyPair(), "two currencies, the second being counted per unit of the first", "EURUSD")
    ]
    spot: Annotated[
        float, Column(Number(above=0.0), "the rate", "1.1032", "in units of the second for one of the first")
    ]


class FxVolatilityRow(TableRow):
    """The implied volatility of an exchange rate for one expiry."""

    pair: Annotated[str, Column(CurrencyPair(), "two currencies, in either order", "EURUSD")]
    expiry_date: Annotated[date, Column(Day(), "the expiry date of the quote", "2027-06-18")]
    volatility_decimal: Annotated[float, volatility()]


#: The tables of a market, in the order of the templates; correlations come after volatilities.
MARKET_ROWS: Mapping[str, type[TableRow]] = MappingProxyType(
    {
        "snapshot": SnapshotRow,
        "underlyings": UnderlyingRow,
        "dividends": DividendRow,
        "repo": RepoRow,
        "volatilities": VolatilityRow,
        "price_history": PriceHistoryRow,
        "fixings": FixingRow,
        "curves": CurveRow,
        "curve_points": CurvePointRow,
        "fx": FxRow,
        "fx_volatilities": FxVolatilityRow,
        "credit": CreditRow,
        "funding": FundingRow,
        "agreements": AgreementRow,
    }
)
