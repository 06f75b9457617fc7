"""An invented history of closing levels that ends at tonight's, and the fixings that trades have seen of it."""

from __future__ import annotations

import math
import random
from collections.abc import Sequence
from datetime import date, timedelta
from functools import cache
from statistics import NormalDist

import numpy as np

from pricer.market.calendars import is_business_day
from saltmarsh.correlations import FX_VOLATILITIES, correlation_matrix, yearly_volatilities
from saltmarsh.facts import FX_SPOTS, UNDERLYINGS, VALUATION_DATE, Row

#: The first day with levels: initial fixings of the oldest trades are from the months after it.
FIRST_DAY = date(2025, 3, 3)
#: The first day in the table fixings; nothing in the book observes an earlier one.
FIRST_FIXING = date(2025, 12, 1)
#: Fixings that were not published yet when the market was taken.
UNPUBLISHED = frozenset({("SORBEQ", VALUATION_DATE)})
#: Weekdays in the table price_history, tonight's included.
DAYS = 130
#: A day that the price history lacks; the official fixings of it exist.
OUTAGE = date(2026, 9, 23)


def price_history(ids: Sequence[str]) -> list[Row]:
    """Levels of ``ids`` day by day, as the sample's market has them in the table price_history."""
    return [
        {"date": day, "underlying": name, "level": levels[name]}
        for day, levels in sorted(closing_levels().items())[-DAYS:]
        for name in ids
        if day != OUTAGE and is_open(name, day)
    ]


def fixings(ids: Sequence[str]) -> list[Row]:
    """The official levels of ``ids`` since the first day that trades of the sample observe."""
    return [
        {"underlying": name, "date": day, "level": levels[name]}
        for name in ids
        for day, levels in sorted(closing_levels().items())
        if day >= FIRST_FIXING and is_open(name, day) and (name, day) not in UNPUBLISHED
    ]


def fixing(name: str, day: date) -> float:
    """The official level of an underlying or pair on a day on which it has one."""
    if not is_open(name, day):
        raise ValueError(f"{name} has no fixing on {day}")
    return closing_levels()[day][name]


@cache
def closing_levels() -> dict[date, dict[str, float]]:
    """Levels of all underlyings and pairs on every weekday since ``FIRST_DAY``, drawn backwards from tonight's.

    Draws come from the standard library's uniform numbers, which do not change with its version.
    """
    ids = [*UNDERLYINGS, *FX_VOLATILITIES]
    draws, normal = random.Random(20_261_130), NormalDist()
    factor = np.linalg.cholesky(correlation_matrix())
    levels = np.array([UNDERLYINGS[name][1] if name in UNDERLYINGS else FX_SPOTS[name] for name in ids])
    steps = np.array(yearly_volatilities()) / math.sqrt(252.0)
    found: dict[date, dict[str, float]] = {}
    for day in _weekdays():
        found[day] = {name: _rounded(float(level)) for name, level in zip(ids, levels, strict=True)}
        shock = factor @ np.array([normal.inv_cdf(draws.random()) for _ in ids])
        levels = levels * np.exp(-steps * shock)
    return found


def is_open(name: str, day: date) -> bool:
    """Whether the underlying or pair has a level of that day."""
    return is_business_day(UNDERLYINGS[name][2] if name in UNDERLYINGS else "TARGET", day)


def _weekdays() -> list[date]:
    """Latest first."""
    days = (VALUATION_DATE - timedelta(days=n) for n in range((VALUATION_DATE - FIRST_DAY).days + 1))
    return [day for day in days if day.weekday() < 5]


def _rounded(level: float) -> float:
    """Five digits, as levels are published."""
    return round(level, 4 - math.floor(math.log10(level)))
