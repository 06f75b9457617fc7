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


def notes(count):
    """Autocallables with calls, memory coupons and a daily barrier, all by rules."""
    tables = {name: [] for name in ("trades", "constituents", "schedule_rules", "barriers", "coupons")}
    for i in range(count):
        own = {"trade_id": f"N-{i:05d}"}
        tables["trades"].append(
            own
            | {
                "product": "note",
                "direction": "short",
                "underlying_level": "performance",
                "notional": 1e6,
                "aggregate": "worst of",
                "put_strike": 1.0,
                "expiry_date": date(2029, 1, 5) + timedelta(days=7 * (i % 50)),
                "currency": "EUR",
                "trade_date": date(2026, 1, 5) + timedelta(days=i % 250),
            }
        )
        for u in range(3):
            tables["constituents"].append(own | {"underlying": f"U{(i + u) % 50}", "initial_fixing": 100.0})
        quarterly = own | {"frequency": "3M", "roll": "preceding"}
        tables["schedule_rules"].append(quarterly | {"purpose": "call", "level": 1.0, "level_step": -0.01})
        tables["schedule_rules"].append(quarterly | {"purpose": "coupon", "level": 0.7, "amount": 0.02})
        tables["barriers"].append(own | {"kind": "knock-in", "direction": "down", "level": 0.6, "monitoring": "daily"})
        tables["coupons"].append(own | {"memory": "yes"})
    return tables


@pytest.mark.bench
@pytest.mark.parametrize("name", ["book.xlsx", "book"])
def test_a_thousand_notes_by_rules_are_read_in_a_few_seconds(tmp_path, name):
    write_tables(notes(1000), tmp_path / name)
    start = time.process_time()
    book = load_book(tmp_path / name)
    seconds = time.process_time() - start
    assert len(book) == 1000 and book.issues == ()
    print(f"{name}: 1000 notes in {seconds:.1f} s of processor time")
    assert seconds < 8.0


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
