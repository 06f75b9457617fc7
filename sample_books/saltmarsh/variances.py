"""Variance, volatility and correlation, realised day by day."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import date

from saltmarsh.booking import Booked, option


def variance_trades() -> Iterator[Booked]:
    """Swaps and a dispersion; strikes of variances are squared volatilities, 0.04 for 20 %."""
    desk = "variance and correlation"
    yield option(desk, "forward", 12_000_000, {"ORLUMA": 0.25, "TESKIR": 0.25, "VADRONE": 0.25, "PELLOMAR": 0.25},
                 date(2026, 6, 18), date(2027, 6, 18), strike=0.034, statistic="variance", direction="long"
                 ).rule("observation", "1D")  # fmt: skip
    yield option(desk, "forward", 8_000_000, {"MIZZANT": 1.0}, date(2026, 11, 20), date(2027, 3, 19), strike=0.150,
                 statistic="variance").rule("observation", "1D")  # fmt: skip
    yield option(desk, "forward", 2_500_000, {"HALQUIN": 1.0}, date(2026, 9, 18), date(2027, 3, 19), strike=0.215,
                 statistic="volatility").rule("observation", "1D")  # fmt: skip
    # The mean of the shares' variances less that of their basket.
    yield option(desk, "forward", 10_000_000, {"KRUNTEL": 0.4, "SORBEQ": 0.3, "MIZZANT": 0.3}, date(2026, 8, 21),
                 date(2027, 3, 19), strike=0.024, statistic="variance", aggregate_weight=-1.0, direction="long"
                 ).own_levels("variance_weight", 0.4, 0.3, 0.3).rule("observation", "1D")  # fmt: skip
    yield option(desk, "forward", 1_000_000, {"DRUVEX": 0.25, "YONNARD": 0.25, "FENTRICK": 0.25, "WEXMOOR": 0.25},
                 date(2026, 5, 29), date(2027, 5, 28), strike=0.45, statistic="correlation", demeaned="no",
                 direction="long").rule("observation", "1W")  # fmt: skip
    yield option(desk, "forward", 1_000_000, {"ORLUMA": 0.5, "TESKIR": 0.5}, date(2026, 11, 27), date(2027, 3, 19),
                 strike=0.58, statistic="correlation").rule("observation", "1D")  # fmt: skip
    yield option(desk, "call", 6_000_000, {"KRUNTEL": 1.0}, date(2026, 10, 30), date(2027, 1, 15), strike=0.09,
                 statistic="variance", direction="long").rule("observation", "1D")  # fmt: skip
