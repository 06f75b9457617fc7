"""What the sample's tables share: the date, the underlyings, the counterparties."""

from __future__ import annotations

from datetime import date
from typing import Any

from pricer.market.calendars import year_fraction

Row = dict[str, Any]
Tables = dict[str, list[Row]]

VALUATION_DATE = date(2026, 11, 30)

#: Ids and what stands for them: currency, spot, calendar, lot, dividend yield, level of the
#: volatility, loading on the common factor of its own region.
UNDERLYINGS: dict[str, tuple[str, float, str, int, float, float, float]] = {
    "ORLUMA": ("EUR", 84.20, "XETRA", 1, 0.000, 0.215, 0.78),
    "TESKIR": ("EUR", 212.50, "XETRA", 1, 0.000, 0.262, 0.70),
    "VADRONE": ("EUR", 37.16, "XETRA", 10, 0.000, 0.188, 0.66),
    "PELLOMAR": ("EUR", 128.90, "XETRA", 1, 0.000, 0.301, 0.62),
    "KRUNTEL": ("USD", 156.30, "NYSE", 1, 0.000, 0.284, 0.80),
    "SORBEQ": ("USD", 61.45, "NYSE", 10, 0.000, 0.231, 0.68),
    "MIZZANT": ("USD", 402.00, "NYSE", 1, 0.000, 0.347, 0.74),
    "HALQUIN": ("USD", 98.75, "NYSE", 1, 0.017, 0.205, 0.60),
    "DRUVEX": ("GBP", 5.32, "LSE", 100, 0.000, 0.198, 0.71),
    "YONNARD": ("GBP", 18.94, "LSE", 100, 0.028, 0.244, 0.64),
    "FENTRICK": ("GBP", 2.775, "LSE", 1000, 0.000, 0.272, 0.58),
    "WEXMOOR": ("GBP", 44.10, "LSE", 10, 0.019, 0.226, 0.69),
}

#: The desk's own name, as its credit default swaps are quoted.
DESK = "Saltmarsh Securities"
#: Counterparties and the netting sets of their trades.
COUNTERPARTIES = {
    "Ostrevane Pension Trust": "OPT-1",
    "Guldmar Bank": "GUL-1",
    "Thrayle Insurance": "THR-1",
    "Pennifold Capital": "PEN-1",
    "Ambervale Fund": "AMB-1",
}

#: Spot exchange rates: units of the second currency for one of the first.
FX_SPOTS = {"EURUSD": 1.1032, "EURGBP": 0.8614, "GBPUSD": 1.2807}


def years_to(day: date) -> float:
    """Years from the valuation date, as volatilities count them."""
    return year_fraction(VALUATION_DATE, day)
