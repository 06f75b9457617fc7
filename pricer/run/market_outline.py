"""The market in a few numbers per underlying, for a person to see at a glance whether units are right."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from datetime import date

from pricer.market.calendars import year_fraction
from pricer.market.market import Market
from pricer.market.pure_smile import price_deviations


@dataclass(frozen=True, slots=True)
class AtTheForward:
    """The forward of ``day``, and the volatility per year of an option struck there."""

    day: date
    forward: float
    volatility: float


@dataclass(frozen=True, slots=True)
class UnderlyingOutline:
    """Spot in ``currency``, and the ``first`` and ``last`` date with a quoted volatility; None without a usable one."""

    underlying: str
    currency: str
    spot: float
    first: AtTheForward | None = None
    last: AtTheForward | None = None


def outline(market: Market) -> tuple[UnderlyingOutline, ...]:
    """Every usable underlying by id."""
    return tuple(_outlines(market))


def _outlines(market: Market) -> Iterator[UnderlyingOutline]:
    for name, underlying in sorted(market.underlyings.items()):
        try:
            days = market.pure_volatility(name).dates
            ends = _at_the_forward(market, name, days[0]), _at_the_forward(market, name, days[-1])
        except (LookupError, ValueError):  # told as a problem of the market, or of the trades that need it
            yield UnderlyingOutline(name, underlying.currency, underlying.spot)
        else:
            yield UnderlyingOutline(name, underlying.currency, underlying.spot, *ends)


def _at_the_forward(market: Market, name: str, day: date) -> AtTheForward:
    """The volatility is that of the price, cash dividends still to come included."""
    level, time = market.affine_price(name).at(day), year_fraction(market.valuation_date, day)
    pure_deviation = market.pure_volatility(name).volatility(day) * math.sqrt(time)
    deviation = float(price_deviations(level, 0.0, pure_deviation))
    return AtTheForward(day, level.forward, deviation / math.sqrt(time))
