"""The sample's book: trades that cover every aggregate and profile, conversion and model, and every kind of path.

The first sixty are in their underlyings' own currency and leave the model to the run. After them come trades
that pay in another currency, trades that ask for a model, and short ones on underlyings whose cash
dividends go ex only after they have expired. The rest have a path, and half of them a past.
"""

from __future__ import annotations

from collections.abc import Iterator
from datetime import date
from itertools import cycle
from typing import Any

from saltmarsh.averages import average_trades
from saltmarsh.barriers import barrier_trades
from saltmarsh.booking import Booked
from saltmarsh.exercises import exercise_trades, writer_trades
from saltmarsh.facts import COUNTERPARTIES, FX_SPOTS, UNDERLYINGS, Row, Tables
from saltmarsh.notes import note_trades
from saltmarsh.sums import sum_trades
from saltmarsh.variances import variance_trades

EXPIRIES = [date(2027, 1, 15), date(2027, 3, 19), date(2027, 6, 18), date(2027, 9, 17), date(2027, 12, 17),
            date(2028, 6, 16), date(2028, 12, 15), date(2029, 12, 21), date(2030, 12, 20)]  # fmt: skip
#: Tables of what only trades on a path have.
FEATURE_TABLES = ("schedules", "schedule_rules", "barriers", "calls", "coupons", "exercises", "writers")
#: Counterparties of the first sixty trades, in turn; the last one is new to the desk.
_PARTNERS = list(COUNTERPARTIES.items())


def book_tables() -> Tables:
    """The trades and everything that belongs to them."""
    tables = _europeans()
    partners = cycle(_PARTNERS)
    for number, booked in enumerate(_on_a_path(), start=len(tables["trades"]) + 1):
        trade_id = f"SMD-{number:04d}"
        counterparty, netting_set = next(partners)
        tables["trades"].append(
            {
                "trade_id": trade_id,
                "direction": "short",
                "settlement_lag_days": 2,
                "counterparty": counterparty,
                "netting_set": netting_set,
                **booked.terms,
            }
        )
        for table, row in (*(("constituents", leg) for leg in booked.legs), *booked.rows):
            tables[table].append({"trade_id": trade_id, **row})
    return tables


def _on_a_path() -> Iterator[Booked]:
    """Options and notes with a path of their own, half of them with a past."""
    yield from average_trades()
    yield from barrier_trades()
    yield from sum_trades()
    yield from note_trades()
    yield from exercise_trades()
    yield from writer_trades()
    yield from variance_trades()


def _europeans() -> Tables:
    """European options, with empty tables of what only other trades have."""
    trades: list[Row] = []
    constituents: list[Row] = []
    partners = cycle(_PARTNERS[:-1])
    expiries = cycle(EXPIRIES)
    for number, (terms, legs) in enumerate((*_terms(), *_conversions(), *_models(), *_before_dividends()), start=1):
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
    return {"trades": trades, "constituents": constituents} | {name: [] for name in FEATURE_TABLES}


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


def _conversions() -> Iterator[tuple[Row, Any]]:
    """Trades that pay in another currency than some of their underlyings."""
    quantos = "quantos"
    yield _converted("put", 5_000_000, _ranked("ORLUMA", "KRUNTEL", "DRUVEX"), quantos, "quanto", "EUR", strike=0.85,
                     aggregate="worst of", expiry_date=date(2027, 12, 17))  # fmt: skip
    yield _converted("call", 4_000_000, _ranked("TESKIR", "MIZZANT"), quantos, "quanto", "USD", strike=1.10,
                     aggregate="best of", expiry_date=date(2027, 9, 17))  # fmt: skip
    yield _converted("call", 8_000_000, _equal("ORLUMA", "KRUNTEL", "YONNARD"), quantos, "quanto", "EUR", strike=1.0,
                     expiry_date=date(2028, 12, 15), model="local volatility")  # fmt: skip
    yield _converted("cash digital call", 2_000_000, _ranked("VADRONE", "SORBEQ", "WEXMOOR"), quantos, "quanto", "GBP",
                     strike=0.95, cash_amount=0.09, aggregate="worst of", expiry_date=date(2027, 9, 17))  # fmt: skip
    terms, legs = _price("call", 20_000, {"KRUNTEL": 1.0}, quantos, strike=160.0, conversion="quanto", currency="EUR",
                         expiry_date=date(2027, 9, 17))  # fmt: skip
    yield terms, legs

    composites = "composites"
    yield _converted("call", 6_000_000, _equal("HALQUIN", "YONNARD", "PELLOMAR"), composites, "composite", "EUR",
                     strike=1.0, expiry_date=date(2028, 6, 16))  # fmt: skip
    yield _converted("put", 5_000_000, _ranked("KRUNTEL", "FENTRICK", "ORLUMA"), composites, "composite", "EUR",
                     strike=0.9, aggregate="worst of", expiry_date=date(2029, 12, 21))  # fmt: skip
    yield _converted("call", 3_000_000, {"MIZZANT": 1.0, "PELLOMAR": -1.0}, composites, "composite", "USD", strike=0.0,
                     expiry_date=date(2027, 12, 17))  # fmt: skip
    terms, legs = _price("put", 90_000, {"YONNARD": 1.0}, composites, strike=24.0, conversion="composite",
                         currency="USD", expiry_date=date(2027, 6, 18), model="local volatility")  # fmt: skip
    yield terms, legs
    yield _converted("call", 4_000_000, _equal("HALQUIN", "PELLOMAR", "WEXMOOR"), composites, "composite", "GBP",
                     strike=1.05, aggregate="geometric", expiry_date=date(2028, 12, 15))  # fmt: skip


