"""Observations that deserve a second look: on a dividend's ex date, or on a day without trading."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from datetime import date

from pricer.core.issues import Issue
from pricer.market.calendars import is_business_day
from pricer.market.findings import Locate, nowhere, percent, warning
from pricer.market.underlying import Underlying

#: Observations this many calendar days or fewer apart are a daily series: its ex dates are no surprise.
DAILY = 5
SHOWN_DAYS = 3


def observation_care(
    days: Sequence[date], underlyings: Iterable[Underlying], place: Locate = nowhere, column: str = "observation_dates"
) -> Iterator[Issue]:
    """Warnings of the increasing observation ``days`` still to come, underlying by underlying."""
    sparse = [day for i, day in enumerate(days) if i == 0 or (day - days[i - 1]).days > DAILY]
    here = place(column)
    for underlying in underlyings:
        name = underlying.underlying_id
        for day, amount in _dividends_on(underlying, sparse):
            yield warning(
                here,
                "observed-on-ex-date",
                f"an observation of {name} on {day}, when it goes ex a dividend of {amount}",
                "observations away from ex dates, or terms that say how the dividend counts",
                "The level without the dividend is observed; check it against the terms.",
            )
        closed = [day for day in days if not is_business_day(underlying.calendar, day)]
        if closed:
            shown = ", ".join(map(str, closed[:SHOWN_DAYS])) + (" and more" if len(closed) > SHOWN_DAYS else "")
            yield warning(
                here,
                "observed-on-holiday",
                f"observations of {name} on {shown}, not business days of calendar {underlying.calendar}",
                "business days of every underlying",
                "They are valued on these days; enter the moved dates if the terms move them.",
            )


def _dividends_on(underlying: Underlying, days: Sequence[date]) -> Iterator[tuple[date, str]]:
    observed = set(days)
    for proportional in underlying.dividends.proportional:
        if proportional.ex_date in observed:
            yield proportional.ex_date, f"{percent(proportional.fraction, 2)} of its price"
    for cash in underlying.dividends.cash:
        if cash.ex_date in observed:
            yield cash.ex_date, f"{cash.amount:g} {underlying.currency}"
