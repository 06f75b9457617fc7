"""Outcomes made by hand for the report's tests: an invented book on invented underlyings, in three currencies."""

from __future__ import annotations

import random
from dataclasses import replace
from datetime import UTC, date, datetime, timedelta

from pricer.contracts.book import Refusal
from pricer.core.issues import Issue, Severity
from pricer.core.source import SourceFile
from pricer.run.outcome import (
    CrossCheck,
    Delta,
    Interval,
    Model,
    Outcome,
    RunFacts,
    Status,
    UnderlyingFacts,
    Valuation,
    Verdict,
)
from tests.unit.report_markets import market_facts

VALUATION_DATE = date(2026, 5, 29)
TO_EUR = {"EUR": 1.0, "CHF": 1.0625, "JPY": 0.0059}
UNDERLYINGS = tuple(
    UnderlyingFacts(name, currency, spot, lot, TO_EUR[currency])
    for name, currency, spot, lot in (
        ("ALDERMOOR", "EUR", 48.25, 10.0),
        ("BRANDWEIL", "EUR", 131.8, 10.0),
        ("CORVANTO", "EUR", 12.065, 100.0),
        ("DUNSMERE", "EUR", 402.5, 1.0),
        ("ESKERLUND", "EUR", 77.14, 10.0),
        ("FENNICOTE", "CHF", 88.9, 10.0),
        ("GRAUWALD", "CHF", 251.4, 5.0),
        ("HOLMVIK", "CHF", 19.72, 50.0),
        ("ISHIMORI", "JPY", 3120.0, 100.0),
        ("KURADANI", "JPY", 845.5, 100.0),
        ("LINDERHOF", "EUR", 64.4, 10.0),
        ("MARWICK", "CHF", 143.05, 5.0),
    )
)
PRODUCTS = ("basket call", "worst of put", "best of call", "spread call", "geometric basket call", "basket put")
STRATEGIES = ("dispersion", "income notes", "relative value", "tail hedge")
COUNTERPARTIES = ("Ostrava Kredit", "Hjelm & Dahl", "Pellegrin SA", "Norrbank", "")
EXACT, SAMPLED = "one-dimensional quadrature", "randomised low-discrepancy sampling"


def facts(**changes) -> RunFacts:
    base = RunFacts(
        valuation_date=VALUATION_DATE,
        reporting_currency="EUR",
        book_name="Saltmarsh & Fen, structured desk",
        seed=20_000,
        precision_bp=1.0,
        workers=2,
        sources=(SourceFile("may_book.xlsx", "ab" * 32), SourceFile("may_market.xlsx", "0c" * 32)),
        versions=(("Python", "3.12.4"), ("pricer", "0.1.0"), ("numpy", "2.1.0")),
        settings=(("model", "correlated lognormal, volatility flat in strike"), ("independent randomisations", "16")),
        started=datetime(2026, 5, 29, 17, 45, 12, tzinfo=UTC),
        seconds=28.41,
        timings=(("pricing, all trades together", 28.41), ("pricing, summed over workers", 53.9)),
    )
    return replace(base, **changes)


