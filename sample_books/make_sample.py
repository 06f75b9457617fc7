"""Writes the sample: an invented desk's book and market, as workbooks and as CSV folders.

Every name and figure is invented. Run from the top of the project:
``python sample_books/make_sample.py``.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from datetime import date
from itertools import cycle
from pathlib import Path
from typing import Any

from pricer.loader import write_tables

HERE = Path(__file__).parent / "saltmarsh_desk"
VALUATION_DATE = date(2026, 11, 30)

Row = dict[str, Any]

# id: currency, spot, calendar, lot, dividend yield, volatility today's level, sensitivity to its own region
UNDERLYINGS: dict[str, tuple[str, float, str, int, float, float, float]] = {
    "ORLUMA": ("EUR", 84.20, "XETRA", 1, 0.021, 0.215, 0.78),
    "TESKIR": ("EUR", 212.50, "XETRA", 1, 0.012, 0.262, 0.70),
    "VADRONE": ("EUR", 37.16, "XETRA", 10, 0.034, 0.188, 0.66),
    "PELLOMAR": ("EUR", 128.90, "XETRA", 1, 0.000, 0.301, 0.62),
    "KRUNTEL": ("USD", 156.30, "NYSE", 1, 0.008, 0.284, 0.80),
    "SORBEQ": ("USD", 61.45, "NYSE", 10, 0.025, 0.231, 0.68),
    "MIZZANT": ("USD", 402.00, "NYSE", 1, 0.000, 0.347, 0.74),
    "HALQUIN": ("USD", 98.75, "NYSE", 1, 0.017, 0.205, 0.60),
    "DRUVEX": ("GBP", 5.32, "LSE", 100, 0.041, 0.198, 0.71),
    "YONNARD": ("GBP", 18.94, "LSE", 100, 0.028, 0.244, 0.64),
    "FENTRICK": ("GBP", 2.775, "LSE", 1000, 0.036, 0.272, 0.58),
    "WEXMOOR": ("GBP", 44.10, "LSE", 10, 0.019, 0.226, 0.69),
}
COUNTERPARTIES = {
    "Ostrevane Pension Trust": "OPT-1",
    "Guldmar Bank": "GUL-1",
    "Thrayle Insurance": "THR-1",
    "Pennifold Capital": "PEN-1",
}
VOLATILITY_DATES = [date(2026, 12, 18), date(2027, 3, 19), date(2027, 6, 18), date(2027, 12, 17), date(2028, 12, 15),
                    date(2031, 12, 19)]  # fmt: skip
CURVES = {
    # curve: currency, collateral, day count, calendar, short rate, long rate
    "EUR-STANDARD": ("EUR", "", "ACT/365F", "TARGET", 0.0192, 0.0241),
    "USD-STANDARD": ("USD", "", "ACT/365F", "US", 0.0365, 0.0338),
    "GBP-STANDARD": ("GBP", "", "ACT/365F", "UK", 0.0372, 0.0359),
    "EUR-USD-CASH": ("EUR", "USD", "ACT/365F", "TARGET", 0.0179, 0.0226),
}
TENORS = {"1W": 0.02, "1M": 0.08, "3M": 0.25, "6M": 0.5, "1Y": 1.0, "2Y": 2.0, "3Y": 3.0, "5Y": 5.0, "7Y": 7.0}
EXPIRIES = [date(2027, 1, 15), date(2027, 3, 19), date(2027, 6, 18), date(2027, 9, 17), date(2027, 12, 17),
            date(2028, 6, 16), date(2028, 12, 15), date(2029, 12, 21), date(2030, 12, 20)]  # fmt: skip


def main() -> None:
    """Write everything."""
    book, market = book_tables(), market_tables()
    for name, tables in (("book", book), ("market", market), ("broken_book", broken(book))):
        write_tables(tables, HERE / f"{name}.xlsx")
    for name, tables in (("book", book), ("market", market)):
        write_tables(tables, HERE / name)


def market_tables() -> dict[str, list[Row]]:
    """The market of the valuation date."""
    ids = list(UNDERLYINGS)
    return {
        "snapshot": [{"valuation_date": VALUATION_DATE, "reporting_currency": "EUR"}],
        "underlyings": [
            {
                "underlying": u,
                "currency": currency,
                "spot": spot,
                "calendar": calendar,
                "lot_size": lot,
                "dividend_yield_decimal": dividend,
            }
            for u, (currency, spot, calendar, lot, dividend, _, _) in UNDERLYINGS.items()
        ],
        "dividends": [
            {"underlying": "PELLOMAR", "ex_date": date(2027, 5, 12), "fraction_of_spot_decimal": 0.018},
            {"underlying": "PELLOMAR", "ex_date": date(2028, 5, 10), "fraction_of_spot_decimal": 0.019},
            {"underlying": "MIZZANT", "ex_date": date(2027, 3, 3), "fraction_of_spot_decimal": 0.0035},
            {"underlying": "MIZZANT", "ex_date": date(2027, 9, 1), "fraction_of_spot_decimal": 0.0035},
        ],
        "volatilities": [
            {"underlying": u, "expiry_date": day, "volatility_decimal": round(_volatility(row[5], day), 4)}
            for u, row in UNDERLYINGS.items()
            for day in VOLATILITY_DATES
        ],
        "correlations": [{"underlying": a, **{b: _correlation(a, b) for b in ids}} for a in ids],
        "curves": [
            {"curve": name, "currency": ccy, "collateral": collateral, "day_count": count, "calendar": calendar}
            for name, (ccy, collateral, count, calendar, _, _) in CURVES.items()
        ],
        "curve_points": [
            {"curve": name, "tenor": tenor, "zero_rate_decimal": round(_rate(short, long, years), 5)}
            for name, (*_, short, long) in CURVES.items()
            for tenor, years in TENORS.items()
        ],
        "fx": [{"pair": "EURUSD", "spot": 1.1032}, {"pair": "EURGBP", "spot": 0.8614}],
    }


def _volatility(level: float, day: date) -> float:
    years = (day - VALUATION_DATE).days / 365.0
    return level * (1.0 + 0.07 * math.exp(-1.5 * years) - 0.02 * years / (1.0 + years))


def _rate(short: float, long: float, years: float) -> float:
    return long + (short - long) * math.exp(-years / 1.8)


def _correlation(a: str, b: str) -> float:
    """One factor per currency region, the regions correlated with each other."""
    if a == b:
        return 1.0
    (region_a, *_, load_a), (region_b, *_, load_b) = UNDERLYINGS[a], UNDERLYINGS[b]
    return round(load_a * load_b * (1.0 if region_a == region_b else 0.55), 3)


def book_tables() -> dict[str, list[Row]]:
    """About sixty trades that cover every aggregate and profile."""
    trades: list[Row] = []
    constituents: list[Row] = []
    partners = cycle(COUNTERPARTIES.items())
    expiries = cycle(EXPIRIES)
    for number, (terms, legs) in enumerate(_terms(), start=1):
        trade_id = f"SMD-{number:04d}"
        counterparty, netting_set = next(partners)
        currency = UNDERLYINGS[legs[0][0]][0]
        trades.append(
            {
                "trade_id": trade_id,
                "product": "european option",
                "direction": "short" if number % 3 == 0 else "long",
                "currency": currency,
                "expiry_date": next(expiries),
                "settlement_lag_days": 2,
                "trade_date": date(2026, 2 + number % 9, 3 + number % 20),
                "counterparty": counterparty,
                "netting_set": netting_set,
                **terms,
            }
        )
        constituents.extend({"trade_id": trade_id, **_leg(leg)} for leg in legs)
    return {"trades": trades, "constituents": constituents}


def _leg(leg: tuple[str, float | None, float | None]) -> Row:
    underlying, weight, fixing = leg
    return {"underlying": underlying, "weight": weight, "initial_fixing": fixing}


def _fixed(underlying: str, percent_of_spot: float = 96.0) -> float:
    """An initial fixing some way from today's spot."""
    return round(UNDERLYINGS[underlying][1] * percent_of_spot / 100.0, 3)


