"""Observations that deserve a second look: on a dividend's ex date, or on a day without trading."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from datetime import date

from pricer.core.issues import Issue
from pricer.core.source import Place
from pricer.market.calendars import is_business_day
from pricer.market.findings import percent, warning, words
from pricer.market.underlying import Underlying

#: Observations this many calendar days or fewer apart are a daily series: its ex dates are no surprise.
DAILY = 5
SHOWN_DAYS = 3


def observation_care(
    series: Iterable[Sequence[date]], underlyings: Iterable[Underlying], here: Place | None = None
) -> Iterator[Issue]:
    """One warning of ex dates and one of holidays, at ``here``, about the ``series`` of days still to come.

    The days of each series increase.
    """
    series, underlyings = [tuple(days) for days in series], list(underlyings)
    observed = {day for days in series for day in _apart(days)}
    ex_dates = sorted(found for each in underlyings for found in _dividends_on(each, observed))
    if ex_dates:
        yield warning(
            here,
            "observed-on-ex-date",
            f"observations on ex dates: {_shown([f'{day} of {what}' for day, what in ex_dates])}",
            "observations away from ex dates, or terms that say how the dividend counts",
            "The level without the dividend is observed; check it against the terms.",
        )
    closed = list(_closed(sorted({day for days in series for day in days}), underlyings))
    if closed:
        yield warning(
            here,
            "observed-on-holiday",
            f"observations on days without trading: {_shown([f'{day} ({calendars})' for day, calendars in closed])}",
            "business days of every underlying",
            "They are valued on these days; enter the moved dates if the terms move them.",
        )


def _shown(items: Sequence[str]) -> str:
    more = f" and {len(items) - SHOWN_DAYS} more" if len(items) > SHOWN_DAYS else ""
    return ", ".join(items[:SHOWN_DAYS]) + more


def _apart(days: Sequence[date]) -> Iterator[date]:
    """The days that belong to no daily series."""
    for i, day in enumerate(days):
        neighbours = (*days[max(i - 1, 0) : i], *days[i + 1 : i + 2])
        if all(abs((day - other).days) > DAILY for other in neighbours):
            yield day


def _closed(days: Sequence[date], underlyings: Iterable[Underlying]) -> Iterator[tuple[date, str]]:
    """Days that are not business days of some underlyings, with these calendars."""
    calendars = dict.fromkeys(underlying.calendar for underlying in underlyings)
    for day in days:
        shut = [calendar for calendar in calendars if not is_business_day(calendar, day)]
        if shut:
            yield day, words(shut)


def _dividends_on(underlying: Underlying, observed: set[date]) -> Iterator[tuple[date, str]]:
    name = underlying.underlying_id
    for proportional in underlying.dividends.proportional:
        if proportional.ex_date in observed:
            yield proportional.ex_date, f"{name} ({percent(proportional.fraction, 2)} of its price)"
    for cash in underlying.dividends.cash:
        if cash.ex_date in observed:
            yield cash.ex_date, f"{name} ({cash.amount:g} {underlying.currency})"
