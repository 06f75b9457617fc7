"""Gates over exchange rates: three rates, and three volatilities, of three currencies belong together."""

from __future__ import annotations

import math
from collections.abc import Iterator
from datetime import date
from itertools import combinations

from pricer.core.issues import Issue
from pricer.market.findings import Locate, percent, warning, words
from pricer.market.fx import FxRates
from pricer.market.market import Market, MissingMarketDataError
from pricer.market.volatility import VolatilityCurve

#: A quoted exchange rate that differs by more than this from its cross is reported.
TRIANGLE_TOLERANCE = 0.01
#: Three rates that, by their volatilities and correlations, would drift apart by more than this a year are reported.
ROUND_TRIP_TOLERANCE = 0.025


def fx_gates(market: Market, place: Locate) -> Iterator[Issue]:
    """Issues of the exchange rates; ``place`` gives the cell of "fx:EURUSD" or "fx_volatilities:EURUSD", or None."""
    yield from _rates(market.fx, place)
    yield from _volatilities(market, place)


def _rates(fx: FxRates, place: Locate) -> Iterator[Issue]:
    for a, b, c in combinations(fx.currencies, 3):
        if not all((x, y) in fx.quotes or (y, x) in fx.quotes for x, y in ((a, b), (b, c), (a, c))):
            continue
        pair = (a, c) if (a, c) in fx.quotes else (c, a)
        quoted, crossed = fx.rate(*pair), fx.rate(pair[0], b) * fx.rate(b, pair[1])
        # Relative to the smaller of the two, so that the order of the three currencies does not matter.
        if max(quoted, crossed) / min(quoted, crossed) - 1.0 > TRIANGLE_TOLERANCE:
            name = "".join(pair)
            yield warning(
                place(f"fx:{name}"),
                "inconsistent-fx",
                f"{name} quoted at {quoted:.6g}, but {crossed:.6g} through {b}",
                f"quotes that agree to {percent(TRIANGLE_TOLERANCE)}",
                "Check the three pairs; each conversion uses the direct quote where there is one.",
            )


def _volatilities(market: Market, place: Locate) -> Iterator[Issue]:
    fx = market.fx
    for triangle in combinations(sorted({currency for pair in fx.volatilities for currency in pair}), 3):
        given = {pair: curve for pair, curve in fx.volatilities.items() if set(pair) <= set(triangle)}
        if len(given) < 3:
            continue
        days = sorted({day for curve in given.values() for day in curve.dates})
        issue = _impossible(given, days, place) or _round_trip(market, given, days, place)
        if issue is not None:
            yield issue


def _impossible(given: dict[tuple[str, str], VolatilityCurve], days: list[date], place: Locate) -> Issue | None:
    """The logarithms of the three rates add up to 0, so no volatility exceeds the sum of the other two."""
    for day in days:
        *others, (highest, pair) = sorted((curve.volatility(day), "".join(pair)) for pair, curve in given.items())
        total = sum(volatility for volatility, _ in others)
        if highest > total + 1e-9:
            return warning(
                place(f"fx_volatilities:{pair}"),
                "inconsistent-fx-volatility",
                f"a volatility of {percent(highest, 2)} of {pair} for {day}, above the {percent(total, 2)} of "
                f"{others[0][1]} and {others[1][1]} together",
                "volatilities of which none exceeds the sum of the other two",
                "Check the three pairs' volatilities; they are used as given.",
            )
    return None


def _round_trip(
    market: Market, given: dict[tuple[str, str], VolatilityCurve], days: list[date], place: Locate
) -> Issue | None:
    """The volatility of the sum of the three log-rates round the triangle, which ought to be 0."""
    a, b, c = sorted({currency for pair in given for currency in pair})
    names = [a + b, b + c, c + a]
    try:
        trips = [(math.sqrt(max(market.log_covariance(names, day).sum(), 0.0)), day) for day in days]
    except MissingMarketDataError:
        return None  # a pair is not in the correlation matrix
    start = next(iter(given.values())).valuation_date
    volatility, day = max((deviation / math.sqrt((day - start).days / 365.0), day) for deviation, day in trips)
    if volatility <= ROUND_TRIP_TOLERANCE:
        return None
    name = "".join(max(given))
    return warning(
        place(f"fx_volatilities:{name}"),
        "inconsistent-fx-correlation",
        f"{words(''.join(pair) for pair in given)}, whose volatilities and correlations let them drift apart by "
        f"{percent(volatility, 2)} a year to {day}",
        f"three pairs that keep together within {percent(ROUND_TRIP_TOLERANCE, 1)} a year",
        "Check the correlations among the three pairs against their volatilities, or leave one pair's volatility out: "
        "it then follows from the other two.",
    )
