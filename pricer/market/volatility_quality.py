"""Gates over volatilities: implausible sizes, strikes that miss the forward, expiries on weekends."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Sequence
from datetime import date
from statistics import median

from pricer.core.issues import Issue
from pricer.core.source import Place
from pricer.market.checked_surface import CheckedSurface, QuoteFit
from pricer.market.findings import Locate, percent, warning
from pricer.market.market import Market

#: Volatilities of shares and indices at the forward outside this range are reported (a rule of our own).
PLAUSIBLE_VOLATILITIES = (0.04, 1.50)
#: Volatilities of exchange rates outside this range are reported (a rule of our own; pegs and crises lie outside).
PLAUSIBLE_FX_VOLATILITIES = (0.02, 0.40)
#: Where an expiry's strikes lie is judged from this number on.
FEWEST_STRIKES = 3
#: Strikes whose middle lies this close to 100, or to 1, on most expiries look like parts of the forward ...
CENTRED = 0.05
#: ... if the forward is off their middle by more than this share.
OFF_CENTRE = 0.10
#: What the forward counts in strikes entered as per cent or as parts of it.
UNITS = (100.0, 1.0)
#: Strikes further than this factor from the forward, whose options have a delta this close to 0 or 1, are reported.
FARTHEST_FACTOR, SMALLEST_DELTA = 5.0, 1e-9

EXAMPLE = "21.5 % is entered as 0.215"

Groups = Sequence[Sequence[QuoteFit]]


def volatility_gates(name: str, market: Market, place: Locate) -> Iterator[Issue]:
    """Warnings about sizes and strikes of the volatilities of the underlying ``name``.

    ``place`` gives the cell of "volatility:UNDERLYING:EXPIRY:STRIKE" or "volatility:UNDERLYING:EXPIRY", or None.
    """
    surface, curve = market.surfaces.get(name), market.underlyings[name].volatility
    if surface is not None:
        groups = _by_expiry(surface)
        nearest = [min(group, key=lambda fit: abs(fit.relative_strike - 1.0)) for group in groups]
        at_forward = [(fit.expiry_date, fit.quoted_volatility, quote_place(name, fit, place)) for fit in nearest]
        yield from _implausible(name, at_forward, PLAUSIBLE_VOLATILITIES, EXAMPLE)
        yield from _strikes(name, groups, place)
        yield from _far_strikes(name, surface.quotes, place)
    elif curve is not None:
        yield from _implausible(
            name,
            [(day, curve.volatility(day), place(f"volatility:{name}:{day}")) for day in curve.dates],
            PLAUSIBLE_VOLATILITIES,
            EXAMPLE,
        )


def fx_volatility_gates(pair: tuple[str, str], market: Market, place: Locate) -> Iterator[Issue]:
    """Warnings about the sizes of a pair's volatilities; ``place`` gives the cell of "fx_volatilities:EURUSD"."""
    curve, name = market.fx.volatilities[pair], "".join(pair)
    here = place(f"fx_volatilities:{name}")
    yield from _implausible(
        name,
        [(day, curve.volatility(day), place(f"fx_volatilities:{name}:{day}") or here) for day in curve.dates],
        PLAUSIBLE_FX_VOLATILITIES,
        "7.6 % is entered as 0.076",
    )


def weekend_expiries(name: str, market: Market, place: Locate) -> Iterator[Issue]:
    """One warning where volatilities of the underlying ``name`` are quoted for Saturdays or Sundays."""
    surface, curve = market.surfaces.get(name), market.underlyings[name].volatility
    days = surface.surface.dates if surface is not None else curve.dates if curve is not None else ()
    weekends = [day for day in days if day.weekday() >= 5]
    if weekends:
        yield weekend_warning(place(f"volatility:{name}:{weekends[0]}"), f"volatilities of {name} for", weekends)


def weekend_warning(here: Place | None, what: str, weekends: Sequence[date]) -> Issue:
    """A warning about the first of some dates on weekends."""
    others = f" (and {len(weekends) - 1} more on weekends)" if len(weekends) > 1 else ""
    return warning(
        here,
        "weekend-date",
        f"{what} {weekends[0]}, a {'Saturday' if weekends[0].weekday() == 5 else 'Sunday'}{others}",
        "dates on which markets are open",
        "Check the date; it is used as given.",
    )


