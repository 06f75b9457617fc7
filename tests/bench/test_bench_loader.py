"""A book of 100,000 trades: how long it takes to read, and how much memory."""

from __future__ import annotations

import time
import tracemalloc
from datetime import date, timedelta

import pytest

from pricer.loader import load_book, write_tables

TRADES = 100_000


@pytest.fixture(scope="module")
def tables():
    trades = [
        {
            "trade_id": f"T-{i:06d}",
            "product": "european option",
            "direction": "long" if i % 2 else "short",
            "underlying_level": "performance",
            "notional": 1e6 + i,
            "aggregate": "worst of",
            "profile": "put",
            "strike": 0.8 + 1e-6 * i,
            "expiry_date": date(2027, 1, 4) + timedelta(days=i % 1500),
            "settlement_lag_days": 2,
            "currency": "EUR",
            "counterparty": f"Bank {i % 200}",
            "netting_set": f"N-{i % 300}",
        }
        for i in range(TRADES)
    ]
    constituents = [
        {"trade_id": f"T-{i:06d}", "underlying": f"U{i % 400}", "initial_fixing": 100.0} for i in range(TRADES)
    ]
    return {"trades": trades, "constituents": constituents}


@pytest.mark.bench
@pytest.mark.parametrize("name", ["book.xlsx", "book"])
def test_a_hundred_thousand_trades_are_read_in_seconds(tmp_path, tables, name):
    write_tables(tables, tmp_path / name)
    start = time.process_time()
    book = load_book(tmp_path / name)
    seconds = time.process_time() - start
    assert len(book) == TRADES
    print(f"{name}: {TRADES} trades in {seconds:.1f} s of processor time")
    assert seconds < 20.0


@pytest.mark.bench
def test_memory_grows_with_the_book_and_no_faster(tmp_path, tables):
    peaks = []
    for count in (2_000, 8_000):
        write_tables({name: rows[:count] for name, rows in tables.items()}, tmp_path / f"{count}.xlsx")
        load_book(tmp_path / f"{count}.xlsx")
        tracemalloc.start()
        load_book(tmp_path / f"{count}.xlsx")
        peaks.append(tracemalloc.get_traced_memory()[1])
        tracemalloc.stop()
    print(f"peaks: {peaks[0] / 1e6:.1f} MB and {peaks[1] / 1e6:.1f} MB")
    assert peaks[1] < 4.4 * peaks[0]
