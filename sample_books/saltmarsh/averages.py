"""Averages on the way in and out, and options whose strike is set after the trade."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import date

from saltmarsh.booking import Booked, option, price_option

EUR_BASKET = {"ORLUMA": 0.3, "TESKIR": 0.3, "VADRONE": 0.2, "PELLOMAR": 0.2}


def average_trades() -> Iterator[Booked]:
    """Seasoned and new ones."""
    yield from _averages()
    yield from _forward_starts()


def _averages() -> Iterator[Booked]:
    out = "averages"
    # Month-ends, eight of twelve in the past.
    yield option(out, "call", 6_000_000, EUR_BASKET, date(2026, 3, 31), date(2027, 3, 31), strike=0.85,
                 direction="long", statistic="average"
                 ).rule("observation", "1M", end_of_month="yes", roll="preceding")  # fmt: skip
    # The last quarter, week by week; nothing is fixed yet.
    yield option(out, "put", 4_000_000, ("DRUVEX", "YONNARD", "WEXMOOR"), date(2026, 11, 18), date(2027, 11, 19),
                 strike=0.95, statistic="average", average_of="aggregate"
                 ).rule("observation", "1W", start_date=date(2027, 8, 20))  # fmt: skip
    # The strike is the mean of three days of spring.
    yield option(out, "put", 5_000_000, ("KRUNTEL", "SORBEQ", "MIZZANT"), date(2026, 4, 1), date(2027, 9, 17),
                 strike=0.85, are_set=False, direction="long",
                 ).dates("reference", date(2026, 4, 1), date(2026, 4, 15), date(2026, 4, 29))  # fmt: skip
    # The mean of three month-ends, the last one of them to come.
    yield option(out, "call", 3_000_000, {"ORLUMA": 0.5, "TESKIR": 0.5}, date(2026, 10, 28), date(2028, 6, 16),
                 strike=1.0, are_set=False, direction="long",
                 ).dates("reference", date(2026, 10, 30), date(2026, 11, 27), date(2026, 12, 30))  # fmt: skip
    # In and out.
    yield option(out, "call", 4_000_000, ("HALQUIN", "SORBEQ"), date(2026, 9, 1), date(2028, 12, 15), strike=1.0,
                 cap=0.5, aggregate="best of", are_set=False, statistic="average", direction="long",
                 ).dates("reference", date(2026, 9, 2), date(2026, 9, 16), date(2026, 9, 30)
                 ).rule("observation", "3M", start_date=date(2027, 12, 15))  # fmt: skip
    # The mean spread of two prices, weekly since September.
    yield price_option(out, "call", 40_000, {"KRUNTEL": 1.0, "HALQUIN": -1.0}, date(2026, 9, 1), date(2027, 3, 19),
                       strike=58.0, statistic="average", average_of="aggregate", direction="long",
                       ).rule("observation", "1W", start_date=date(2026, 9, 4))  # fmt: skip
    yield option(out, "call", 5_000_000, {"ORLUMA": 0.4, "KRUNTEL": 0.4, "DRUVEX": 0.2}, date(2026, 6, 30),
                 date(2027, 6, 30), strike=0.92, statistic="average", conversion="quanto", currency="EUR",
                 ).rule("observation", "1M", end_of_month="yes", roll="preceding")  # fmt: skip
    yield option(out, "straddle", 2_500_000, ("DRUVEX", "YONNARD", "FENTRICK", "WEXMOOR"), date(2026, 11, 20),
                 date(2027, 12, 15), strike=1.0, aggregate="k-th best", rank=2, statistic="average",
                 average_of="aggregate", direction="long").rule("observation", "3M")  # fmt: skip


def _forward_starts() -> Iterator[Booked]:
    start = "forward starts"
    yield option(start, "call", 5_000_000, {"ORLUMA": 0.5, "VADRONE": 0.5}, date(2026, 6, 30), date(2027, 9, 17),
                 strike=1.0, are_set=False, direction="long").dates("reference", date(2026, 9, 30))  # fmt: skip
    yield option(start, "put", 4_000_000, ("KRUNTEL", "MIZZANT"), date(2026, 11, 12), date(2027, 12, 17), strike=0.9,
                 are_set=False).dates("reference", date(2026, 12, 18))  # fmt: skip
    yield option(start, "straddle", 2_000_000, {"PELLOMAR": 1.0}, date(2026, 11, 26), date(2027, 3, 19), strike=1.0,
                 are_set=False, direction="long").dates("reference", date(2026, 12, 1))  # fmt: skip
