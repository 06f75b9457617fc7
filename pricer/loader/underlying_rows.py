"""The tables about underlyings: dividends, repo rates, volatilities, past prices and fixings."""

from __future__ import annotations

from datetime import date
from typing import Annotated

from pydantic import ValidationInfo, field_validator

from pricer.loader.columns import Column, TableRow
from pricer.loader.days import Day
from pricer.loader.faults import blank_cell
from pricer.loader.market_columns import (
    HIGHEST_CURVATURE,
    HIGHEST_RELATIVE_STRIKE,
    HIGHEST_SKEW,
    DateOrTenor,
    at_most_one,
    exactly_one,
    not_above,
    point_date,
    point_tenor,
    rate,
    underlying_reference,
    volatility,
)
from pricer.loader.names import FreeText, Identifier
from pricer.loader.numbers import Number


class DividendRow(TableRow):
    """A dividend: an amount of cash, or a fraction of the price."""

    underlying: Annotated[str, underlying_reference()]
    ex_date: Annotated[date, Column(Day(), "the ex-dividend date", "2027-05-12")]
    cash_amount: Annotated[
        float | None,
        Column(
            Number(at_least=0.0),
            "the amount per share",
            "1.85",
            "in the underlying's currency",
            None,
            "where there is a fraction of the price",
        ),
    ]
    fraction_of_spot_decimal: Annotated[
        float | None,
        Column(
            Number(at_least=0.0, below=1.0, percent=True, decimal_limit=1.0),
            "the part of the price that is paid out",
            "0.018",
            "as a decimal (0.018 = 1.8 %)",
            None,
            "where there is an amount of cash",
        ),
    ]

    @field_validator("fraction_of_spot_decimal")
    @classmethod
    def check_one_of_two(cls, fraction: float | None, info: ValidationInfo) -> float | None:
        return exactly_one(fraction, info, "cash_amount")


class RepoRow(DateOrTenor):
    """Repo rates of an underlying to one date: what a long position pays, and a short one earns."""

    underlying: Annotated[str, underlying_reference()]
    date: Annotated[date | None, point_date()]
    tenor: Annotated[str | None, point_tenor()]
    long_rate_decimal: Annotated[
        float,
        rate(
            "the zero rate paid on cash raised against a long position",
            "0.0245",
            "continuously compounded, ACT/365F, as a decimal (0.0245 = 2.45 %)",
        ),
    ]
    short_rate_decimal: Annotated[
        float,
        rate(
            "the zero rate earned on the proceeds of a short position",
            "0.0205",
            "continuously compounded, ACT/365F, as a decimal (0.0205 = 2.05 %)",
        ),
    ]

    @field_validator("short_rate_decimal")
    @classmethod
    def check_order(cls, short: float, info: ValidationInfo) -> float:
        return not_above(short, info, "long_rate_decimal", "rate paid long")


class VolatilityRow(TableRow):
    """An implied volatility of an underlying: at a strike, or at the forward with its skew and curvature."""

    underlying: Annotated[str, underlying_reference()]
    expiry_date: Annotated[date, Column(Day(), "the expiry date of the quote", "2027-06-18")]
    volatility_decimal: Annotated[float, volatility()]
    strike: Annotated[
        float | None,
        Column(
            Number(above=0.0),
            "the strike",
            "80",
            "in the underlying's currency",
            None,
            "for a strike relative to the forward, or for a quote at the forward",
        ),
    ]
    strike_of_forward_decimal: Annotated[
        float | None,
        Column(
            Number(above=0.0, percent=True, decimal_limit=HIGHEST_RELATIVE_STRIKE),
            "the strike as a part of the forward for the expiry date",
            "0.95",
            "as a decimal (0.95 = 95 %)",
            None,
            "for a strike in currency, or for a quote at the forward",
        ),
    ]
    skew_decimal: Annotated[
        float | None,
        Column(
            Number(decimal_limit=HIGHEST_SKEW),
            "the slope of the volatility in the logarithm of the strike, at the forward",
            "-0.12",
            "as a decimal (-0.12: a strike 1 % lower has about 0.12 vol points more)",
            None,
            "for a quote at a strike, or where no skew is known",
        ),
    ]
    curvature_decimal: Annotated[
        float | None,
        Column(
            Number(decimal_limit=HIGHEST_CURVATURE),
            "the second derivative of the volatility in the logarithm of the strike, at the forward",
            "0.25",
            "as a decimal",
            None,
            "for a quote at a strike, or where no curvature is known",
        ),
    ]

    @field_validator("strike_of_forward_decimal")
    @classmethod
    def check_one_strike(cls, strike: float | None, info: ValidationInfo) -> float | None:
        return at_most_one(strike, info, "strike")

    @field_validator("skew_decimal", "curvature_decimal")
    @classmethod
    def check_at_forward(cls, shape: float | None, info: ValidationInfo) -> float | None:
        return at_most_one(shape, info, "strike", "strike_of_forward_decimal")

    @property
    def is_flat(self) -> bool:
        """Whether the volatility is that at the forward, and nothing is said of other strikes."""
        return (
            self.strike is None
            and self.strike_of_forward_decimal in (None, 1.0)
            and not self.skew_decimal
            and not self.curvature_decimal
        )


class PriceHistoryRow(TableRow):
    """The closing level of an underlying, or of an exchange rate, on one past day."""

    date: Annotated[date, Column(Day(), "the day", "2026-03-30")]
    underlying: Annotated[
        str, Column(Identifier(), "the id of an underlying, or a currency pair such as EURUSD", "ORLUMA")
    ]
    level: Annotated[
        float,
        Column(
            Number(above=0.0), "the closing level, adjusted for dividends and splits", "84.20", "always in one unit"
        ),
    ]


class FixingRow(TableRow):
    """The official level of an underlying, or of an exchange rate, on one day that trades observe."""

    underlying: Annotated[
        str, Column(Identifier(), "the id of an underlying, or a currency pair such as EURUSD", "ORLUMA")
    ]
    date: Annotated[date, Column(Day(), "the day of the fixing", "2026-03-20")]
    level: Annotated[
        float | None,
        Column(
            Number(above=0.0),
            "the official level",
            "84.20",
            "in the underlying's currency, in one unit with its spot; of a pair as in the table fx",
            None,
            "where the day had none: the column reason says why then",
        ),
    ]
    reason: Annotated[
        str,
        Column(FreeText(), "why there is no level", "market disruption", "", "", "where there is a level"),
    ]

    @field_validator("reason")
    @classmethod
    def check_reason(cls, reason: str, info: ValidationInfo) -> str:
        if not reason and "level" in info.data and info.data["level"] is None:
            raise blank_cell("there is no level either")
        return reason
