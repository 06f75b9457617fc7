"""Volatilities quoted at the forward alone, as a surface without skew: repriced on paths like any smile."""

from __future__ import annotations

import math

from scipy.special import ndtr

from pricer.market.checked_surface import CheckedSurface, QuoteFit
from pricer.market.implied_surface import ImpliedSurface
from pricer.market.market import Market


def flat_surface(name: str, market: Market) -> CheckedSurface:
    """The surface of an underlying that has volatilities at its forward and no smile, with those as its quotes.

    It gives them back exactly, so nothing is fitted and no check can fail. Raises as :meth:`Market.pure_volatility`.
    """
    quoted = market.underlyings[name].volatility
    if quoted is None:
        raise ValueError(f"{name} has no volatility at the forward")
    price, curve = market.affine_price(name), market.pure_volatility(name)
    quotes = []
    for day, time in zip(quoted.dates, quoted.times[1:], strict=True):
        volatility, level = quoted.volatility(day), price.at(day)
        delta = float(ndtr(0.5 * volatility * math.sqrt(time)))
        quotes.append(QuoteFit(day, level.forward, 1.0, delta, volatility, volatility, 0.0))
    return CheckedSurface(name, ImpliedSurface.flat(curve), tuple(quotes))


def is_random(surface: CheckedSurface) -> bool:
    """Whether every quoted volatility is above 0, so that prices of options tell volatilities."""
    return all(quote.quoted_volatility > 0.0 for quote in surface.quotes)
