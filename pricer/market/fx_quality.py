"""Gates over exchange rates: three rates, and three volatilities, of three currencies belong together."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from datetime import date
from itertools import combinations

from pricer.core.issues import Issue
from pricer.market.findings import Locate, error, percent, warning, words
from pricer.market.fx import FxRates
from pricer.market.market import Market, MissingMarketDataError
from pricer.market.volatility import VolatilityCurve

#: A quoted exchange rate that differs by more than this from its cross is reported ...
TRIANGLE_TOLERANCE = 0.01
#: ... and by more than this it cannot be trusted: nothing is converted at it (a rule of our own).
WORST_TRIANGLE = 0.05
#: Three rates that, by their volatilities and correlations, would drift apart by more than this a year are reported.
ROUND_TRIP_TOLERANCE = 0.025

Pair = tuple[str, str]


@dataclass(frozen=True, slots=True)
class Triangle:
    """Three quoted pairs; their rates multiplied round the three currencies give ``1 + gap`` or its inverse.

    ``inverted`` is the pair whose rate, entered the other way round, closes it, if exactly one does.
    """

    pairs: tuple[Pair, Pair, Pair]
    gap: float
    inverted: Pair | None

    @property
    def closes(self) -> bool:
        return self.gap <= TRIANGLE_TOLERANCE


def triangles(fx: FxRates) -> tuple[Triangle, ...]:
    """Every three currencies that are all quoted against each other."""
    return tuple(found for three in combinations(fx.currencies, 3) if (found := _triangle(fx, three)) is not None)


def rate_gates(fx: FxRates, place: Locate) -> Iterator[tuple[tuple[Pair, ...], Issue]]:
    """Quoted pairs in doubt, and the issue that says so: an error where they must not be used.

    ``place`` gives the cell of "fx:EURUSD", or None.
    """
    found = triangles(fx)
    vouched = {pair for triangle in found if triangle.closes for pair in triangle.pairs}
    told: set[Pair] = set()
    for triangle in sorted(found, key=lambda triangle: -triangle.gap):
        if triangle.closes:
            continue
        # A pair that fits elsewhere is not the culprit, unless all of them do.
        suspects = [pair for pair in triangle.pairs if pair not in vouched] or list(triangle.pairs)
        if triangle.inverted is not None:
            suspects = [triangle.inverted]
        if not told.issuperset(suspects):
            told.update(suspects)
            yield tuple(suspects), _open_triangle(fx, triangle, suspects, place)


def _triangle(fx: FxRates, three: tuple[str, str, str]) -> Triangle | None:
    a, b, c = three
    ways = [(a, b), (b, c), (c, a)]
    pairs = [way if way in fx.quotes else (way[1], way[0]) for way in ways]
    if not all(pair in fx.quotes for pair in pairs):
        return None
    steps = [math.log(fx.rate(*way)) for way in ways]
    gap = sum(steps)
    # Entered the other way round, a rate's logarithm changes sign.
    closing = [
        pair for pair, step in zip(pairs, steps, strict=True) if math.expm1(abs(gap - 2.0 * step)) <= TRIANGLE_TOLERANCE
    ]
    inverted = closing[0] if len(closing) == 1 else None
    return Triangle((pairs[0], pairs[1], pairs[2]), math.expm1(abs(gap)), inverted)


def _open_triangle(fx: FxRates, triangle: Triangle, suspects: Sequence[Pair], place: Locate) -> Issue:
    pair = triangle.inverted or (triangle.pairs[2] if triangle.pairs[2] in suspects else suspects[0])
    (through,) = {currency for other in triangle.pairs for currency in other} - set(pair)
    name = "".join(pair)
    quoted, crossed = fx.rate(*pair), fx.rate(pair[0], through) * fx.rate(through, pair[1])
    here, code = place(f"fx:{name}"), "inconsistent-fx"
    found = f"{name} quoted at {quoted:.6g}, but {crossed:.6g} through {through}"
    mend = "Check the three pairs"
    if triangle.inverted is not None:
        mend = f"The rate looks entered the wrong way round, as {1.0 / quoted:.6g} would fit: correct it, or the pair"
    if triangle.gap <= WORST_TRIANGLE:
        expected = f"quotes that agree to {percent(TRIANGLE_TOLERANCE)}"
        return warning(
            here, code, found, expected, f"{mend}; each conversion uses the direct quote where there is one."
        )
    expected = f"quotes that agree to {percent(WORST_TRIANGLE)} at least"
    names = words(("".join(suspect) for suspect in suspects), "or")
    return error(here, code, found, expected, f"{mend}. Until then nothing is converted at {names}.")


def volatility_triangles(market: Market, place: Locate) -> Iterator[Issue]:
    """Volatilities of three pairs that do not belong together; ``place`` gives the cell of "fx_volatilities:EURUSD"."""
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
