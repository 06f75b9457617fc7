"""Prices and quotes for the tests of checked surfaces."""

from __future__ import annotations

from datetime import date

import numpy as np

from pricer.market.affine_price import AffinePrice
from pricer.market.checked_surface import VolatilityQuote, build_surface
from pricer.market.dividends import CashDividend, Dividends
from tests.unit.markets import TODAY, curve
from tests.unit.model_smiles import MODELS
from tests.unit.smiles import day

CASH = tuple(CashDividend(date(year, 5, 12), 3.0) for year in range(2027, 2032))
DAYS = (30, 91, 182, 365, 730)
RELATIVE = (0.8, 0.9, 0.95, 1.0, 1.05, 1.1, 1.2)


def price(cash=()):
    return AffinePrice.of("ARVENNE", 100.0, Dividends(0.01, (), tuple(cash)), curve())


def heston_quotes(days=DAYS, strikes=RELATIVE, model="heston"):
    """Quotes at percentages of the forward, by expiry and strike."""
    return [
        VolatilityQuote(day(d), float(v), relative_strike=m)
        for d in days
        for m, v in zip(strikes, MODELS[model](np.log(strikes), d / 365), strict=True)
    ]


def built(quotes, cash=()):
    return build_surface("ARVENNE", price(cash), TODAY, quotes)
