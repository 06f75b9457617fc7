"""Prices and quotes for the tests of checked surfaces."""

from __future__ import annotations

from datetime import date

import numpy as np

from pricer.market.affine_price import AffinePrice
from pricer.market.checked_surface import VolatilityQuote, build_surface
from pricer.market.dividends import CashDividend, Dividends
from pricer.market.implied_surface import ImpliedSurface
from pricer.market.smile_quotes import SmileQuotes
from tests.unit.markets import TODAY, curve
from tests.unit.model_smiles import MODELS
from tests.unit.smiles import day

CASH = tuple(CashDividend(date(year, 5, 12), 3.0) for year in range(2027, 2032))
DAYS = (30, 91, 182, 365, 730)
RELATIVE = (0.8, 0.9, 0.95, 1.0, 1.05, 1.1, 1.2)

#: A smile that flattens with time, rounded to 0.05 vol points: days, first and last log-moneyness, volatilities in %.
FLATTENING = (
    (7, -0.02529, 0.02575, (11.9, 11.1, 10.75, 10.65, 10.65, 10.85, 11.25, 12.15)),
    (30, -0.05467, 0.05566, (12.7, 11.75, 11.3, 11.1, 11.15, 11.4, 12.0, 13.05)),
    (91, -0.09898, 0.10078, (12.9, 12.15, 11.7, 11.55, 11.6, 11.85, 12.4, 13.3)),
    (365, -0.20601, 0.20975, (12.6, 12.3, 12.05, 12.0, 12.0, 12.2, 12.45, 12.85)),
    (1095, -0.36217, 0.36875, (12.4, 12.25, 12.2, 12.15, 12.2, 12.25, 12.4, 12.55)),
)


def price(cash=()):
    return AffinePrice.of("ARVENNE", 100.0, Dividends(0.01, (), tuple(cash)), curve())


def heston_quotes(days=DAYS, strikes=RELATIVE, model="heston"):
    """Quotes at percentages of the forward, by expiry and strike."""
    return [
        VolatilityQuote(day(d), float(v), relative_strike=m)
        for d in days
        for m, v in zip(strikes, MODELS[model](np.log(strikes), d / 365), strict=True)
    ]


def flattening_quotes():
    """Quotes at strikes even in log-moneyness."""
    return [
        VolatilityQuote(day(days), v / 100, relative_strike=float(np.exp(k)))
        for days, low, high, volatilities in FLATTENING
        for k, v in zip(np.linspace(low, high, len(volatilities)), volatilities, strict=True)
    ]


def built(quotes, cash=()):
    return build_surface("ARVENNE", price(cash), TODAY, quotes)


#: Volatilities at the forward by days: a quiet time, an event, and what follows.
EVENTFUL = {
    "one event": {7: 0.10, 10: 0.45, 30: 0.30, 91: 0.22, 365: 0.20},
    "two events": {7: 0.10, 10: 0.35, 30: 0.22, 33: 0.35, 91: 0.26, 365: 0.22},
}


def eventful_surface(levels, skew, curvature):
    """A smile ``level (1 + skew z + curvature z^2)``, z in standard deviations, on these levels or those of a name."""
    quotes = []
    for days, level in (EVENTFUL[levels] if isinstance(levels, str) else levels).items():
        z = np.linspace(-2.2, 1.8, 9)
        k = z * level * np.sqrt(days / 365)
        quotes.append(SmileQuotes.of(day(days), k, level * (1.0 + skew * z + curvature * z * z)))
    return ImpliedSurface.from_quotes(TODAY, quotes)
