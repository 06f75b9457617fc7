"""Exercise on any business day: which of them are looked at, and what the others may add.

The value with exercise on fewer days falls short by close to a constant times their distance, so that what halving
the number of days costs is what all the days between would add (Geske & Johnson 1984 extrapolate in this way).
"""

from __future__ import annotations

from collections.abc import Sequence
from datetime import date, timedelta

import numpy as np

from pricer.contracts.observation import Observation
from pricer.engines.contract_exercise.parts import ExerciseParts
from pricer.market.calendars import is_business_day
from pricer.market.market import Market


def business_days(parts: ExerciseParts, underlyings: Sequence[str], market: Market) -> tuple[Observation, ...]:
    """All the days of the right to come, today's included, on which every underlying trades, and the last.

    Each is paid as many days later as the last right of the contract up to it.
    """
    rights = parts.exercise.rights
    calendar = "+".join(dict.fromkeys(market.underlyings[name].calendar for name in underlyings))
    first, last = max(rights[0].day, market.valuation_date), min(rights[-1].day, parts.end)
    found = []
    for count in range((last - first).days + 1):
        day = first + timedelta(days=count)
        if day == last or is_business_day(calendar, day):
            lag = next(r.payment_date - r.day for r in reversed(rights) if r.day <= day)
            found.append(Observation(day, day + lag))
    return tuple(found)


def around_dividends(days: Sequence[Observation], underlyings: Sequence[str], market: Market) -> frozenset[date]:
    """The last of ``days`` before each ex date among the underlyings, and the first from it on.

    A call is best exercised just before a price falls, a put just after: between these days nothing is smooth.
    """
    found = set()
    for name in underlyings:
        dividends = market.underlyings[name].dividends
        ex_dates = [paid.ex_date for paid in dividends.proportional] + [paid.ex_date for paid in dividends.cash]
        for ex_date in ex_dates:
            earlier = [right.day for right in days if right.day < ex_date]
            later = [right.day for right in days if right.day >= ex_date]
            if earlier and later:
                found |= {earlier[-1], later[0]}
    return frozenset(found)


def thinned(days: Sequence[Observation], most: int, kept: frozenset[date]) -> tuple[Observation, ...]:
    """At most ``most`` of the days at close to equal distances, with the first, the last and those ``kept``."""
    if len(days) <= most:
        return tuple(days)
    places = set(np.linspace(0, len(days) - 1, most).astype(int).tolist())
    return tuple(day for i, day in enumerate(days) if i in places or day.day in kept)
