"""A gate over spots and exchange rates: they ought to lie where their own price history ends."""

from __future__ import annotations

from collections.abc import Container, Iterator
from datetime import date, timedelta

from pricer.core.issues import Issue
from pricer.core.source import Place
from pricer.market.findings import Locate, percent, warning
from pricer.market.fx import currencies_of
from pricer.market.market import Market

#: Spots of underlyings, and exchange rates, that differ by more than this from a history's last level are reported
#: (a rule of our own: larger than nearly every move of a few days).
LARGEST_SPOT_MOVE, LARGEST_FX_MOVE = 0.15, 0.10
#: Histories that end more days than this before the valuation date say nothing about its levels.
OLDEST_LEVEL = timedelta(days=7)


def level_gates(market: Market, refused: Container[str], place: Locate) -> Iterator[tuple[str, Issue]]:
    """Items in doubt ("UNDERLYING" or "fx:EURUSD") and warnings about their levels.

    ``refused`` : pairs whose rates are not used anyway. ``place`` gives the cell of "spot:UNDERLYING" or "fx:EURUSD",
    or None.
    """
    for name, (day, level) in market.quotes.last_levels.items():
        if not timedelta(0) <= market.valuation_date - day <= OLDEST_LEVEL:
            continue
        if name in market.underlyings:
            spot, here = market.underlyings[name].spot, place(f"spot:{name}")
            if _apart(spot, level) > LARGEST_SPOT_MOVE:
                mend = "Check the spot's unit and day, and whether the share was split. The spot is used as given."
                yield name, _jump(here, f"spot {spot:g} of {name}", level, day, LARGEST_SPOT_MOVE, mend)
            continue
        pair = _quoted(name, market)
        if pair is None:
            continue
        key, rate = "".join(pair), market.fx.quotes[pair]
        # The history may hold the pair the other way round; the message speaks of the pair as quoted.
        past = level if key == name else 1.0 / level
        if _apart(rate, past) > LARGEST_FX_MOVE:
            turned = _apart(1.0 / rate, past) <= LARGEST_FX_MOVE
            mend = "One of the two looks entered the wrong way round." if turned else "Check the rate and its day."
            if key not in refused:
                mend += " The rate is used as given."
            here = place(f"fx:{key}")
            yield f"fx:{key}", _jump(here, f"{key} quoted at {rate:.6g}", past, day, LARGEST_FX_MOVE, mend)


def _quoted(name: str, market: Market) -> tuple[str, str] | None:
    """The pair of that name as the fx table quotes it, either way round."""
    try:
        first, second = currencies_of(name)
    except ValueError:
        return None
    return next((pair for pair in ((first, second), (second, first)) if pair in market.fx.quotes), None)


def _apart(a: float, b: float) -> float:
    return max(a, b) / min(a, b) - 1.0


def _jump(here: Place | None, found: str, level: float, day: date, largest: float, mend: str) -> Issue:
    return warning(
        here,
        "level-against-history",
        f"{found}, where the price history has {level:.6g} on {day}",
        f"a level within {percent(largest)} of the history's last",
        mend,
    )
