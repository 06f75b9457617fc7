"""The small market with smiles, cash dividends and exchange rates that move, for tests of whole runs."""

from __future__ import annotations

from dataclasses import replace
from datetime import date

import numpy as np

from pricer.market.checked_surface import VolatilityQuote, build_surface
from pricer.market.correlation import checked
from pricer.market.dividends import CashDividend, Dividends
from pricer.market.fx import FxRates
from pricer.market.market import Market
from tests.unit.markets import CORRELATION, IDS, small_market, volatility

EXPIRIES = (date(2027, 3, 19), date(2027, 12, 17), date(2028, 12, 15))
LEVELS = {"ARVENNE": 100.0, "BELCOR": 50.0, "CADMUS": 80.0}
RATES_CORRELATION = {"ARVENNE": 0.1, "BELCOR": -0.2, "CADMUS": 0.35}


def real_market(*, smiles: bool = True, spots: dict[str, float] | None = None, **changes) -> Market:
    """Quotes at absolute strikes, which do not move with ``spots``; ARVENNE pays cash in 2027 and 2028."""
    correlation = np.eye(4)
    correlation[:3, :3] = CORRELATION
    for i, name in enumerate(IDS):
        correlation[i, 3] = correlation[3, i] = RATES_CORRELATION[name]
    market = small_market(
        fx=FxRates.from_pairs({"EURUSD": 1.10}, {"EURUSD": volatility(0.09)}),
        correlation=checked((*IDS, "EURUSD"), correlation)[0],
    )
    paying = Dividends(0.01, (), (CashDividend(date(2027, 5, 20), 2.0), CashDividend(date(2028, 5, 18), 2.0)))
    underlyings = dict(market.underlyings)
    underlyings["ARVENNE"] = replace(underlyings["ARVENNE"], dividends=paying)
    for name, spot in (spots or {}).items():
        underlyings[name] = replace(underlyings[name], spot=spot)
    market = replace(market, underlyings=underlyings)
    if smiles:
        surfaces = {name: build_surface(name, market.affine_price(name), market.valuation_date, quotes(name))
                    for name in IDS}  # fmt: skip
        bare = {name: replace(underlying, volatility=None) for name, underlying in underlyings.items()}
        market = replace(market, surfaces=surfaces, underlyings=bare)
    return replace(market, **changes)


def quotes(name: str) -> list[VolatilityQuote]:
    """A skew that flattens with time, at strikes from 60 % to 150 % of today's level."""
    base = {"ARVENNE": 0.20, "BELCOR": 0.28, "CADMUS": 0.24}[name]
    out = []
    for day, years in zip(EXPIRIES, (0.3, 1.05, 2.04), strict=True):
        width = 1.6 * base * np.sqrt(years)
        for k in np.linspace(-width, width, 7):
            smile = base - 0.10 * k / np.sqrt(0.3 + years) + 0.08 * k * k / (0.3 + years)
            out.append(VolatilityQuote(day, float(smile), strike=LEVELS[name] * float(np.exp(k))))
    return out