def _price(
    profile: str, quantity: float, legs: dict[str, float | None], strategy: str, **terms: Any
) -> tuple[Row, Any]:
    row = {"underlying_level": "price", "profile": profile, "quantity": quantity, "strategy": strategy, **terms}
    row.setdefault("aggregate", "weighted sum")
    return row, [(u, w, None) for u, w in legs.items()]


def _performance(
    profile: str, notional: float, legs: dict[str, float | None], strategy: str, **terms: Any
) -> tuple[Row, Any]:
    row = {"underlying_level": "performance", "profile": profile, "notional": notional, "strategy": strategy, **terms}
    row.setdefault("aggregate", "weighted sum")
    fixings = cycle((94.0, 101.5, 98.0, 105.0))
    return row, [(u, w, _fixed(u, next(fixings))) for u, w in legs.items()]


def _equal(*names: str) -> dict[str, float | None]:
    return {name: round(1.0 / len(names), 6) for name in names}


def _ranked(*names: str) -> dict[str, float | None]:
    return dict.fromkeys(names)


EUR = ("ORLUMA", "TESKIR", "VADRONE", "PELLOMAR")
USD = ("KRUNTEL", "SORBEQ", "MIZZANT", "HALQUIN")
GBP = ("DRUVEX", "YONNARD", "FENTRICK", "WEXMOOR")


