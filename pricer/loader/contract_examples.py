"""Example rows of options and notes on a path, one trade per feature. All names and figures are invented."""

from __future__ import annotations

from datetime import date

from pricer.loader.examples import EXAMPLE_BOOK
from pricer.loader.write import Tables

_OPTION = {"product": "option", "direction": "long", "currency": "EUR", "trade_date": date(2026, 3, 31)}
_PERFORMANCE = {**_OPTION, "underlying_level": "performance", "notional": 1_000_000.0}
_NOTE = {**_PERFORMANCE, "product": "note", "direction": "short", "aggregate": "worst of"}
_SWAP = {**_PERFORMANCE, "aggregate": "weighted sum", "profile": "forward"}

EXAMPLE_CONTRACTS: Tables = {
    "trades": [
        # A call on a basket that is knocked out above 140 %, with a rebate at the hit.
        {"trade_id": "EX-7", **_PERFORMANCE, "aggregate": "weighted sum", "profile": "call", "strike": 1.0,
         "expiry_date": date(2027, 6, 18)},
        # A put that a fall of either price knocks in: it was hit, as the desk's record says.
        {"trade_id": "EX-8", **_OPTION, "underlying_level": "price", "quantity": 10_000.0, "aggregate": "weighted sum",
         "profile": "put", "strike": 290.0, "expiry_date": date(2026, 12, 18), "trade_date": date(2026, 3, 2)},
        # A call on the mean of month-ends.
        {"trade_id": "EX-9", **_PERFORMANCE, "aggregate": "worst of", "profile": "call", "strike": 0.95,
         "expiry_date": date(2027, 3, 31), "statistic": "average", "average_of": "aggregate"},
        # A cliquet whose initial fixings are still to be set.
        {"trade_id": "EX-10", **_PERFORMANCE, "aggregate": "weighted sum", "profile": "call", "strike": 0.0,
         "expiry_date": date(2027, 4, 15), "statistic": "cliquet", "local_floor": -0.02, "local_cap": 0.03,
         "observation_calendar": "TARGET+XETRA"},
        # A worst-of autocallable: calls that step down, coupons with memory, a put that is knocked in at expiry.
        {"trade_id": "EX-11", **_NOTE, "expiry_date": date(2027, 12, 17), "capital": 1.0, "put_strike": 0.8,
         "leverage": 1.25},
        # A capital-guaranteed note with a coupon for each day in a range, which the issuer has called.
        {"trade_id": "EX-12", **_NOTE, "expiry_date": date(2027, 3, 31), "floor": 0.95, "put_strike": 1.0,
         "call_strike": 1.0, "participation": 0.8},
        # An American put.
        {"trade_id": "EX-13", **_PERFORMANCE, "aggregate": "worst of", "profile": "put", "strike": 1.0,
         "expiry_date": date(2027, 3, 19)},
        # A call whose writer may default.
        {"trade_id": "EX-14", **_PERFORMANCE, "aggregate": "best of", "profile": "call", "strike": 1.1,
         "expiry_date": date(2027, 3, 19)},
        # The same of a vehicle that defaults if its holding of VADRONE is worth less than its liabilities at expiry.
        {"trade_id": "EX-15", **_PERFORMANCE, "aggregate": "best of", "profile": "call", "strike": 1.1,
         "expiry_date": date(2027, 3, 19)},
        # A dispersion: the underlyings' variances less that of their basket.
        {"trade_id": "EX-16", **_SWAP, "strike": 0.012, "expiry_date": date(2027, 3, 19), "statistic": "variance",
         "aggregate_weight": -1.0, "returns_per_year": 252.0},
        # A correlation swap.
        {"trade_id": "EX-17", **_SWAP, "strike": 0.5, "expiry_date": date(2027, 3, 19), "statistic": "correlation",
         "demeaned": "no"},
    ],
    "constituents": [
        {"trade_id": "EX-7", "underlying": "ORLUMA", "weight": 0.5, "initial_fixing": 84.2},
        {"trade_id": "EX-7", "underlying": "TESKIR", "weight": 0.5, "initial_fixing": 212.5},
        {"trade_id": "EX-8", "underlying": "ORLUMA", "weight": 1.0, "barrier_level": 80.0},
        {"trade_id": "EX-8", "underlying": "TESKIR", "weight": 1.0, "barrier_level": 190.0},
        {"trade_id": "EX-9", "underlying": "ORLUMA", "initial_fixing": 84.2},
        {"trade_id": "EX-9", "underlying": "VADRONE", "initial_fixing": 37.16},
        {"trade_id": "EX-10", "underlying": "ORLUMA", "weight": 0.6},
        {"trade_id": "EX-10", "underlying": "TESKIR", "weight": 0.4},
        {"trade_id": "EX-11", "underlying": "ORLUMA", "initial_fixing": 84.2},
        {"trade_id": "EX-11", "underlying": "TESKIR", "initial_fixing": 212.5},
        {"trade_id": "EX-12", "underlying": "ORLUMA", "initial_fixing": 84.2},
        {"trade_id": "EX-12", "underlying": "VADRONE", "initial_fixing": 37.16},
        {"trade_id": "EX-13", "underlying": "ORLUMA", "initial_fixing": 84.2},
        {"trade_id": "EX-13", "underlying": "TESKIR", "initial_fixing": 212.5},
        {"trade_id": "EX-14", "underlying": "ORLUMA", "initial_fixing": 84.2},
        {"trade_id": "EX-14", "underlying": "TESKIR", "initial_fixing": 212.5},
        {"trade_id": "EX-15", "underlying": "ORLUMA", "initial_fixing": 84.2},
        {"trade_id": "EX-15", "underlying": "TESKIR", "initial_fixing": 212.5},
        {"trade_id": "EX-16", "underlying": "ORLUMA", "weight": 0.5, "initial_fixing": 84.2, "variance_weight": 0.5},
        {"trade_id": "EX-16", "underlying": "TESKIR", "weight": 0.5, "initial_fixing": 212.5, "variance_weight": 0.5},
        {"trade_id": "EX-17", "underlying": "ORLUMA", "weight": 0.5, "initial_fixing": 84.2},
        {"trade_id": "EX-17", "underlying": "TESKIR", "weight": 0.5, "initial_fixing": 212.5},
    ],
    "schedules": [
        {"trade_id": "EX-10", "purpose": "reference", "date": date(2026, 4, 15)},
        {"trade_id": "EX-11", "purpose": "call", "date": date(2027, 3, 31), "payment_date": date(2027, 4, 6),
         "level": 1.0, "amount": 1.0},
        {"trade_id": "EX-11", "purpose": "call", "date": date(2027, 9, 30), "payment_date": date(2027, 10, 5),
         "level": 0.95, "amount": 1.0},
        {"trade_id": "EX-12", "purpose": "coupon", "feature": 1, "date": date(2026, 9, 30), "level": 0.8,
         "amount": 0.04, "ceiling": 1.2},
        {"trade_id": "EX-12", "purpose": "coupon", "feature": 1, "date": date(2027, 3, 31), "level": 0.8,
         "amount": 0.04, "ceiling": 1.2},
        {"trade_id": "EX-12", "purpose": "exercise", "date": date(2026, 3, 31), "amount": 1.0},
    ],
    "schedule_rules": [
        {"trade_id": "EX-9", "purpose": "observation", "feature": 1, "start_date": date(2026, 3, 31),
         "end_date": date(2027, 3, 31), "frequency": "1M", "roll": "preceding", "stub": "short first",
         "end_of_month": "yes"},
        {"trade_id": "EX-10", "purpose": "observation", "start_date": date(2026, 4, 15), "frequency": "3M"},
        {"trade_id": "EX-11", "purpose": "coupon", "frequency": "6M", "payment_lag_days": 3, "level": 0.7,
         "level_step": -0.02, "amount": 0.02, "amount_step": 0.001},
        {"trade_id": "EX-12", "purpose": "accrual", "frequency": "1D"},
        {"trade_id": "EX-16", "purpose": "observation", "start_date": date(2026, 4, 1), "frequency": "1D"},
        {"trade_id": "EX-17", "purpose": "observation", "start_date": date(2026, 4, 1), "frequency": "1W"},
    ],
    "barriers": [
        {"trade_id": "EX-7", "feature": 1, "kind": "knock-out", "direction": "up", "level": 1.4,
         "watched_on": "aggregate", "at_level_counts": "yes", "monitoring": "daily", "start_date": date(2026, 4, 1),
         "end_date": date(2027, 6, 18), "rebate": 0.02, "rebate_paid": "at hit"},
        {"trade_id": "EX-8", "kind": "knock-in", "direction": "down", "watched_on": "any underlying",
         "monitoring": "continuous", "start_date": date(2026, 3, 2), "rebate": 0.5, "rebate_paid": "at expiry",
         "recorded_hit_date": date(2026, 3, 18), "recorded_payment_date": date(2026, 3, 20),
         "clear_until": date(2026, 3, 17)},
        {"trade_id": "EX-11", "kind": "knock-in", "direction": "down", "level": 0.6, "at_level_counts": "no",
         "monitoring": "expiry"},
    ],
    "calls": [
        {"trade_id": "EX-11", "feature": 1, "direction": "up", "watched_on": "every underlying",
         "at_level_counts": "yes"},
    ],
    "coupons": [
        {"trade_id": "EX-11", "feature": 1, "direction": "up", "watched_on": "aggregate", "at_level_counts": "yes",
         "memory": "yes"},
    ],
    "exercises": [
        {"trade_id": "EX-12", "feature": 1, "by": "issuer", "style": "bermudan", "exercised_date": date(2026, 3, 31),
         "exercised_payment_date": date(2026, 4, 2)},
        {"trade_id": "EX-13", "by": "holder", "style": "american", "start_date": date(2026, 3, 31)},
    ],
    "writers": [
        {"trade_id": "EX-14", "writer": "Guldmar Bank", "recovery_decimal": 0.35},
        {"trade_id": "EX-15", "writer": "Guldmar Vehicle", "assets": "VADRONE", "liabilities": 30.0,
         "deadweight_cost_decimal": 0.25},
    ],
}  # fmt: skip

#: The examples of the template: European options, then options and notes on a path.
WHOLE_BOOK: Tables = {
    name: [*EXAMPLE_BOOK.get(name, ()), *EXAMPLE_CONTRACTS.get(name, ())]
    for name in {**EXAMPLE_BOOK, **EXAMPLE_CONTRACTS}
}
