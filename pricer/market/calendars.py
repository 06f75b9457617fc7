"""Business days, tenors and year fractions by name.

Every rule comes from QuantLib; this module only gives it the names used in the input and
speaks :class:`datetime.date`. QuantLib's global evaluation date is never read or set.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from datetime import date
from functools import cache, lru_cache
from types import MappingProxyType
from typing import Any

import QuantLib as ql  # noqa: N813 - the short name of QuantLib's own examples

#: Calendars by name. Country names are the days on which banks settle ("US" follows the
#: Federal Reserve's wire); exchange names are the days on which the exchange trades.
#: Moon-dependent holidays of HK, SG and KR are known to QuantLib only some years ahead.
CALENDARS: Mapping[str, Callable[[], Any]] = MappingProxyType(
    {
        "NONE": ql.NullCalendar,
        "WEEKENDS": ql.WeekendsOnly,
        "TARGET": ql.TARGET,
        "US": lambda: ql.UnitedStates(ql.UnitedStates.FederalReserve),
        "UK": lambda: ql.UnitedKingdom(ql.UnitedKingdom.Settlement),
        "JP": ql.Japan,
        "CH": ql.Switzerland,
        "SE": ql.Sweden,
        "NO": ql.Norway,
        "DK": ql.Denmark,
        "CA": lambda: ql.Canada(ql.Canada.Settlement),
        "AU": lambda: ql.Australia(ql.Australia.Settlement),
        "NZ": ql.NewZealand,
        "HK": ql.HongKong,
        "SG": ql.Singapore,
        "KR": lambda: ql.SouthKorea(ql.SouthKorea.Settlement),
        "PL": ql.Poland,
        "CZ": ql.CzechRepublic,
        "HU": ql.Hungary,
        "ZA": ql.SouthAfrica,
        "MX": ql.Mexico,
        "BR": lambda: ql.Brazil(ql.Brazil.Settlement),
        "NYSE": lambda: ql.UnitedStates(ql.UnitedStates.NYSE),
        "LSE": lambda: ql.UnitedKingdom(ql.UnitedKingdom.Exchange),
        "XETRA": lambda: ql.Germany(ql.Germany.Xetra),
        "EUREX": lambda: ql.Germany(ql.Germany.Eurex),
        "PARIS": lambda: ql.France(ql.France.Exchange),
        "MILAN": lambda: ql.Italy(ql.Italy.Exchange),
        "TSX": lambda: ql.Canada(ql.Canada.TSX),
        "ASX": lambda: ql.Australia(ql.Australia.ASX),
    }
)

#: The settlement calendar of each currency.
CURRENCY_CALENDARS: Mapping[str, str] = MappingProxyType(
    {
        "EUR": "TARGET",
        "USD": "US",
        "GBP": "UK",
        "JPY": "JP",
        "CHF": "CH",
        "SEK": "SE",
        "NOK": "NO",
        "DKK": "DK",
        "CAD": "CA",
        "AUD": "AU",
        "NZD": "NZ",
        "HKD": "HK",
        "SGD": "SG",
        "KRW": "KR",
        "PLN": "PL",
        "CZK": "CZ",
        "HUF": "HU",
        "ZAR": "ZA",
        "MXN": "MX",
        "BRL": "BR",
    }
)

#: Day counts by name: "30/360" is the bond basis, "ACT/ACT" the one that splits at year ends (ISDA 2006, 4.16).
DAY_COUNTS: Mapping[str, Callable[[], Any]] = MappingProxyType(
    {
        "ACT/365F": ql.Actual365Fixed,
        "ACT/360": ql.Actual360,
        "30/360": lambda: ql.Thirty360(ql.Thirty360.BondBasis),
        "ACT/ACT": lambda: ql.ActualActual(ql.ActualActual.ISDA),
    }
)

#: The calendars' first and last day.
FIRST_DAY, LAST_DAY = date(1901, 1, 1), date(2199, 12, 31)

#: Roll conventions by name.
CONVENTIONS = MappingProxyType[str, int](
    {
        "following": ql.Following,
        "modified following": ql.ModifiedFollowing,
        "preceding": ql.Preceding,
        "modified preceding": ql.ModifiedPreceding,
        "unadjusted": ql.Unadjusted,
    }
)

_UNITS = MappingProxyType({"D": ql.Days, "W": ql.Weeks, "M": ql.Months, "Y": ql.Years})
_TENOR = re.compile(r"(\d{1,4})\s*([DWMY])", re.IGNORECASE)


def is_calendar(name: str) -> bool:
    """Whether ``name`` is a calendar, or several joined with +."""
    return all(part.strip() in CALENDARS for part in name.split("+"))


def is_business_day(calendar: str, day: date) -> bool:
    """Whether ``day`` is a business day of ``calendar``; "TARGET+US" is one where both are open."""
    return bool(calendar_named(calendar).isBusinessDay(to_quantlib(day)))


def advance(calendar: str, day: date, business_days: int) -> date:
    """The day that lies ``business_days`` after ``day`` (before it, if negative).

    With 0, ``day`` itself or else the next business day.
    """
    return _advance(calendar, day, business_days, ql.Days, ql.Following)


def roll(calendar: str, day: date, convention: str = "following") -> date:
    """``day`` moved to a business day by a roll convention."""
    return from_quantlib(calendar_named(calendar).adjust(to_quantlib(day), convention_named(convention)))


def add_tenor(calendar: str, day: date, tenor: str, convention: str = "modified following") -> date:
    """The end of a tenor ("2D", "1W", "3M", "10Y") that starts on ``day``.

    Days are business days; weeks, months and years are calendar time, rolled at the end.
    Raises ValueError for a tenor that cannot be read.
    """
    return _advance(calendar, day, *_length_and_unit(tenor), convention_named(convention))


def currency_calendar(currency: str) -> str:
    """The name of the calendar on which payments in ``currency`` settle, if none is given.

    Raises ValueError for a currency without one (see :data:`CURRENCY_CALENDARS`).
    """
    try:
        return CURRENCY_CALENDARS[currency]
    except KeyError:
        raise ValueError(f'no settlement calendar is known for currency "{currency}": name a calendar') from None


def year_fraction(start: date, end: date, day_count: str = "ACT/365F") -> float:
    """Years from ``start`` to ``end``; negative if ``end`` comes first."""
    return float(day_counter(day_count).yearFraction(to_quantlib(start), to_quantlib(end)))


@lru_cache(maxsize=65_536)
def to_quantlib(day: date) -> Any:
    """``day`` as QuantLib's date; raises ValueError outside :data:`FIRST_DAY` to :data:`LAST_DAY`."""
    if not FIRST_DAY.year <= day.year <= LAST_DAY.year:
        raise ValueError(f"{day} lies outside {FIRST_DAY} to {LAST_DAY}")
    return ql.Date(day.day, day.month, day.year)