def _terms() -> Iterator[tuple[Row, Any]]:
    """The trades' terms, strategy by strategy."""
    one = "single names"
    yield _price("call", 40_000, {"ORLUMA": 1.0}, one, strike=86.0)
    yield _price("put", 25_000, {"KRUNTEL": 1.0}, one, strike=150.0)
    yield _price("straddle", 120_000, {"YONNARD": 1.0}, one, strike=19.0)
    yield _price("forward", 30_000, {"VADRONE": 1.0}, one, strike=37.0)
    yield _price("cash digital call", 500_000, {"SORBEQ": 1.0}, one, strike=62.0, cash_amount=1.0)
    yield _price("asset digital put", 60_000, {"DRUVEX": 1.0}, one, strike=5.20)
    yield _performance("call", 4_000_000, {"MIZZANT": 1.0}, one, strike=1.0, cap=0.25)

    baskets = "basket hedges"
    yield _performance("call", 10_000_000, _equal(*EUR), baskets, strike=1.00)
    yield _performance("put", 12_000_000, _equal(*EUR), baskets, strike=0.95)
    yield _performance("call", 8_000_000, _equal(*USD), baskets, strike=1.05, cap=0.30)
    yield _performance("put", 8_000_000, _equal(*USD), baskets, strike=1.00, floor=0.02)
    yield _performance("straddle", 3_000_000, _equal(*GBP), baskets, strike=1.00)
    yield _performance("forward", 6_000_000, _equal(*GBP), baskets, strike=1.00)
    yield _performance("call", 5_000_000, {"ORLUMA": 0.5, "TESKIR": 0.3, "VADRONE": 0.2}, baskets, strike=1.10)
    yield _price("call", 20_000, {"KRUNTEL": 2.0, "HALQUIN": 3.0}, baskets, strike=620.0)
    yield _performance("cash digital call", 2_000_000, _equal(*EUR), baskets, strike=1.0, cash_amount=0.08)
    yield _performance("asset digital call", 1_500_000, _equal("SORBEQ", "HALQUIN"), baskets, strike=1.02)
    yield _performance("call", 7_000_000, _equal(*USD), baskets, strike=1.0, collateral="",
                       premium=410_000, premium_date=date(2026, 12, 7))  # fmt: skip
    yield _performance("put", 9_000_000, _equal(*EUR), baskets, strike=0.90, collateral="USD")

    geometric = "geometric baskets"
    yield _performance("call", 6_000_000, _equal(*EUR), geometric, strike=1.0, aggregate="geometric")
    yield _performance("put", 6_000_000, _equal(*USD), geometric, strike=1.0, aggregate="geometric")
    yield _performance("cash digital put", 1_000_000, _equal(*GBP), geometric, strike=0.97, cash_amount=0.10,
                       aggregate="geometric")  # fmt: skip
    yield _performance("straddle", 2_500_000, _equal("KRUNTEL", "MIZZANT"), geometric, strike=1.0,
                       aggregate="geometric")  # fmt: skip

    spreads = "relative value"
    yield _price("call", 50_000, {"KRUNTEL": 1.0, "HALQUIN": -1.0}, spreads, strike=55.0)
    yield _price("put", 45_000, {"KRUNTEL": 1.0, "HALQUIN": -1.5}, spreads, strike=10.0)
    yield _price("exchange", 30_000, {"TESKIR": 1.0, "PELLOMAR": -1.6}, spreads)
    yield _price("exchange", 400_000, {"DRUVEX": 3.5, "YONNARD": -1.0}, spreads)
    yield _performance("call", 8_000_000, {"ORLUMA": 1.0, "VADRONE": -1.0}, spreads, strike=0.0)
    yield _performance("call", 6_000_000, {"MIZZANT": 1.0, "SORBEQ": -1.0}, spreads, strike=0.05, cap=0.40)
    yield _performance("call", 5_000_000, {"ORLUMA": 0.5, "TESKIR": 0.5, "VADRONE": -0.5, "PELLOMAR": -0.5}, spreads,
                       strike=0.02)  # fmt: skip
    yield _performance("cash digital call", 3_000_000, {"KRUNTEL": 1.0, "SORBEQ": -1.0}, spreads, strike=0.0,
                       cash_amount=0.12)  # fmt: skip
    yield _performance("straddle", 4_000_000, {"WEXMOOR": 1.0, "FENTRICK": -1.0}, spreads, strike=0.0)
    yield _performance("forward", 5_000_000, {"KRUNTEL": 0.6, "HALQUIN": 0.4, "MIZZANT": -1.0}, spreads, strike=0.0)

    best = "best-of sales"
    yield _performance("call", 5_000_000, _ranked(*EUR), best, strike=1.10, aggregate="best of")
    yield _performance("call", 5_000_000, _ranked("KRUNTEL", "MIZZANT"), best, strike=1.05, aggregate="best of")
    yield _performance("put", 4_000_000, _ranked("DRUVEX", "WEXMOOR"), best, strike=1.0, aggregate="best of")
    yield _performance("cash digital call", 2_000_000, _ranked(*USD), best, strike=1.2, cash_amount=0.06,
                       aggregate="best of")  # fmt: skip
    yield _performance("forward", 3_000_000, _ranked("ORLUMA", "TESKIR", "PELLOMAR"), best, strike=1.0,
                       aggregate="best of", cash_level=1.0)  # fmt: skip
    yield _performance("call", 3_000_000, _ranked("ORLUMA", "VADRONE"), best, strike=1.0, aggregate="best of",
                       cash_level=1.02)  # fmt: skip
    yield _performance("straddle", 2_000_000, _ranked(*GBP), best, strike=1.1, aggregate="best of")

    worst = "worst-of purchases"
    yield _performance("put", 10_000_000, _ranked(*EUR), worst, strike=0.80, aggregate="worst of")
    yield _performance("put", 8_000_000, _ranked("KRUNTEL", "SORBEQ", "MIZZANT"), worst, strike=0.90,
                       aggregate="worst of")  # fmt: skip
    yield _performance("call", 8_000_000, _ranked("YONNARD", "WEXMOOR"), worst, strike=1.0, aggregate="worst of")
    yield _performance("call", 6_000_000, _ranked(*USD), worst, strike=1.0, aggregate="worst of", cap=0.20)
    yield _performance("cash digital call", 4_000_000, _ranked(*EUR), worst, strike=0.90, cash_amount=0.11,
                       aggregate="worst of")  # fmt: skip
    yield _performance("asset digital put", 2_000_000, _ranked("ORLUMA", "PELLOMAR"), worst, strike=0.75,
                       aggregate="worst of")  # fmt: skip
    yield _performance("forward", 3_000_000, _ranked("TESKIR", "VADRONE"), worst, strike=0.9, aggregate="worst of")
    yield _performance("forward", 3_000_000, _ranked("SORBEQ", "HALQUIN"), worst, strike=1.0, aggregate="worst of",
                       cash_level=1.0)  # fmt: skip
    yield _performance("put", 5_000_000, _ranked("KRUNTEL", "HALQUIN"), worst, strike=1.0, aggregate="worst of",
                       floor=0.0, cap=0.5)  # fmt: skip

    ranks = "rank structures"
    yield _performance("call", 5_000_000, _ranked(*EUR), ranks, strike=1.0, aggregate="k-th best", rank=2)
    yield _performance("put", 5_000_000, _ranked(*USD), ranks, strike=0.95, aggregate="k-th best", rank=3)
    yield _performance("cash digital call", 2_000_000, _ranked("DRUVEX", "YONNARD", "WEXMOOR"), ranks, strike=1.0,
                       cash_amount=0.09, aggregate="k-th best", rank=2)  # fmt: skip
    yield _performance("call", 4_000_000, _ranked("KRUNTEL", "SORBEQ", "MIZZANT"), ranks, strike=1.0,
                       aggregate="rank weighted", rank_weights="0.6; 0.3; 0.1")  # fmt: skip
    yield _performance("call", 4_000_000, _ranked(*GBP), ranks, strike=1.0, aggregate="rank weighted",
                       rank_weights="0.4; 0.3; 0.2; 0.1")  # fmt: skip
    yield _performance("straddle", 2_000_000, _ranked("ORLUMA", "TESKIR"), ranks, strike=0.05,
                       aggregate="rank weighted", rank_weights="1; -1")  # fmt: skip
    yield _performance("put", 3_000_000, _ranked(*EUR), ranks, strike=0.9, aggregate="rank weighted",
                       rank_weights="0.1; 0.2; 0.3; 0.4")  # fmt: skip

    yield _price("call", 15_000, {"MIZZANT": 1.0, "KRUNTEL": 1.0, "SORBEQ": -2.0}, spreads, strike=430.0)
    yield _price("put", 200_000, {"DRUVEX": 1.0, "FENTRICK": 2.0}, baskets, strike=10.5)
    yield _price("cash digital put", 750_000, {"WEXMOOR": 1.0}, one, strike=42.0, cash_amount=1.0)
    yield _price("call", 35_000, {"PELLOMAR": 1.0}, one, strike=130.0, cap=40.0)