def valuation(i: int = 0, **changes) -> Valuation:
    """The ``i``-th invented trade; every third is exact, every eleventh missed its precision."""
    draw = random.Random(f"trade {i}")
    currency = ("EUR", "EUR", "CHF", "JPY")[draw.randrange(4)]
    notional = draw.choice((250_000.0, 1_000_000.0, 2_500_000.0, 5_000_000.0)) * (100.0 if currency == "JPY" else 1.0)
    value = notional * draw.uniform(-0.11, 0.17)
    exact = i % 3 == 0
    missed = i % 11 == 10 and not exact
    from_failing = i % 17 == 7
    smiling, compared = i % 4 != 3, i % 9 != 8
    smile = random.Random(f"smile {i}")
    model_difference = notional * smile.uniform(-2e-3, 3e-3) if smiling else 0.0
    error = 0.0 if exact else notional * draw.uniform(2e-5, 9e-5)
    half = 1e-7 * notional if exact else 2.947 * error
    sampled = value + (notional * 4e-5 * draw.gauss(0.0, 1.0) if exact else 0.0)
    base = Valuation(
        trade_id=f"SMF-{1000 + i}",
        product=PRODUCTS[i % len(PRODUCTS)],
        currency=currency,
        counterparty=draw.choice(COUNTERPARTIES),
        netting_set=draw.choice(("", "NS-1", "NS-2")),
        strategy=draw.choice(STRATEGIES),
        expiry_date=VALUATION_DATE + timedelta(days=draw.randrange(20, 900)),
        notional=notional,
        value=value,
        standard_error=error,
        lower=value - half,
        upper=value + half,
        interval=Interval.EXACT if exact else Interval.SAMPLING,
        method=EXACT if exact else SAMPLED,
        model=Model.LOCAL_VOLATILITY if smiling and not exact else Model.LOGNORMAL,
        model_difference=model_difference if compared else None,
        model_difference_standard_error=(2e-5 * notional if smiling else 0.0) if compared else None,
        unpaid_premium=-0.02 * notional if i % 7 == 0 else 0.0,
        reporting_value=value * TO_EUR[currency],
        reporting_standard_error=error * TO_EUR[currency],
        sampled_value=sampled,
        sampled_standard_error=error or notional * 4e-5,
        paths=65_536 if i % 2 else 131_072,
        randomisations=16,
        time_steps=64 if smiling and not exact else 0,
        degrees_of_freedom=14,
        seconds=draw.uniform(0.01, 0.9),
        status=_status(missed, from_failing),
        ending="largest number of points reached" if missed else "target standard error reached",
        deltas=tuple(_delta(draw, u, notional) for u in draw.sample(UNDERLYINGS, draw.randrange(2, 9))),
    )
    return replace(base, **changes)


def _status(missed: bool, from_failing: bool) -> Status:
    if from_failing:
        return Status.FAILING_SURFACE
    return Status.PRECISION_NOT_REACHED if missed else Status.PRICED


def _delta(draw: random.Random, underlying: UnderlyingFacts, notional: float) -> Delta:
    shares = notional / underlying.spot * draw.uniform(-0.15, 0.3)
    gamma = shares / underlying.spot * draw.uniform(0.2, 1.5) if draw.random() < 0.7 else None
    vega = notional * draw.uniform(-0.001, 0.003)
    return Delta(
        underlying=underlying.underlying,
        delta=shares,
        standard_error=abs(shares) * draw.uniform(0.0005, 0.004),
        gamma=gamma,
        gamma_standard_error=None if gamma is None else abs(gamma) * 0.02,
        vega=vega,
        vega_standard_error=abs(vega) * 0.006,
        spot=underlying.spot,
        method="pathwise, common factor integrated exactly",
    )


def checks_of(valuation: Valuation, i: int = 0) -> tuple[CrossCheck, ...]:
    """An exact reference, a lower bound and an approximation; here and there one that fails."""
    draw = random.Random(f"check {i}")
    error = valuation.sampled_standard_error
    bp = valuation.notional * 1e-4

    def check(method: str, kind: str, difference: float, tolerance: float, verdict: Verdict, source: str) -> CrossCheck:
        return CrossCheck(
            trade_id=valuation.trade_id,
            product=valuation.product,
            model=valuation.model,
            engine_value=valuation.sampled_value,
            engine_standard_error=error,
            reference_method=method,
            reference_kind=kind,
            reference_value=valuation.sampled_value - difference,
            reference_error=1e-9 * valuation.notional if kind == "exact" else 0.0,
            difference=difference,
            difference_bp=difference / bp,
            difference_standard_errors=difference / error,
            tolerance=tolerance,
            verdict=verdict,
            source=source,
        )

    wide = 5.5 * error
    exact = error * (9.3 if i == 13 else draw.gauss(0.0, 1.0))
    below = error * (-8.1 if i == 22 else draw.uniform(0.1, 6.0))
    near = bp * draw.uniform(-14.0, 14.0)
    return (
        check(
            EXACT, "exact", exact, wide, Verdict.AGREES if abs(exact) <= wide else Verdict.DIFFERS, "conditional law"
        ),
        check(
            "conditioning on the geometric mean",
            "lower bound",
            below,
            wide,
            Verdict.WITHIN_BOUND if below >= -wide else Verdict.OUTSIDE_BOUND,
            "Curran 1994",
        ),
        check(
            "two matched moments",
            "approximation",
            near,
            10.0 * bp,
            Verdict.CLOSE if abs(near) <= 10.0 * bp else Verdict.FAR,
            "Levy 1992",
        ),
    )


