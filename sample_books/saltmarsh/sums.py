"""Cliquets, and selections that are locked in over time."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import date

from saltmarsh.booking import Booked, option


def sum_trades() -> Iterator[Booked]:
    """Seasoned and new ones."""
    cliquets = "cliquets"
    yield option(cliquets, "call", 4_000_000, {"ORLUMA": 0.4, "TESKIR": 0.3, "VADRONE": 0.3}, date(2026, 3, 20),
                 date(2029, 3, 20), strike=0.0, statistic="cliquet", local_floor=-0.03, local_cap=0.03,
                 direction="long").rule("observation", "3M", start_date=date(2026, 3, 20))  # fmt: skip
    yield option(cliquets, "call", 2_500_000, {"HALQUIN": 1.0}, date(2026, 11, 20), date(2027, 11, 19), strike=0.02,
                 cap=0.15, statistic="cliquet", local_cap=0.02).rule("observation", "1M")  # fmt: skip
    yield option(cliquets, "call", 3_000_000, {"KRUNTEL": 0.5, "DRUVEX": 0.5}, date(2026, 10, 16), date(2028, 10, 16),
                 strike=0.0, statistic="cliquet", local_floor=-0.05, local_cap=0.04, conversion="quanto",
                 currency="EUR").rule("observation", "3M")  # fmt: skip

    locked = "locked-in selections"
    # Each year the best of those left is taken out, and its performance kept.
    yield option(locked, "call", 5_000_000, ("KRUNTEL", "SORBEQ", "MIZZANT", "HALQUIN"), date(2025, 12, 19),
                 date(2029, 12, 19), strike=1.0, aggregate="best of", statistic="locked in", direction="long",
                 ).dates("observation", date(2026, 11, 18), date(2027, 12, 17), date(2028, 12, 19), date(2029, 12, 19)
                         )  # fmt: skip
    yield option(locked, "put", 3_000_000, ("DRUVEX", "YONNARD", "FENTRICK"), date(2026, 11, 16), date(2028, 5, 16),
                 strike=0.95, aggregate="k-th best", rank=2, statistic="locked in",
                 ).dates("observation", date(2027, 5, 17), date(2027, 11, 16))  # fmt: skip
