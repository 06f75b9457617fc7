"""A thousand European trades on fifty underlyings, priced and reported, in fresh processes.

Run alone: ``python -m pytest -m bench -s tests/bench/test_book_speed.py``.
"""

from __future__ import annotations

import json
import resource
import subprocess
import sys
import time
from datetime import date
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from pricer.loader import write_tables

pytestmark = pytest.mark.bench

TRADES, UNDERLYINGS = 1000, 50
PROFILES = ("call", "put", "straddle", "cash digital call")


def write_inputs(folder: Path) -> None:
    """An invented book: baskets, spreads, best and worst of, geometric, k-th best, 1 to 8 underlyings."""
    rng = np.random.default_rng(50)
    ids = [f"U{i:02d}" for i in range(UNDERLYINGS)]
    loads = rng.uniform(0.4, 0.8, UNDERLYINGS)
    correlation = np.outer(loads, loads)
    np.fill_diagonal(correlation, 1.0)
    market = {
        "snapshot": [{"valuation_date": date(2026, 11, 30), "reporting_currency": "EUR"}],
        "underlyings": [
            {"underlying": u, "currency": "EUR", "spot": round(float(s), 2), "calendar": "TARGET",
             "lot_size": 1, "dividend_yield_decimal": round(float(q), 4)}
            for u, s, q in zip(ids, rng.uniform(20, 200, UNDERLYINGS), rng.uniform(0, 0.04, UNDERLYINGS), strict=True)
        ],
        "volatilities": [
            {"underlying": u, "expiry_date": day, "volatility_decimal": round(float(v), 4)}
            for u, v in zip(ids, rng.uniform(0.15, 0.4, UNDERLYINGS), strict=True)
            for day in (date(2027, 6, 18), date(2031, 12, 19))
        ],
        "correlations": [
            {"underlying": a, **{b: round(float(correlation[i, j]), 4) for j, b in enumerate(ids)}}
            for i, a in enumerate(ids)
        ],
        "curves": [
            {"curve": "EUR", "currency": "EUR", "collateral": "", "day_count": "ACT/365F", "calendar": "TARGET"}
        ],
        "curve_points": [
            {"curve": "EUR", "tenor": tenor, "zero_rate_decimal": rate}
            for tenor, rate in (("1M", 0.02), ("1Y", 0.022), ("7Y", 0.025))
        ],
        "fx": [{"pair": "EURUSD", "spot": 1.10}],
    }  # fmt: skip
    spots = {row["underlying"]: row["spot"] for row in market["underlyings"]}
    trades, constituents = [], []
    for number in range(TRADES):
        trade_id = f"T{number:04d}"
        aggregate = ("weighted sum", "weighted sum", "best of", "worst of", "geometric", "k-th best")[number % 6]
        signed = number % 6 == 1
        n = 2 if signed else int(rng.integers(1 if aggregate == "weighted sum" else 2, 9))
        chosen = rng.choice(ids, n, replace=False)
        profile = PROFILES[int(rng.integers(len(PROFILES)))]
        trades.append(
            {
                "trade_id": trade_id, "product": "european option", "direction": rng.choice(["long", "short"]),
                "notional": 1_000_000, "currency": "EUR", "underlying_level": "performance", "aggregate": aggregate,
                "rank": int(rng.integers(1, n + 1)) if aggregate == "k-th best" else None, "profile": profile,
                "strike": round(float(rng.uniform(0.8, 1.2)) - float(signed), 3),
                "cash_amount": 0.1 if "cash" in profile else None,
                "expiry_date": date(2027 + int(rng.integers(4)), 1 + int(rng.integers(12)), 15),
                "counterparty": f"Party {number % 7}", "netting_set": f"N{number % 7}", "strategy": f"S{number % 9}",
            }
        )  # fmt: skip
        for position, u in enumerate(chosen):
            weight = (1.0, -1.0)[position] if signed else round(1.0 / n, 6)
            constituents.append(
                {
                    "trade_id": trade_id,
                    "underlying": u,
                    "weight": weight if aggregate in ("weighted sum", "geometric") else None,
                    "initial_fixing": round(spots[u] * float(rng.uniform(0.9, 1.1)), 3),
                }
            )
    write_tables({"trades": trades, "constituents": constituents}, folder / "book.xlsx")
    write_tables(market, folder / "market.xlsx")


def test_a_thousand_trades_with_all_deltas_and_the_report(tmp_path):
    write_inputs(tmp_path)
    command = [sys.executable, "-m", "pricer", "eod", "book.xlsx", "market.xlsx", "--workers", "2", "--quiet"]
    began = time.perf_counter()
    done = subprocess.run([*command, "--out", "out"], cwd=tmp_path, capture_output=True, text=True, check=False)
    seconds = time.perf_counter() - began
    peak = resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss / 2**20
    assert done.returncode == 0, done.stderr[-2000:]

    facts = json.loads((tmp_path / "out" / "run.json").read_text())
    valuations, deltas = (pd.read_csv(tmp_path / "out" / f"{name}.csv") for name in ("valuations", "deltas"))
    worst_value = (valuations["sampled_standard_error"] / valuations["notional"]).max() * 1e4
    errors = deltas["standard_error"] * deltas["spot"]
    gross = (deltas["delta"] * deltas["spot"]).abs().groupby(deltas["trade_id"]).sum()
    scale = gross.combine(valuations.set_index("trade_id")["notional"], max)
    worst_delta = (errors / deltas["trade_id"].map(scale)).max() * 1e4
    print(
        f"\n{TRADES} trades, {len(deltas)} deltas: {seconds:.1f} s in all, pricing {facts['seconds']:.1f} s, "
        f"peak {peak:.2f} GiB; largest standard error of a value {worst_value:.2f} bp, "
        f"of a cash delta {worst_delta:.2f} bp of notional or gross"
    )
    assert (valuations["status"] == "priced").all()
    assert worst_value <= 1.0
    assert worst_delta <= 1.0 + 1e-9
    assert peak <= 2.0
