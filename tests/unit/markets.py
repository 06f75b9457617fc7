"""A small invented market and trades on it, for tests of the market room."""

from __future__ import annotations

from dataclasses import replace
from datetime import date

import numpy as np

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.book import Premium, Trade
from pricer.contracts.option import EuropeanOption
from pricer.contracts.profile import Profile, ProfileKind
from pricer.core.source import Place
from pricer.market.correlation import checked
from pricer.market.curves import DiscountCurve
from pricer.market.dividends import Dividends, ProportionalDividend
from pricer.market.fx import FxRates
from pricer.market.market import Market
from pricer.market.underlying import Underlying
from pricer.market.volatility import VolatilityCurve

TODAY = date(2026, 11, 30)
IDS = ("ARVENNE", "BELCOR", "CADMUS")
CORRELATION = np.array([[1.0, 0.5, 0.3], [0.5, 1.0, 0.4], [0.3, 0.4, 1.0]])


def curve(curve_id="EUR-STD", currency="EUR", collateral="", rate=0.02):
    return DiscountCurve.from_zero_rates(
        curve_id, currency, collateral, TODAY, [date(2027, 11, 30), date(2031, 11, 28)], [rate, rate + 0.005]
    )


def volatility(level=0.20):
    return VolatilityCurve.from_quotes(TODAY, [date(2027, 6, 18), date(2028, 12, 15)], [level, level + 0.01])


def small_market(**changes):
    underlyings = {
        "ARVENNE": Underlying("ARVENNE", "EUR", 100.0, "TARGET", 1.0, Dividends(0.02), volatility(0.20)),
        "BELCOR": Underlying(
            "BELCOR", "EUR", 50.0, "TARGET", 10.0,
            Dividends(0.0, (ProportionalDividend(date(2027, 5, 12), 0.03),)), volatility(0.30),
        ),
        "CADMUS": Underlying("CADMUS", "USD", 80.0, "NYSE", 1.0, Dividends(0.01), volatility(0.25)),
    }  # fmt: skip
    market = Market(
        name="small",
        valuation_date=TODAY,
        reporting_currency="EUR",
        underlyings=underlyings,
        curves={
            ("EUR", ""): curve(),
            ("EUR", "USD"): curve("EUR-USD", "EUR", "USD", 0.018),
            ("USD", ""): curve("USD-STD", "USD", "", 0.035),
        },
        correlation=checked(IDS, CORRELATION)[0],
        fx=FxRates.from_pairs({"EURUSD": 1.10, "NOKSEK": 0.98}),
    )  # fmt: skip
    return replace(market, **changes)


def basket(*names, expiry=date(2027, 12, 17), payment=None, currency="EUR", collateral="", premium=None):
    n = len(names)
    option = EuropeanOption(
        underlyings=names,
        reference_levels=(1.0,) * n,
        aggregate=Aggregate.weighted_sum((1.0 / n,) * n),
        profile=Profile(ProfileKind.CALL, 60.0),
        expiry_date=expiry,
        payment_date=payment or expiry,
        on_performance=False,
    )
    due = None if premium is None else Premium(1000.0, premium)
    return Trade("T1", option, 100.0, currency, collateral, premium=due)


def cell(column):
    """The place a loader would give: one cell per column of row 7, constituents on their own sheet."""
    if column.startswith("underlying:"):
        return Place("book.xlsx", "constituents", 9, "underlying", "B9")
    letters = {"trade_id": "A", "currency": "F", "collateral": "G", "expiry_date": "H"}
    return Place("book.xlsx", "trades", 7, column, f"{letters[column]}7") if column in letters else None