def broken(book: dict[str, list[Row]]) -> dict[str, list[Row]]:
    """Some good trades and one of each common mistake, to show what refusals look like."""
    trades = [dict(row) for row in book["trades"][:20]]
    constituents = [dict(row) for row in book["constituents"]]
    mistakes: list[Row] = [
        {"strike": "eighty-six"},
        {"expiry_date": date(2026, 11, 13)},
        {"currency": "EUX"},
        {"direction": "buy it"},
        {"trade_id": "SMD-0006"},
        {"quantity": -5_000},
        {"expiry_date": "03/04/2027"},
        {"notional": None},
        {"aggregate": "wieghted sum"},
        {"collateral": "JPY"},
        {"counterparty": '=HYPERLINK("a")', "strike": "#N/A"},
    ]
    for row, mistake in zip(trades, mistakes, strict=False):
        row.update(mistake)
    for row in constituents:
        if row["trade_id"] == "SMD-0014" and row["underlying"] == "TESKIR":
            row["weight"] = None
        if row["trade_id"] == "SMD-0015" and row["underlying"] == "HALQUIN":
            row["underlying"] = "HALQUEN"
    kept = {row["trade_id"] for row in trades}
    return {"trades": trades, "constituents": [row for row in constituents if row["trade_id"] in kept]}


if __name__ == "__main__":
    main()
