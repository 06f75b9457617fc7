"""Kinds of columns that several tables of a market share, and the limits of their numbers."""

from __future__ import annotations

from typing import TypeVar

from pydantic import ValidationInfo, field_validator

from pricer.loader.columns import REQUIRED, Column, TableRow
from pricer.loader.days import Day
from pricer.loader.faults import Fault, blank_cell, number_in_words, unwanted
from pricer.loader.names import Identifier, Tenor
from pricer.loader.numbers import Number
from pricer.market.calendars import CURRENCY_CALENDARS

T = TypeVar("T")

#: Decimals beyond these sizes are percentage points in the wrong place.
HIGHEST_VOLATILITY, HIGHEST_RATE, HIGHEST_DISCOUNT_FACTOR, HIGHEST_RELATIVE_STRIKE = 3.0, 1.0, 3.0, 10.0
#: Derivatives of volatility in log-strike beyond these sizes are vol points in the wrong place. A week's skew may
#: exceed 1, a day's curvature 10.
HIGHEST_SKEW, HIGHEST_CURVATURE = 5.0, 50.0


def underlying_reference() -> Column:
    """The id of an underlying that has a row of its own."""
    return Column(Identifier(), "the id of an underlying in the table underlyings", "ORLUMA")


def point_date(example: str = "2027-03-31") -> Column:
    """The date of a point of a curve; see :class:`DateOrTenor`."""
    return Column(Day(), "the point's date", example, "", None, "where there is a tenor")


def point_tenor() -> Column:
    """The tenor of a point of a curve; see :class:`DateOrTenor`."""
    return Column(Tenor(), "the point's tenor", "1Y", "", None, "where there is a date")


def rate(meaning: str, example: str, unit: str, blank: object = REQUIRED, blank_words: str = "") -> Column:
    """A rate per year as a decimal, of either sign."""
    return Column(
        Number(percent=True, decimal_limit=HIGHEST_RATE, is_rate=True), meaning, example, unit, blank, blank_words
    )


def volatility() -> Column:
    """An annualised volatility as a decimal."""
    kind = Number(above=0.0, percent=True, decimal_limit=HIGHEST_VOLATILITY)
    return Column(kind, "the volatility per year", "0.225", "as a decimal (0.225 = 22.5 %)")


class OnCalendar(TableRow):
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


class DateOrTenor(TableRow):
    """Shared rule: a point is given by its date or by its tenor, the date's column coming first."""

    @field_validator("tenor", check_fields=False)
    @classmethod
    def check_one_of_two(cls, tenor: str | None, info: ValidationInfo) -> str | None:
        return exactly_one(tenor, info, "date")


def exactly_one(value: T, info: ValidationInfo, *others: str) -> T:
    """The value of a column of which, with ``others`` before it, exactly one is filled in; raises :class:`Fault`.

    Silent where one of the others is itself faulty.
    """
    given = at_most_one(value, info, *others)
    if value is None and all(other in info.data and info.data[other] is None for other in others):
        raise blank_cell(f"there is no {others[0]} either" if len(others) == 1 else "the row has no other value")
    return given


def at_most_one(value: T, info: ValidationInfo, *others: str) -> T:
    """The value of a column that is blank where one of ``others`` is filled in; raises :class:`Fault`."""
    if value is not None:
        for other in others:
            if info.data.get(other) is not None:
                raise unwanted(value, f"rows without {other}", other)
    return value


def not_above(value: float, info: ValidationInfo, other: str, what: str) -> float:
    """The value of a column that may not exceed that of ``other`` before it; raises :class:`Fault`."""
    limit = info.data.get(other)
    if limit is not None and value > limit:
        expected = f"a number of at most {number_in_words(limit)}, the {what} in {other}"
        raise Fault("rates-crossed", number_in_words(value), expected, "Correct one of the two, or swap them.")
    return value
