"""Gates over fixings: leaps, days to come, days without trading, names nobody knows. Used, but reported."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from datetime import date
from itertools import pairwise

from pricer.core.issues import Issue
from pricer.market.calendars import is_business_day
from pricer.market.findings import Locate, did_you_mean, nowhere, percent, warning
from pricer.market.fx import currencies_of
from pricer.market.market import Market
from pricer.market.underlying import Underlying

#: A fixing that moved from the one before by more than this (as a logarithm, per root of a calendar day) is reported.
PLAUSIBLE_MOVE = 0.35
#: The same for exchange rates; a pair entered the wrong way round is found by it unless it is near 1.
PLAUSIBLE_RATE_MOVE = 0.10
#: However long ago the one before was, so is one that moved by more than this factor.
PLAUSIBLE_FACTOR = 3.0


def fixing_gates(market: Market, place: Locate = nowhere) -> Iterator[tuple[Issue, str]]:
    """Warnings of all fixings, each with the fixing that it doubts as "fixings:NAME:YYYY-MM-DD", or an empty text.

    Silent about underlyings and pairs that the market was given but refused: that is told with them.
    ``place`` gives the cell of a fixing named as above, or None.
    """
    today = market.valuation_date
    rates = _tonights_rates(market)
    for name, levels in sorted(market.fixings.levels.items()):
        if name in market.rejected or name[3:] + name[:3] in market.rejected:
            continue
        underlying = market.underlyings.get(name)
        spot = underlying.spot if underlying is not None else rates.get(name)
        if spot is None:
            yield _unknown(name, min(levels), (*market.underlyings, *rates), place), ""
        yield from ((issue, "") for issue in _later(name, levels, today, place))
        if underlying is not None:
            yield from ((issue, "") for issue in _closed(underlying, levels, place))
        move = PLAUSIBLE_RATE_MOVE if underlying is None and spot is not None else PLAUSIBLE_MOVE
        yield from _leaps(name, levels, spot, move, today, place)


def _tonights_rates(market: Market) -> dict[str, float]:
    """Tonight's exchange rates: all quoted pairs, and those among the fixings that follow from them."""
    rates = {first + second: rate for (first, second), rate in market.fx.quotes.items()}
    for name in market.fixings.levels:
        try:
            rates.setdefault(name, market.fx.rate(*currencies_of(name)))
        except (LookupError, ValueError):  # an underlying, or a pair that the market does not know
            continue
    return rates


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
    closed = [day for day in sorted(levels) if not is_business_day(underlying.calendar, day)]
    if closed:
        more = f" (and {len(closed) - 1} more days)" if len(closed) > 1 else ""
        yield warning(
            place(f"fixings:{name}:{closed[0]}"),
            "fixing-on-holiday",
            f"a fixing of {name} on {closed[0]}{more}, not a business day of calendar {underlying.calendar}",
            "fixings of trading days",
            "It is used if a trade observes that day; correct the day if it is wrong.",
        )


def _leaps(
    name: str, levels: Mapping[date, float], spot: float | None, move: float, valuation_date: date, place: Locate
) -> Iterator[tuple[Issue, str]]:
    known = sorted((day, level) for day, level in levels.items() if day <= valuation_date)
    if spot is not None and known:
        known.append((valuation_date, spot))
    for i, ((before, first), (day, second)) in enumerate(pairwise(known)):
        limit = min(move * math.sqrt(max((day - before).days, 1)), math.log(PLAUSIBLE_FACTOR))
        if abs(math.log(second / first)) > limit:
            is_spot = spot is not None and i == len(known) - 2
            what = f"tonight's price {second:g} of {name}" if is_spot else f"a fixing {second:g} of {name} on {day}"
            item = f"fixings:{name}:{before if is_spot else day}"
            yield (
                warning(
                    place(item),
                    "fixing-leaps",
                    f"{what}, {percent(second / first - 1.0, 1)} from the fixing {first:g} of {before}",
                    f"at most {percent(math.exp(limit) - 1.0)} up or {percent(1.0 - math.exp(-limit))} down in that "
                    "time",
                    "Check unit, day and currency, and whether a split or the like asks for adjusted fixings.",
                ),
                item,
            )