def issue(**changes) -> Issue:
    base = Issue(
        code="not-positive",
        found="0",
        expected="a price above 0",
        mend="Enter the strike in currency, e.g. 95.",
        file="may_book.xlsx",
        sheet="trades",
        row=12,
        column="strike",
        cell="H12",
    )
    return replace(base, **changes)


def refusals() -> tuple[Refusal, ...]:
    return (
        Refusal("SMF-2001", (issue(),), "worst of put", "EUR", "Norrbank", "tail hedge"),
        Refusal(
            "SMF-2002",
            (
                issue(row=13, cell="E13", column="expiry_date", found='"31/02/2027"', expected="a date",
                      mend="Enter a day of the calendar as a date, e.g. 2027-02-26.", code="not-a-date"),
                issue(row=13, cell="C13", column="currency", found='"EURO"', expected="a currency of the market: CHF, "
                      "EUR or JPY", mend="Did you mean EUR?", code="unknown-currency"),
            ),
        ),
        Refusal(
            "SMF-2003",
            (
                issue(sheet="constituents", row=44, cell="B44", column="underlying", found='"GRAUWALT"',
                      expected="an underlying of the market", mend="The nearest name is GRAUWALD.",
                      code="unknown-underlying"),
            ),
            "basket call",
            "CHF",
            "Pellegrin SA",
            "dispersion",
        ),
    )  # fmt: skip


WARNINGS = (
    Issue(
        code="stale-spot",
        found="a spot of 2026-05-22",
        expected="a spot of the valuation date, 2026-05-29",
        mend="Check that the price of HOLMVIK is tonight's.",
        severity=Severity.WARNING,
        file="may_market.xlsx",
        sheet="underlyings",
        row=9,
        column="spot",
        cell="D9",
    ),
    Issue(
        code="correlation-repaired",
        found="a smallest eigenvalue of -0.0031",
        expected="a matrix without negative eigenvalues",
        mend="The nearest correlation matrix was used; the largest change is 0.012, of BRANDWEIL with ISHIMORI.",
        severity=Severity.WARNING,
        file="may_market.xlsx",
        sheet="correlations",
    ),
)


def outcome(n_trades: int = 40, refused: tuple[Refusal, ...] | None = None, **changes) -> Outcome:
    """A book of ``n_trades`` valued trades, three refused ones and a few flagged comparisons."""
    valuations = tuple(valuation(i) for i in range(n_trades))
    refused = refusals() if refused is None else refused
    base = Outcome(
        facts=facts(),
        valuations=valuations,
        cross_checks=tuple(check for i, v in enumerate(valuations) for check in checks_of(v, i)),
        refusals=refused,
        issues=(*WARNINGS, *(found for refusal in refused for found in refusal.issues)),
        underlyings=UNDERLYINGS,
        market=market_facts(),
    )
    return replace(base, **changes)


def empty(**changes) -> Outcome:
    """A run in which nothing could be read."""
    return replace(Outcome(facts(), (), (), (), (), ()), **changes)
