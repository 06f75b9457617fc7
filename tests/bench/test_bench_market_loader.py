"""A large market: how long its quotes and its history take to read, beside reading their cells alone."""

from __future__ import annotations

import csv
import math
import time
from datetime import timedelta

import pytest

from pricer.loader import load_market, write_tables
from tests.unit.market_tables import VALUATION_DATE, price_history, small_market

UNDERLYINGS, EXPIRIES, STRIKES, DAYS = 50, 8, 9, 500
PAIRS = ("EURUSD", "EURGBP", "EURJPY", "EURCHF", "EURSEK", "EURNOK", "EURDKK", "EURAUD", "EURCAD", "EURPLN")


@pytest.fixture(scope="module")
def tables():
    ids = [f"U{i:02d}" for i in range(UNDERLYINGS)]
    tables = small_market()
    del tables["correlations"]
    tables["snapshot"][0]["correlation_source"] = "price history"
    tables["underlyings"] = [{"underlying": name, "currency": "EUR", "spot": 100.0} for name in ids]
    tables["dividends"] = []
    tables["fx"] = [{"pair": pair, "spot": 1.0} for pair in PAIRS]
    tables["volatilities"] = [
        {
            "underlying": name,
            "expiry_date": VALUATION_DATE + timedelta(days=91 * expiry),
            "volatility_decimal": _smile(0.2 + 0.002 * i, 0.25 * expiry, 0.7 + 0.075 * k),
            "strike_of_forward_decimal": 0.7 + 0.075 * k,
        }
        for i, name in enumerate(ids)
        for expiry in range(1, EXPIRIES + 1)
        for k in range(STRIKES)
    ]
    spots = dict.fromkeys(ids, 100.0) | dict.fromkeys(PAIRS, 1.0)
    tables["price_history"] = price_history([*ids, *PAIRS], DAYS, spots=spots)
    return tables


def _smile(level, years, strike):
    k = math.log(strike) / math.sqrt(years)
    return round(level - 0.03 * k + 0.02 * k * k, 4)


@pytest.mark.bench
@pytest.mark.parametrize("name", ["market.xlsx", "market"])
def test_a_large_market_is_read_in_seconds(tmp_path, tables, name):
    write_tables(tables, tmp_path / name)
    load_market(tmp_path / name)
    start = time.process_time()
    market = load_market(tmp_path / name)
    seconds = time.process_time() - start
    assert market.issues == ()
    assert len(market.surfaces) == UNDERLYINGS and len(market.correlation.ids) == UNDERLYINGS + len(PAIRS)
    print(
        f"{name}: {len(tables['volatilities'])} volatilities into {UNDERLYINGS} surfaces and "
        f"{len(tables['price_history'])} past levels in {seconds:.1f} s of processor time"
    )
    assert seconds < 12.0


@pytest.mark.bench
def test_a_history_takes_a_few_times_what_its_bare_cells_take(tmp_path, tables):
    """Against the standard library splitting the same file and turning levels into numbers, without any check."""
    write_tables({**tables, "volatilities": tables["volatilities"][:STRIKES]}, tmp_path / "market")
    load_market(tmp_path / "market")
    start = time.process_time()
    load_market(tmp_path / "market")
    ours = time.process_time() - start
    start = time.process_time()
    with (tmp_path / "market" / "price_history.csv").open(encoding="utf-8", newline="") as stream:
        rows = [(day, name, float(level)) for day, name, level in list(csv.reader(stream))[1:]]
    bare = time.process_time() - start
    assert len(rows) == len(tables["price_history"])
    print(f"history checked and correlated in {ours:.2f} s, {ours / bare:.0f} times its bare cells")
    assert ours < 100.0 * bare
