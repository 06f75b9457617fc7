"""Rights to end a trade early, of the holder and of the issuer, and writers who may default."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import date

from saltmarsh.booking import Booked, note, option, price_option


def exercise_trades() -> Iterator[Booked]:
    """Bermudan and American options, notes that the issuer may call, one that it has called."""
    early = "early exercise"
    yield option(early, "call", 5_000_000, ("KRUNTEL", "SORBEQ", "HALQUIN"), date(2026, 11, 18), date(2028, 11, 17),
                 strike=1.05, aggregate="best of", direction="long"
                 ).rule("exercise", "6M").having("exercises", by="holder", style="bermudan")  # fmt: skip
    yield option(early, "put", 4_000_000, ("TESKIR", "PELLOMAR"), date(2026, 8, 20), date(2027, 8, 20), strike=0.95,
                 direction="long").having("exercises", by="holder", style="american")  # fmt: skip
    yield option(early, "put", 3_000_000, {"DRUVEX": 0.4, "YONNARD": 0.3, "WEXMOOR": 0.3}, date(2026, 10, 1),
                 date(2027, 10, 1), strike=1.05, direction="long"
                 ).having("exercises", by="holder", style="american")  # fmt: skip
    yield price_option(early, "call", 50_000, {"KRUNTEL": 1.0, "HALQUIN": -1.0}, date(2026, 9, 14), date(2027, 12, 17),
                       strike=55.0, direction="long"
                       ).rule("exercise", "3M").having("exercises", by="holder", style="bermudan")  # fmt: skip
    yield option(early, "call", 3_000_000, ("TESKIR", "MIZZANT"), date(2026, 11, 5), date(2027, 11, 5), strike=0.9,
                 conversion="quanto", currency="EUR", direction="long"
                 ).rule("exercise", "3M").having("exercises", by="holder", style="bermudan")  # fmt: skip
    yield price_option(early, "put", 25_000, {"PELLOMAR": 1.0}, date(2026, 5, 18), date(2027, 5, 18), strike=135.0,
                       direction="long").having("exercises", by="holder", style="american")  # fmt: skip

    callable_ = "issuer-callable notes"
    yield note(callable_, 6_000_000, ("SORBEQ", "HALQUIN"), date(2026, 10, 23), date(2028, 10, 23), put_strike=1.0
               ).rule("coupon", "3M", amount=0.0175
               ).rule("exercise", "3M", start_date=date(2027, 1, 25), end_date=date(2028, 7, 24), amount=1.0
               ).having("exercises", by="issuer", style="bermudan"
               ).barrier("knock-in", "down", 0.65, "expiry")  # fmt: skip
    yield note(callable_, 4_000_000, ("ORLUMA", "VADRONE"), date(2026, 6, 25), date(2029, 6, 25), put_strike=0.8,
               leverage=1.25
               ).rule("coupon", "6M", level=0.7, amount=0.035
               ).rule("exercise", "6M", end_date=date(2028, 12, 27), amount=1.0
               ).having("exercises", by="issuer", style="bermudan")  # fmt: skip
    # Called last week, paid on Wednesday.
    yield note(callable_, 3_000_000, ("DRUVEX", "YONNARD"), date(2025, 11, 26), date(2027, 11, 26), put_strike=1.0
               ).rule("coupon", "6M", amount=0.038
               ).rule("exercise", "6M", end_date=date(2027, 5, 26), amount=1.0
               ).having("exercises", by="issuer", style="bermudan", exercised_date=date(2026, 11, 26),
                        exercised_payment_date=date(2026, 12, 2)
               ).barrier("knock-in", "down", 0.65, "expiry")  # fmt: skip


def writer_trades() -> Iterator[Booked]:
    """Bought from writers who may default: by their spreads, or by what they own."""
    bought = "vulnerable options"
    yield option(bought, "call", 4_000_000, ("ORLUMA", "TESKIR"), date(2026, 11, 13), date(2028, 12, 15), strike=1.1,
                 aggregate="best of", direction="long"
                 ).having("writers", writer="Ambervale Fund", recovery_decimal=0.25)  # fmt: skip
    yield option(bought, "put", 3_000_000, {"DRUVEX": 0.5, "FENTRICK": 0.5}, date(2026, 4, 30), date(2027, 4, 30),
                 strike=1.05, direction="long", statistic="average"
                 ).rule("observation", "1M", end_of_month="yes", roll="preceding"
                 ).having("writers", writer="Pennifold Capital")  # fmt: skip
    # Vehicles that own one share, and default if it is worth less than their debt.
    yield price_option(bought, "put", 8_000, {"MIZZANT": 1.0}, date(2026, 10, 5), date(2027, 12, 17), strike=390.0,
                       direction="long"
                       ).having("writers", writer="Brindlow Vehicle", assets="HALQUIN", liabilities=85.0,
                                deadweight_cost_decimal=0.2)  # fmt: skip
    yield price_option(bought, "exchange", 25_000, {"WEXMOOR": 1.0, "YONNARD": -2.2}, date(2026, 11, 2),
                       date(2027, 9, 17), direction="long"
                       ).having("writers", writer="Cawdry Vehicle", assets="WEXMOOR", liabilities=34.0)  # fmt: skip
