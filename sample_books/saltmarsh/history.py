"""An invented history of closing levels that ends at tonight's, with the days off that each market has."""

from __future__ import annotations

import math
import random
from collections.abc import Sequence
from datetime import date, timedelta
from statistics import NormalDist

import numpy as np
from numpy.typing import NDArray

from pricer.market.calendars import is_business_day
from saltmarsh.facts import FX_SPOTS, UNDERLYINGS, VALUATION_DATE, Row

#: Weekdays of the history, tonight's included.
DAYS = 130
#: A day on which no market of the sample published a level.
OUTAGE = date(2026, 9, 23)


def price_history(ids: Sequence[str], correlation: NDArray[np.float64], volatilities: Sequence[float]) -> list[Row]:
    """Levels of ``ids``, with the ``correlation`` (n, n) and yearly ``volatilities`` given, day by day.

    Draws come from the standard library's uniform numbers, which do not change with its version.
    """
    draws, normal = random.Random(20_261_130), NormalDist()
    factor = np.linalg.cholesky(correlation)
    levels = np.array([UNDERLYINGS[name][1] if name in UNDERLYINGS else FX_SPOTS[name] for name in ids])
    steps = np.array(volatilities) / math.sqrt(252.0)
    rows: list[list[Row]] = []
    for day in reversed(_weekdays()):
        rows.append(
            [
                {"date": day, "underlying": name, "level": _rounded(float(level))}
                for name, level in zip(ids, levels, strict=True)
                if day != OUTAGE and is_business_day(_calendar(name), day)
            ]
        )
        shock = factor @ np.array([normal.inv_cdf(draws.random()) for _ in ids])
        levels = levels * np.exp(-steps * shock)
    return [row for day_rows in reversed(rows) for row in day_rows]


def _weekdays() -> list[date]:
    days = (VALUATION_DATE - timedelta(days=n) for n in range(2 * DAYS))
    return sorted(day for day in days if day.weekday() < 5)[-DAYS:]


def _calendar(name: str) -> str:
    return UNDERLYINGS[name][2] if name in UNDERLYINGS else "TARGET"


def _rounded(level: float) -> float:
    """Five digits, as levels are published."""
    return round(level, 4 - math.floor(math.log10(level)))
