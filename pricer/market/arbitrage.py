"""Arbitrage in quoted smiles and in fitted surfaces: where, and how large."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from datetime import date
from enum import StrEnum
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from pricer.market.black import call, vega
from pricer.market.calendars import year_fraction
from pricer.market.implied_surface import ImpliedSurface
from pricer.market.slice_correction import is_material
from pricer.market.slice_order import FINE_GRID, RANGE, excess
from pricer.market.smile_quotes import SmileQuotes
from pricer.market.svi_repair import least_butterfly

Array = NDArray[np.float64]

#: Quotes are rounded; contradictions up to this volatility (0.02 vol points) are not reported.
QUOTE_TOLERANCE = 2e-4
#: A surface's g below 0 by up to the first, and falls of up to the second in volatility, are rounding.
BUTTERFLY_TOLERANCE, CALENDAR_TOLERANCE = 1e-9, 1e-6


class ArbitrageKind(StrEnum):
    """Which spread would be bought for less than nothing."""

    BUTTERFLY = "butterfly"  # the density of the level is negative
    CALENDAR = "calendar"  # total variance falls in time


@dataclass(frozen=True, slots=True)
class Violation:
    """One arbitrage, at its worst strike.

    ``later_date`` is the second expiry of a calendar violation, and the end of the interval of
    a butterfly between two expiries; else None. ``log_moneyness`` is where it is worst. ``size`` is in annualised
    volatility (0.001 is 0.1 vol points): by how much the volatility there is too high (butterfly) or that of the later
    expiry too low (calendar). For a butterfly of a fitted surface, where one volatility cannot be
    blamed, it is the depth of g below 0 (a pure number; g is 1 in a flat smile).
    """

    kind: ArbitrageKind
    expiry_date: date
    later_date: date | None
    log_moneyness: float
    size: float
    quoted: bool

    def __str__(self) -> str:
        where = f"{self.expiry_date}" if self.later_date is None else f"{self.expiry_date} to {self.later_date}"
        in_volatility = self.quoted or self.kind is ArbitrageKind.CALENDAR
        size = f"{100.0 * self.size:.2f} vol points" if in_volatility else f"g = {-self.size:.3g}"
        return (
            f"{self.kind} arbitrage, {where}, strike {100.0 * np.exp(self.log_moneyness):.1f} % of the forward: {size}"
        )


def quote_violations(valuation_date: date, quotes: Sequence[SmileQuotes]) -> tuple[Violation, ...]:
    """Contradictions among the quotes themselves, before any fit; expiry dates increase.

    Per expiry, prices of calls on X must be convex in strike and fall by at most 1 per unit of it (with
    strike 0 worth 1 and infinite strikes worth 0). Across expiries total variance, linear in k
    between quotes (common practice), must not fall where the strikes of both expiries overlap.
    """
    found: list[Violation] = []
    times = [year_fraction(valuation_date, quote.expiry_date) for quote in quotes]
    for quote, time in zip(quotes, times, strict=True):
        found.extend(_convexity(quote, time))
    for (early, s), (late, t) in pairwise(zip(quotes, times, strict=True)):
        k = np.union1d(early.log_moneyness, late.log_moneyness)
        low = max(early.log_moneyness[0], late.log_moneyness[0])
        high = min(early.log_moneyness[-1], late.log_moneyness[-1])
        k = k[(k >= low) & (k <= high)]
        if k.size == 0:
            continue
        before = np.interp(k, early.log_moneyness, early.volatilities**2 * s)
        after = np.interp(k, late.log_moneyness, late.volatilities**2 * t)
        lack = np.sqrt(before / t) - np.sqrt(after / t)
        i = int(np.argmax(lack))
        if lack[i] > QUOTE_TOLERANCE:
            found.append(
                Violation(
                    ArbitrageKind.CALENDAR, early.expiry_date, late.expiry_date, float(k[i]), float(lack[i]), True
                )
            )
    return tuple(found)


def surface_violations(surface: ImpliedSurface) -> tuple[Violation, ...]:
    """Arbitrage left in a surface, within :data:`slice_order.RANGE` standard deviations; none after a sound fit.

    Slices are checked for butterflies, and so are the smiles a quarter, half and three quarters of the way
    between expiries: linear total variance does not exclude them by itself. Those in between are checked
    only where :func:`slice_correction.is_material`.
    """
    found: list[Violation] = []
    for day, smile in zip(surface.dates, surface.slices, strict=True):
        at, least = least_butterfly(smile, RANGE * float(np.sqrt(smile.total_variance(0.0))), interesting=0.05)
        if least < -BUTTERFLY_TOLERANCE:
            found.append(Violation(ArbitrageKind.BUTTERFLY, day, None, at, -least, False))
    for i in range(len(surface.slices) - 1):
        found.extend(_between(surface, i))
    return tuple(found)


def _between(surface: ImpliedSurface, i: int) -> Iterator[Violation]:
    (first, second), (s, t) = surface.dates[i : i + 2], surface.times[i : i + 2]
    at, fall = excess(surface.slices[i], surface.slices[i + 1])
    after = max(float(surface.slices[i + 1].total_variance(at)), 0.0)
    lack = float(np.sqrt(max(after + fall, 0.0) / t) - np.sqrt(after / t))
    if lack > CALENDAR_TOLERANCE:
        yield Violation(ArbitrageKind.CALENDAR, first, second, at, lack, False)
    k = FINE_GRID * float(np.sqrt(surface.total_variance(0.0, t)))
    inner = s + np.array([[0.25], [0.5], [0.75]]) * (t - s)
    g = surface.butterfly(k, inner)
    if g.min() < -BUTTERFLY_TOLERANCE:
        g[~is_material(k, surface.total_variance(k, inner))] = 1.0
    row, column = np.unravel_index(int(np.argmin(g)), g.shape)
    if g[row, column] < -BUTTERFLY_TOLERANCE:
        yield Violation(ArbitrageKind.BUTTERFLY, first, second, float(k[column]), -float(g[row, column]), False)


def _convexity(quote: SmileQuotes, time: float) -> Iterator[Violation]:
    """The quote that lies furthest above the chord of its neighbours, in volatility, per run of bad ones."""
    k, deviations = quote.log_moneyness, quote.volatilities * np.sqrt(time)
    strikes = np.exp(k)
    calls, vegas = call(k, deviations), vega(k, deviations) * np.sqrt(time)
    x = np.concatenate(([0.0], strikes))
    y = np.concatenate(([1.0], calls))
    # The last quote has no neighbour above: a call worth at least nothing, and less than the one before.
    excess = np.empty(k.size)
    share = (x[1:-1] - x[:-2]) / (x[2:] - x[:-2])
    excess[:-1] = y[1:-1] - (y[:-2] + share * (y[2:] - y[:-2]))
    excess[-1] = y[-1] - y[-2]
    # Far out a price has no volatility left to blame; such quotes are judged where vega is a thousandth of the forward.
    sizes = excess / np.maximum(vegas, 1e-3 * np.sqrt(time))
    bad = sizes > QUOTE_TOLERANCE
    edges = np.flatnonzero(np.diff(np.concatenate(([False], bad, [False])).astype(int)))
    for start, end in edges.reshape(-1, 2):
        i = start + int(np.argmax(sizes[start:end]))
        yield Violation(ArbitrageKind.BUTTERFLY, quote.expiry_date, None, float(k[i]), float(sizes[i]), True)
