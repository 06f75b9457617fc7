"""Notes that the desk has sold: autocallables, reverse convertibles, guaranteed capital, coupons that accrue."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import date
from typing import Any

from saltmarsh.booking import Booked, note
from saltmarsh.facts import VALUATION_DATE

EUR, USD, GBP = (("ORLUMA", "TESKIR", "VADRONE", "PELLOMAR"), ("KRUNTEL", "SORBEQ", "MIZZANT", "HALQUIN"),
                 ("DRUVEX", "YONNARD", "FENTRICK", "WEXMOOR"))  # fmt: skip


def note_trades() -> Iterator[Booked]:
    """Seasoned and new ones."""
    yield from _autocallables()
    yield from _ended()
    yield from _reverse_convertibles()
    yield from _guaranteed()


def _autocallables() -> Iterator[Booked]:
    desk = "autocallables"
    # Calls that step down, coupons with memory: the last one was missed.
    yield _memory(note(desk, 10_000_000, EUR[:3], date(2026, 3, 20), date(2030, 3, 20), put_strike=1.0), 0.85, 0.024
                  ).rule("call", "3M", start_date=date(2026, 12, 21), level=0.95, level_step=-0.02
                  ).barrier("knock-in", "down", 0.60, "expiry")  # fmt: skip
    # Coupons whatever happens, a put that any day's fixing may knock in.
    yield note(desk, 8_000_000, ("KRUNTEL", "SORBEQ", "HALQUIN"), date(2026, 9, 17), date(2029, 9, 17), put_strike=1.0
               ).rule("coupon", "6M", amount=0.046
               ).rule("call", "6M", start_date=date(2027, 3, 16), level=1.0
               ).barrier("knock-in", "down", 0.65, "daily")  # fmt: skip
    # Called when every share is up; the premium grows from call to call.
    yield note(desk, 6_000_000, {"ORLUMA": 0.34, "VADRONE": 0.33, "PELLOMAR": 0.33}, date(2026, 11, 19),
               date(2029, 11, 19), put_strike=1.0
               ).rule("call", "6M", level=1.0, amount=1.045, amount_step=0.045
               ).having("calls", direction="up", watched_on="every underlying"
               ).barrier("knock-in", "down", 0.60, "expiry")  # fmt: skip
    # Coupons for each day above 80 %.
    yield _accruing(note(desk, 5_000_000, GBP[:3], date(2026, 6, 16), date(2028, 6, 16), put_strike=1.0), 0.80, 0.034
                    ).rule("call", "3M", start_date=date(2027, 3, 16), level=1.0
                    ).barrier("knock-in", "down", 0.65, "expiry")  # fmt: skip
    # No barrier: a geared put below 75 %, and no less than a quarter of the capital.
    yield _memory(note(desk, 7_500_000, USD[:3], date(2026, 10, 16), date(2028, 10, 16), put_strike=0.75,
                       leverage=1.3333, floor=0.25), 0.80, 0.032
                  ).rule("call", "3M", start_date=date(2027, 1, 15), level=1.0)  # fmt: skip
    # Knocked in by VADRONE in October.
    yield _memory(note(desk, 4_000_000, ("ORLUMA", "VADRONE", "PELLOMAR"), date(2026, 1, 20), date(2029, 1, 19),
                       put_strike=1.0), 0.70, 0.017
                  ).rule("call", "3M", start_date=date(2026, 10, 20), level=1.0, level_step=-0.01
                  ).barrier("knock-in", "down", 0.70, "daily")  # fmt: skip
    # Today's observation lacks SORBEQ's fixing.
    yield _memory(note(desk, 6_000_000, ("SORBEQ", "HALQUIN"), date(2026, 8, 31), date(2029, 8, 31), put_strike=1.0,
                       ), 0.75, 0.021
                  ).rule("call", "3M", start_date=date(2026, 11, 30), level=1.0
                  ).barrier("knock-in", "down", 0.60, "expiry")  # fmt: skip
    # Its first call is tomorrow's.
    yield _memory(note(desk, 5_000_000, GBP[1:], date(2026, 9, 3), date(2029, 9, 3), put_strike=1.0), 0.75, 0.028
                  ).dates("call", date(2026, 12, 1), level=0.98
                  ).dates("call", date(2027, 6, 1), level=0.96).dates("call", date(2027, 12, 1), level=0.94
                  ).dates("call", date(2028, 6, 1), level=0.92).dates("call", date(2029, 3, 1), level=0.90
                  ).barrier("knock-in", "down", 0.60, "expiry")  # fmt: skip
    yield _memory(note(desk, 8_000_000, ("ORLUMA", "KRUNTEL", "DRUVEX"), date(2026, 7, 16), date(2029, 7, 16),
                       put_strike=1.0, conversion="quanto", currency="EUR"), 0.70, 0.022
                  ).rule("call", "3M", start_date=date(2027, 4, 15), level=1.0, level_step=-0.025
                  ).barrier("knock-in", "down", 0.60, "dates").rule("barrier", "1M")  # fmt: skip
    yield note(desk, 5_000_000, {"HALQUIN": 0.5, "YONNARD": 0.5}, date(2026, 11, 13), date(2028, 11, 13),
               put_strike=1.0, conversion="composite", currency="EUR"
               ).rule("call", "6M", level=1.0, amount=1.035, amount_step=0.035
               ).barrier("knock-in", "down", 0.70, "expiry")  # fmt: skip
    yield note(desk, 4_000_000, {"TESKIR": 1.0}, date(2026, 11, 24), date(2028, 11, 24), put_strike=1.0
               ).rule("coupon", "3M", level=0.75, amount=0.020
               ).rule("call", "3M", start_date=date(2027, 2, 24), level=1.0
               ).barrier("knock-in", "down", 0.60, "continuous", clear_until=VALUATION_DATE)  # fmt: skip


def _ended() -> Iterator[Booked]:
    """Over, but paid after tonight or just before."""
    desk = "ended notes"
    # Called on Friday.
    yield note(desk, 3_000_000, ("KRUNTEL", "MIZZANT"), date(2026, 2, 26), date(2028, 2, 28), put_strike=1.0
               ).dates("call", date(2026, 8, 27), level=1.0, amount=1.045
               ).dates("call", date(2026, 11, 27), level=0.80, amount=1.0675
               ).dates("call", date(2027, 2, 26), level=0.80, amount=1.09
               ).barrier("knock-in", "down", 0.60, "expiry")  # fmt: skip
    # Expired on Friday.
    yield note(desk, 2_500_000, ("DRUVEX", "WEXMOOR"), date(2025, 11, 27), date(2026, 11, 27), put_strike=0.9,
               ).dates("coupon", date(2026, 11, 27), amount=0.06)  # fmt: skip
    # Paid on the 25th: the back office has not taken it out yet.
    yield note(desk, 2_000_000, {"VADRONE": 1.0}, date(2026, 5, 20), date(2026, 11, 20), put_strike=1.0
               ).dates("coupon", date(2026, 11, 20), amount=0.045
               ).barrier("knock-in", "down", 0.75, "expiry")  # fmt: skip


def _reverse_convertibles() -> Iterator[Booked]:
    desk = "reverse convertibles"
    yield note(desk, 5_000_000, ("KRUNTEL", "SORBEQ"), date(2026, 10, 14), date(2027, 10, 14), put_strike=1.0
               ).rule("coupon", "3M", amount=0.026).barrier("knock-in", "down", 0.75, "expiry")  # fmt: skip
    yield note(desk, 3_000_000, {"ORLUMA": 0.5, "TESKIR": 0.5}, date(2026, 11, 25), date(2027, 11, 25),
               put_strike=0.85, leverage=1.1765).rule("coupon", "6M", amount=0.021)  # fmt: skip
    # Knocked in: PELLOMAR is down by more than a quarter.
    yield note(desk, 4_000_000, ("VADRONE", "PELLOMAR"), date(2026, 7, 7), date(2027, 7, 7), put_strike=1.0
               ).rule("coupon", "6M", amount=0.045).barrier("knock-in", "down", 0.75, "daily")  # fmt: skip
    yield note(desk, 2_000_000, {"FENTRICK": 1.0}, date(2026, 11, 26), date(2027, 8, 26), put_strike=1.0
               ).rule("coupon", "3M", amount=0.028
               ).barrier("knock-in", "down", 0.75, "continuous", clear_until=VALUATION_DATE)  # fmt: skip


def _guaranteed() -> Iterator[Booked]:
    desk = "guaranteed notes"
    yield note(desk, 6_000_000, {"ORLUMA": 0.25, "TESKIR": 0.25, "VADRONE": 0.25, "PELLOMAR": 0.25},
               date(2026, 11, 10), date(2030, 11, 11), put_strike=1.0, floor=0.95, call_strike=1.0, participation=0.60,
               cap=1.5)  # fmt: skip
    yield note(desk, 4_000_000, USD, date(2026, 5, 29), date(2029, 5, 29), call_strike=1.0, participation=1.2,
               statistic="average", average_of="aggregate"
               ).rule("observation", "6M")  # fmt: skip
    yield note(desk, 3_000_000, ("DRUVEX", "WEXMOOR"), date(2026, 9, 22), date(2029, 9, 24), call_strike=1.1,
               participation=0.45, aggregate="best of", statistic="average", average_of="aggregate", floor=0.97,
               ).rule("observation", "3M", start_date=date(2028, 9, 24))  # fmt: skip
    accrual = "range accruals"
    yield _accruing(note(accrual, 5_000_000, ("ORLUMA", "VADRONE"), date(2026, 3, 16), date(2028, 3, 16)), 0.75, 0.022)
    yield _accruing(note(accrual, 4_000_000, ("KRUNTEL", "HALQUIN"), date(2026, 11, 16), date(2028, 5, 16),
                         aggregate="best of"), 0.90, 0.030, 1.25)  # fmt: skip


def _memory(sold: Booked, level: float, amount: float) -> Booked:
    """With quarterly coupons that bring the missed ones."""
    return sold.rule("coupon", "3M", level=level, amount=amount).having("coupons", memory="yes")


def _accruing(sold: Booked, level: float, amount: float, ceiling: float | None = None) -> Booked:
    """With half-yearly coupons, accruing on every business day within the range."""
    range_: dict[str, Any] = {"level": level, "ceiling": ceiling}
    return sold.rule("coupon", "6M", amount=amount, **range_).rule("accrual", "1D")
