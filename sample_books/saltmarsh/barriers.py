"""Options with barriers: in and out, up and down, of the aggregate and of single prices, hit and untouched."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import date

from saltmarsh.booking import Booked, option, price_option
from saltmarsh.facts import VALUATION_DATE


def barrier_trades() -> Iterator[Booked]:
    """Seasoned and new ones."""
    desk = "barriers"
    yield option(desk, "call", 5_000_000, {"KRUNTEL": 0.5, "HALQUIN": 0.5}, date(2026, 5, 12), date(2027, 5, 21),
                 strike=0.95, direction="long").barrier("knock-out", "up", 1.25, "daily", rebate=0.03,
                                                        rebate_paid="at hit")  # fmt: skip
    yield option(desk, "put", 6_000_000, ("ORLUMA", "TESKIR", "VADRONE"), date(2026, 6, 19), date(2028, 6, 16),
                 strike=0.95, direction="long").barrier("knock-in", "down", 0.70, "dates"
                                                        ).rule("barrier", "3M")  # fmt: skip
    # PELLOMAR fell through its barrier on 24 November, between two fixings: what is left is a put.
    yield price_option(desk, "put", 20_000, {"TESKIR": 1.0, "PELLOMAR": 1.0}, date(2026, 8, 11), date(2027, 4, 16),
                       strike=360.0, direction="long"
                       ).own_levels("barrier_level", 170.0, 126.0
                       ).barrier("knock-in", "down", None, "continuous", watched_on="any underlying",
                                 recorded_hit_date=date(2026, 11, 24), clear_until=date(2026, 11, 23))  # fmt: skip
    yield price_option(desk, "call", 30_000, {"PELLOMAR": 1.0}, date(2026, 11, 9), date(2027, 6, 18), strike=135.0,
                       direction="long").barrier("knock-out", "down", 100.0, "continuous",
                                                 clear_until=VALUATION_DATE)  # fmt: skip
    yield option(desk, "cash digital call", 2_000_000, ("KRUNTEL", "SORBEQ", "HALQUIN"), date(2026, 10, 7),
                 date(2027, 12, 17), strike=1.05, cash_amount=0.10, aggregate="best of",
                 ).barrier("knock-in", "up", 0.90, "expiry", watched_on="every underlying")  # fmt: skip
    yield option(desk, "call", 3_000_000, ("DRUVEX", "FENTRICK"), date(2026, 9, 8), date(2028, 3, 17), strike=1.0,
                 direction="long", aggregate="best of",
                 ).barrier("knock-out", "down", 0.75, "dates", watched_on="every underlying", rebate=0.02,
                           rebate_paid="at expiry").rule("barrier", "1M")  # fmt: skip
    # Nobody has recorded since the summer whether the barriers were touched between two fixings.
    yield price_option(desk, "call", 60_000, {"ORLUMA": 1.0, "VADRONE": 1.0}, date(2026, 7, 21), date(2027, 3, 19),
                       strike=125.0, direction="long"
                       ).own_levels("barrier_level", 115.0, 55.0
                       ).barrier("knock-out", "up", None, "continuous", watched_on="any underlying",
                                 clear_until=date(2026, 8, 31))  # fmt: skip
    # Out since April; the rebate comes at expiry.
    yield option(desk, "put", 4_000_000, ("MIZZANT", "HALQUIN"), date(2026, 3, 10), date(2027, 3, 19), strike=1.0,
                 direction="long", aggregate="best of",
                 ).barrier("knock-out", "up", 1.20, "daily", rebate=0.04, rebate_paid="at expiry")  # fmt: skip
    yield option(desk, "call", 4_000_000, {"ORLUMA": 0.5, "PELLOMAR": 0.5}, date(2026, 10, 20), date(2027, 10, 15),
                 strike=1.0, direction="long"
                 ).barrier("knock-in", "down", 0.85, "daily", feature=1
                 ).barrier("knock-out", "up", 1.30, "daily", feature=2)  # fmt: skip
    yield option(desk, "put", 3_000_000, {"SORBEQ": 1.0}, date(2026, 11, 17), date(2027, 9, 17), strike=1.0,
                 direction="long").barrier("knock-out", "down", 0.80, "daily", start_date=date(2027, 3, 1),
                                           end_date=date(2027, 5, 28), rebate=0.01, rebate_paid="at hit")  # fmt: skip
    yield option(desk, "put", 5_000_000, ("KRUNTEL", "YONNARD", "ORLUMA"), date(2026, 8, 4), date(2027, 8, 20),
                 strike=0.95, conversion="composite", currency="EUR"
                 ).barrier("knock-in", "down", 0.80, "dates").rule("barrier", "1M")  # fmt: skip
    yield option(desk, "put", 5_000_000, ("TESKIR", "KRUNTEL"), date(2026, 11, 23), date(2027, 12, 17), strike=1.0,
                 conversion="quanto", currency="EUR",
                 ).barrier("knock-in", "down", 0.65, "continuous", clear_until=VALUATION_DATE)  # fmt: skip