def _models() -> Iterator[tuple[Row, Any]]:
    """Trades that ask for a model themselves."""
    skew = "skew book"
    yield _price("put", 30_000, {"ORLUMA": 1.0}, skew, strike=71.0, expiry_date=date(2027, 12, 17),
                 model="local volatility")  # fmt: skip
    yield _performance("put", 6_000_000, _ranked(*EUR), skew, strike=0.70, aggregate="worst of",
                       expiry_date=date(2028, 12, 15), model="local volatility")  # fmt: skip
    yield _performance("cash digital put", 1_500_000, {"HALQUIN": 1.0}, skew, strike=0.85, cash_amount=0.10,
                       expiry_date=date(2027, 9, 17), model="local volatility")  # fmt: skip
    yield _performance("call", 5_000_000, _equal(*USD), skew, strike=1.15, expiry_date=date(2027, 9, 17),
                       model="lognormal")  # fmt: skip
    yield _price("call", 60_000, {"WEXMOOR": 1.0}, skew, strike=46.0, expiry_date=date(2027, 6, 18),
                 model="lognormal")  # fmt: skip


def _before_dividends() -> Iterator[tuple[Row, Any]]:
    """Short trades that see cash dividends go ex only after they have expired."""
    season = "dividend season"
    january, march, april = date(2027, 1, 15), date(2027, 3, 19), date(2027, 4, 16)
    yield _price("call", 45_000, {"ORLUMA": 1.0}, season, strike=85.0, expiry_date=april)
    yield _price("put", 15_000, {"TESKIR": 1.0}, season, strike=205.0, expiry_date=april)
    yield _price("forward", 100_000, {"VADRONE": 1.0}, season, strike=37.5, expiry_date=march)
    yield _price("straddle", 30_000, {"KRUNTEL": 1.0}, season, strike=155.0, expiry_date=january)
    yield _performance("call", 5_000_000, _equal("ORLUMA", "TESKIR", "VADRONE"), season, strike=1.0, expiry_date=april)
    yield _performance("put", 4_000_000, _ranked("ORLUMA", "VADRONE"), season, strike=0.95, aggregate="worst of",
                       expiry_date=april)  # fmt: skip
    yield _performance("call", 3_000_000, _ranked("DRUVEX", "FENTRICK"), season, strike=1.0, aggregate="best of",
                       expiry_date=march)  # fmt: skip
    yield _performance("cash digital call", 1_000_000, {"SORBEQ": 1.0}, season, strike=1.0, cash_amount=0.07,
                       expiry_date=march)  # fmt: skip
    yield _price("call", 40_000, {"KRUNTEL": 1.0, "SORBEQ": -1.0}, season, strike=95.0, expiry_date=march)
    yield _performance("put", 2_500_000, _equal(*GBP), season, strike=0.95, expiry_date=date(2027, 9, 17),
                       model="local volatility")  # fmt: skip


def _converted(
    profile: str, notional: float, legs: dict[str, float | None], strategy: str, conversion: str, currency: str,
    **terms: Any,
) -> tuple[Row, Any]:  # fmt: skip
    """A performance option that pays in ``currency``; fixings of a composite are converted at their day's rates."""
    row, fixed = _performance(
        profile, notional, legs, strategy, conversion=conversion, currency=currency, counterparty=_PARTNERS[-1][0],
        netting_set=_PARTNERS[-1][1], **terms,
    )  # fmt: skip
    if conversion == "composite":
        fixed = [(u, w, round(fixing * _rate_then(UNDERLYINGS[u][0], currency), 4)) for u, w, fixing in fixed]
    return row, fixed


def _rate_then(from_currency: str, to_currency: str) -> float:
    """The exchange rate of the fixing days: a little off today's."""
    if from_currency == to_currency:
        return 1.0
    ahead, back = from_currency + to_currency, to_currency + from_currency
    return 0.985 * (FX_SPOTS[ahead] if ahead in FX_SPOTS else 1.0 / FX_SPOTS[back])
