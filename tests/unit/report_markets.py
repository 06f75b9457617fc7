"""What a run made of an invented market, for the report's tests: one surface that fails, one that is not simulated."""

from __future__ import annotations

import math
import random
from datetime import date, timedelta

from pricer.market.agreements import Agreement, CloseOut, Collateral
from pricer.run.outcome import (
    CreditPoint,
    CurvePoint,
    ForwardPoint,
    FundingPoint,
    MarketFacts,
    QuoteFit,
    SurfaceFacts,
)

TODAY = date(2026, 5, 29)
EXPIRIES = tuple(TODAY + timedelta(days=days) for days in (28, 91, 182, 364, 728))
RELATIVE_STRIKES = (0.6, 0.7, 0.8, 0.9, 0.95, 1.0, 1.05, 1.1, 1.2, 1.35)
SPOTS = {"ALDERMOOR": 48.25, "BRANDWEIL": 131.8, "DUNSMERE": 402.5, "GRAUWALD": 251.4, "ISHIMORI": 3120.0}
FAILING, NOT_SIMULATED = "DUNSMERE", "ISHIMORI"


def quote(underlying: str = "ALDERMOOR", relative: float = 1.0, expiry: date = EXPIRIES[1], **changes) -> QuoteFit:
    """One quote, missed by little; the wings and the failing surface by more."""
    draw = random.Random(f"{underlying} {relative} {expiry}")
    years = (expiry - TODAY).days / 365.0
    k = math.log(relative)
    quoted = 0.22 + 0.02 * len(underlying) / 8.0 - 0.12 * k / (0.5 + years) + 0.25 * k * k / (0.4 + years)
    d1 = -k / (quoted * math.sqrt(years)) + 0.5 * quoted * math.sqrt(years)
    delta = 0.5 * math.erfc(-d1 / math.sqrt(2.0))
    counts = 0.1 <= delta <= 0.9
    size = (1e-4 if counts else 8e-4) * (30.0 if underlying == FAILING else 1.0)
    fitted = quoted + size * draw.uniform(-1.0, 1.0)
    error = 4e-5
    simulated = None if underlying == NOT_SIMULATED else fitted + error * draw.gauss(0.0, 1.0)
    base = {
        "underlying": underlying,
        "expiry_date": expiry,
        "strike": round(SPOTS[underlying] * relative, 2),
        "strike_of_forward": relative,
        "delta": delta,
        "quoted": quoted,
        "fitted": fitted,
        "simulated": simulated,
        "simulated_standard_error": None if simulated is None else error,
        "counts": counts,
    }
    return QuoteFit(**{**base, **changes})


def surface(underlying: str) -> SurfaceFacts:
    failing = underlying == FAILING
    violations = (
        "butterfly arbitrage, 2026-06-26, strike 80.0 % of the forward: 1.93 vol points",
        "calendar arbitrage, 2026-06-26 to 2026-08-28, strike 120.0 % of the forward: 0.42 vol points",
    )
    return SurfaceFacts(
        underlying=underlying,
        passes=not failing,
        failures=(f"quotes contradict each other: {violations[0]} (and 1 more)",) if failing else (),
        violations=violations if failing else (),
        quotes=tuple(quote(underlying, relative, expiry) for expiry in EXPIRIES for relative in RELATIVE_STRIKES),
    )


def market_facts() -> MarketFacts:
    return MarketFacts(
        surfaces=tuple(surface(underlying) for underlying in SPOTS),
        curves=tuple(_curve("EUR-ESTR", "EUR", "", 0.021)) + tuple(_curve("EUR-USD-POSTED", "EUR", "USD", 0.024)),
        forwards=tuple(point for underlying in SPOTS for point in _forwards(underlying)),
        credit=tuple(
            CreditPoint(name, day, 0.4, hazard, math.exp(-hazard * (day - TODAY).days / 365.0))
            for name, hazard in (("Norrbank", 0.0085), ("Pellegrin SA", 0.0173))
            for day in EXPIRIES
        ),
        funding=tuple(FundingPoint(day, 0.0045 + 1e-4 * i, 0.0012) for i, day in enumerate(EXPIRIES)),
        agreements=(
            Agreement("NS-1", "Norrbank", "EUR", Collateral.TWO_WAY, 1e6, 2.5e6, 250_000.0, -1e5, 0.0005, 10),
            Agreement("NS-2", "Pellegrin SA", "CHF", close_out=CloseOut.REPLACEMENT_VALUE),
        ),
    )


def _curve(name: str, currency: str, collateral: str, rate: float) -> list[CurvePoint]:
    points = []
    for i, day in enumerate(EXPIRIES):
        years = (day - TODAY).days / 365.0
        quoted = None if i == 4 else rate + 1e-3 * years
        repriced = None if quoted is None else quoted + (3e-6 if i == 2 and collateral else 1e-13)
        instrument = "" if quoted is None else ("deposit" if i == 0 else "overnight swap")
        zero = rate + 9e-4 * years
        points.append(
            CurvePoint(
                name, currency, collateral, day, zero, math.exp(-zero * years), instrument, quoted, repriced
            )
        )  # fmt: skip
    return points


def _forwards(underlying: str) -> list[ForwardPoint]:
    spot, points = SPOTS[underlying], []
    for i, day in enumerate(EXPIRIES):
        draw = random.Random(f"forward {underlying} {day}")
        forward = spot * (1.0 + 0.01 * i)
        error = 2e-6 * forward
        off = 8.0 if (underlying, i) == ("GRAUWALD", 3) else draw.gauss(0.0, 1.0)
        simulated = underlying != NOT_SIMULATED
        dividend, floor = (0.012 * spot if i == 2 else 0.0), 0.012 * spot * (i < 2)
        points.append(
            ForwardPoint(
                underlying,
                day,
                forward,
                dividend,
                floor,
                forward + off * error if simulated else None,
                error if simulated else None,
            )
        )
    return points
