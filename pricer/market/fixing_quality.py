"""Gates over fixings: leaps, days to come, days without trading, names nobody knows. Used, but reported."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from datetime import date
from itertools import pairwise

from pricer.contracts.fixings import Fixings
from pricer.core.issues import Issue
from pricer.market.calendars import is_business_day
from pricer.market.findings import Locate, did_you_mean, nowhere, percent, warning
from pricer.market.underlying import Underlying

#: A fixing that moved from the one before by more than this (as a logarithm, per root of a calendar day) is reported.
PLAUSIBLE_MOVE = 0.35
#: The same for exchange rates; a pair entered the wrong way round is found by it unless it is near 1.
PLAUSIBLE_RATE_MOVE = 0.10
#: However long ago the one before was, so is one that moved by more than this factor.
PLAUSIBLE_FACTOR = 3.0


def fixing_gates(
    fixings: Fixings,
    underlyings: Mapping[str, Underlying],
    rates: Mapping[str, float],
    valuation_date: date,
    place: Locate = nowhere,
) -> Iterator[Issue]:
    """Warnings of all fixings; ``rates`` are tonight's exchange rates by pair.

    ``place`` gives the cell of "fixings:NAME:YYYY-MM-DD", or None.
    """
    for name, levels in sorted(fixings.levels.items()):
        underlying = underlyings.get(name)
        spot = underlying.spot if underlying is not None else rates.get(name)
        inverse = rates.get(name[3:] + name[:3]) if spot is None and len(name) == 6 else None
        spot = 1.0 / inverse if inverse else spot
        if spot is None:
            yield _unknown(name, min(levels), (*underlyings, *rates), place)
        yield from _later(name, levels, valuation_date, place)
        if underlying is not None:
            yield from _closed(underlying, levels, place)
        move = PLAUSIBLE_RATE_MOVE if underlying is None and spot is not None else PLAUSIBLE_MOVE
        yield from _leaps(name, levels, spot, move, valuation_date, place)


def _unknown(name: str, first: date, known: tuple[str, ...], place: Locate) -> Issue:
    return warning(
        place(f"fixings:{name}:{first}"),
        "fixings-of-unknown",
        f'fixings of "{name}"',
        "the id of an underlying, or a currency pair, of the market",
        f"{did_you_mean(name, known)}They are not used unless a trade names them so.",
    )


def _later(name: str, levels: Mapping[date, float], valuation_date: date, place: Locate) -> Iterator[Issue]:
    later = sorted(day for day in levels if day > valuation_date)
    if later:
        yield warning(
            place(f"fixings:{name}:{later[0]}"),
            "fixing-of-a-later-day",
            f"a fixing of {name} on {later[0]}, after the valuation date {valuation_date}",
            "fixings up to the valuation date",
            "Later ones are left out; correct the day if it is wrong.",
        )


def _closed(underlying: Underlying, levels: Mapping[date, float], place: Locate) -> Iterator[Issue]:
    name = underlying.underlying_id
    for day in sorted(levels):
        if not is_business_day(underlying.calendar, day):
            yield warning(
                place(f"fixings:{name}:{day}"),
                "fixing-on-holiday",
                f"a fixing of {name} on {day}, not a business day of calendar {underlying.calendar}",
                "fixings of trading days",
                "It is used if a trade observes that day; correct the day if it is wrong.",
            )


def _leaps(
    name: str, levels: Mapping[date, float], spot: float | None, move: float, valuation_date: date, place: Locate
) -> Iterator[Issue]:
    known = sorted((day, level) for day, level in levels.items() if day <= valuation_date)
    if spot is not None and known:
        known.append((valuation_date, spot))
    for i, ((before, first), (day, second)) in enumerate(pairwise(known)):
        limit = min(move * math.sqrt(max((day - before).days, 1)), math.log(PLAUSIBLE_FACTOR))
        if abs(math.log(second / first)) > limit:
            is_spot = spot is not None and i == len(known) - 2
            what = f"tonight's price {second:g} of {name}" if is_spot else f"a fixing {second:g} of {name} on {day}"
            yield warning(
                place(f"fixings:{name}:{before if is_spot else day}"),
                "fixing-leaps",
                f"{what}, {percent(second / first - 1.0, 1)} from the fixing {first:g} of {before}",
                f"at most {percent(math.exp(limit) - 1.0)} up or {percent(1.0 - math.exp(-limit))} down in that time",
                "Check unit, day and currency, and whether a split or the like asks for adjusted fixings.",
            )