def quote_place(name: str, fit: QuoteFit, place: Locate) -> Place | None:
    """The cell of a quote, else of its expiry's first."""
    expiry = f"volatility:{name}:{fit.expiry_date}"
    return place(f"{expiry}:{fit.strike!r}") or place(expiry)


def _by_expiry(surface: CheckedSurface) -> Groups:
    groups: dict[date, list[QuoteFit]] = {}
    for fit in surface.quotes:
        groups.setdefault(fit.expiry_date, []).append(fit)
    return list(groups.values())


def _implausible(
    name: str, volatilities: Iterable[tuple[date, float, Place | None]], plausible: tuple[float, float], example: str
) -> Iterator[Issue]:
    """One warning, at the first of (expiry, volatility, cell) outside the range."""
    low, high = plausible
    strange = [item for item in volatilities if not low <= item[1] <= high]
    if strange:
        day, volatility, here = strange[0]
        others = f" (and on {len(strange) - 1} more of its expiries)" if len(strange) > 1 else ""
        yield warning(
            here,
            "implausible-volatility",
            f"a volatility of {percent(volatility, 2)} of {name} for {day}{others}",
            f"volatilities at the forward between {percent(low)} and {percent(high)}",
            f"Check the unit: {example}. The volatilities are used as given.",
        )


def _strikes(name: str, groups: Groups, place: Locate) -> Iterator[Issue]:
    judged = [group for group in groups if len(group) >= FEWEST_STRIKES]
    beside = [group for group in judged if not group[0].relative_strike <= 1.0 <= group[-1].relative_strike]
    unit = _common_centre(judged)
    if not beside and unit is None:
        return
    group = (beside or judged)[0]
    forward = group[0].strike / group[0].relative_strike
    found = f"quotes of {name} for {group[0].expiry_date} at strikes from {group[0].strike:g} to {group[-1].strike:g}, "
    if beside:
        others = f" (nor do those of {len(beside) - 1} more of its expiries)" if len(beside) > 1 else ""
        found += f"which do not reach the forward {forward:.6g}{others}"
        unit = unit or next((unit for unit in UNITS if _centres_on(unit, group)), None)
    else:
        found += f"which centre on {unit:g} as on most expiries, while the forward is {forward:.6g}"
    mend = "Check the strikes, the spot and the dividends."
    if unit is not None:
        parts, example = ("per cent", "95 % as 0.95") if unit == 100.0 else ("parts", "e.g. 0.95")
        mend = (
            f"The strikes look like {parts} of the forward: enter them in strike_of_forward_decimal ({example}), or "
            "correct the spot."
        )
    mend += " The quotes are used as given."
    yield warning(
        quote_place(name, group[0], place), "strikes-beside-forward", found, "strikes around the forward", mend
    )


def _far_strikes(name: str, quotes: Sequence[QuoteFit], place: Locate) -> Iterator[Issue]:
    """Strikes of another unit, where no cash dividend makes them impossible."""
    far = [
        fit
        for fit in quotes
        if abs(math.log(fit.relative_strike)) > math.log(FARTHEST_FACTOR)
        and not SMALLEST_DELTA < fit.delta < 1.0 - SMALLEST_DELTA
    ]
    if far:
        worst = max(far, key=lambda fit: abs(math.log(fit.relative_strike)))
        forward = worst.strike / worst.relative_strike
        others = f" (and {len(far) - 1} more of its strikes)" if len(far) > 1 else ""
        yield warning(
            quote_place(name, worst, place),
            "quote-far-from-forward",
            f"strike {worst.strike:.6g} of {name} for {worst.expiry_date}{others}, where the forward is {forward:.6g}",
            f"strikes within a factor of {FARTHEST_FACTOR:g} of the forward, or options worth more than nothing",
            "Check the strike and the spot: pence against pounds, or a split? The quotes are used as given.",
        )


def _common_centre(groups: Groups) -> float | None:
    """100 or 1 if the strikes of the first and most expiries centre there though their forwards do not."""
    for unit in UNITS:
        centred = [_centres_on(unit, group) for group in groups]
        if len(groups) > 1 and centred[0] and 2 * sum(centred) >= len(groups):
            return unit
    return None


def _centres_on(unit: float, group: Sequence[QuoteFit]) -> bool:
    middle = median(fit.strike for fit in group)
    off = abs(median(fit.relative_strike for fit in group) - 1.0)
    return abs(middle / unit - 1.0) <= CENTRED and off > OFF_CENTRE