def from_quantlib(day: Any) -> date:
    """QuantLib's date as a plain one."""
    return date(day.year(), day.month(), day.dayOfMonth())


def to_period(tenor: str) -> Any:
    """A tenor ("2D", "1W", "3M", "10Y") as QuantLib's period; raises ValueError for one that cannot be read."""
    return ql.Period(*_length_and_unit(tenor))


def _length_and_unit(tenor: str) -> tuple[int, int]:
    match = _TENOR.fullmatch(tenor.strip())
    if match is None:
        raise ValueError(
            f'"{tenor}" is not a tenor: write a whole number and D, W, M or Y for days, weeks, months or years, e.g. 3M'
        )
    return int(match[1]), _UNITS[match[2].upper()]


def _advance(calendar: str, day: date, length: int, unit: int, convention: int) -> date:
    try:
        return from_quantlib(calendar_named(calendar).advance(to_quantlib(day), length, unit, convention))
    except RuntimeError as error:  # QuantLib's word for leaving its range of years
        raise ValueError(f"that far from {day} lies outside {FIRST_DAY} to {LAST_DAY}") from error


@cache
def calendar_named(name: str) -> Any:
    """QuantLib's calendar of that name, or the joint one of several (see :data:`CALENDARS`)."""
    if not is_calendar(name):
        raise ValueError(f'"{name}" is not a calendar; known are {", ".join(CALENDARS)}, also joined: TARGET+US')
    calendars = [CALENDARS[part.strip()]() for part in name.split("+")]
    return calendars[0] if len(calendars) == 1 else ql.JointCalendar(ql.CalendarVector(calendars))


@cache
def day_counter(name: str) -> Any:
    """QuantLib's day counter of that name (see :data:`DAY_COUNTS`)."""
    if name not in DAY_COUNTS:
        raise ValueError(f'"{name}" is not a day count; known are {", ".join(DAY_COUNTS)}')
    return DAY_COUNTS[name]()


def convention_named(name: str) -> int:
    """QuantLib's roll convention of that name (see :data:`CONVENTIONS`)."""
    if name not in CONVENTIONS:
        raise ValueError(f'"{name}" is not a roll convention; known are {", ".join(CONVENTIONS)}')
    return CONVENTIONS[name]
