"""Tables of a market for tests: the example's, cut down, and histories of prices."""

from __future__ import annotations

from copy import deepcopy
from datetime import date, timedelta

import numpy as np

from pricer.core.randomness import Purpose, stream
from pricer.loader.examples import EXAMPLE_MARKET

OPTIONAL = ("dividends", "repo", "price_history", "fx", "fx_volatilities", "credit", "funding", "agreements", "fixings")
VALUATION_DATE = date(2026, 3, 31)
SPOTS = (("underlyings", "underlying"), ("fx", "pair"))


def full_market():
    """Every table but the history of prices."""
    return deepcopy(dict(EXAMPLE_MARKET))


def small_market():
    """Three underlyings in EUR with volatilities at the forward, and nothing but the tables of old."""
    tables = full_market()
    for name in ("repo", "fixings", "fx_volatilities", "credit", "funding", "agreements"):
        del tables[name]
    for name, column, unwanted in (
        ("underlyings", "underlying", ("WEXMOOR",)),
        ("dividends", "underlying", ("WEXMOOR",)),
        ("volatilities", "underlying", ("WEXMOOR",)),
        ("correlations", "underlying", ("WEXMOOR", "EURUSD")),
        ("curves", "curve", ("GBP-STANDARD", "USD-STANDARD")),
        ("curve_points", "curve", ("GBP-STANDARD", "USD-STANDARD")),
        ("fx", "pair", ("EURGBP",)),
    ):
        tables[name] = [row for row in tables[name] if row[column] not in unwanted]
    for row in tables["correlations"]:
        del row["WEXMOOR"], row["EURUSD"]
    return tables


def price_history(ids, days=90, *, seed=1, last=VALUATION_DATE, spots=None):
    """Rows of the table price_history: random walks on weekdays up to ``last``, of one factor and own noise.

    They end at ``spots`` by id, or at the example's.
    """
    dates = [day for n in range(2 * days) if (day := last - timedelta(days=n)).weekday() < 5][:days][::-1]
    normals = stream(seed, "history", Purpose.FIT, 0).standard_normal((days, len(ids) + 1))
    walks = np.exp(0.01 * np.cumsum(normals[:, :1] + normals[:, 1:], axis=0))
    spots = spots or {row[column]: row["spot"] for table, column in SPOTS for row in EXAMPLE_MARKET[table]}
    levels = walks / walks[-1] * [spots[name] for name in ids]
    return [
        {"date": day, "underlying": name, "level": float(level)}
        for day, row in zip(dates, levels, strict=True)
        for name, level in zip(ids, row, strict=True)
    ]
