"""The market's tables: what was wrong with the snapshot, and how well the model reprices what it quotes.

Units stand in the names: ``_percent`` 22.5 is a volatility or rate of 22.5 %, a vol point is 0.01 of volatility, and
``_bp`` is 0.01 % (of the forward for forwards, of the rate for rates).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING

from pricer.core.issues import Issue
from pricer.market.agreements import Agreement
from pricer.report import tidy
from pricer.report.market_problems import MarketProblem, market_problems
from pricer.report.sums import ratio
from pricer.report.surface_fits import Origin, SurfaceFit, all_points, fit_error, reach, simulated_error, surface_fits
from pricer.run.outcome import MarketFacts, Outcome

if TYPE_CHECKING:
    import pandas

    Frame = pandas.DataFrame


def market_tables(outcome: Outcome, issues: Sequence[Issue]) -> Mapping[str, Frame]:
    """Every table of the market by name; ``issues`` are all that were found, each once."""
    market = outcome.market
    problems = market_problems(issues, outcome.facts.sources)
    return {
        "market_problems": tidy.records(
            problems, MarketProblem, text="severity kind table place found expected mend code", whole="number"
        ),
        "surfaces": tidy.records(
            surface_fits(outcome),
            SurfaceFit,
            text="underlying verdict why",
            whole="trades trades_refused expiries quotes derived violations fit_beyond_target beyond_target",
        ).rename(columns=_in_vol_points),
        "violations": violations(market),
        "calibration": calibration(market),
        "curves": curves(market),
        "forwards": forwards(market),
        "credit": credit(market),
        "funding": funding(market),
        "agreements": agreements(market),
    }


def violations(market: MarketFacts) -> Frame:
    """One row a violation of arbitrage, in words, underlying by underlying."""
    pairs = [(surface.underlying, words) for surface in market.surfaces for words in surface.violations]
    columns = {"underlying": [name for name, _ in pairs], "violation": [words for _, words in pairs]}
    return tidy.frame(columns, text="underlying violation")


def calibration(market: MarketFacts) -> Frame:
    """One row a quoted vanilla or derived point, by underlying, expiry and strike."""
    quotes = sorted(all_points(market.surfaces), key=lambda q: (q.underlying, q.expiry_date, q.strike))
    return tidy.frame(
        {
            "underlying": [q.underlying for q in quotes],
            "expiry_date": [q.expiry_date for q in quotes],
            "origin": [Origin.DERIVED if q.derived else Origin.QUOTED for q in quotes],
            "strike": [q.strike for q in quotes],
            "strike_percent_of_forward": [_percent(q.strike_of_forward) for q in quotes],
            "delta_percent": [_percent(q.delta) for q in quotes],
            "quoted_volatility_percent": [_percent(q.quoted) for q in quotes],
            "fitted_volatility_percent": [_percent(q.fitted) for q in quotes],
            "fit_error_vol_points": [fit_error(q) for q in quotes],
            "simulated_volatility_percent": [_percent(q.simulated) for q in quotes],
            "simulated_error_vol_points": [simulated_error(q) for q in quotes],
            "simulated_standard_error_vol_points": [_percent(q.simulated_standard_error) for q in quotes],
            "target": [reach(q) for q in quotes],
        },
        text="underlying origin target",
        dates="expiry_date",
    )


def curves(market: MarketFacts) -> Frame:
    """One row a date of a curve."""
    points = market.curves
    return tidy.frame(
        {
            "curve": [p.curve for p in points],
            "currency": [p.currency for p in points],
            "collateral": [p.collateral for p in points],
            "date": [p.date for p in points],
            "zero_rate_percent": [_percent(p.zero_rate) for p in points],
            "discount_factor": [p.discount_factor for p in points],
            "instrument": [p.instrument for p in points],
            "quoted_rate_percent": [_percent(p.quoted_rate) for p in points],
            "repriced_rate_percent": [_percent(p.repriced_rate) for p in points],
            "repricing_difference_bp": [_less(p.repriced_rate, p.quoted_rate, 1e4) for p in points],
        },
        text="curve currency collateral instrument",
        dates="date",
    )


def forwards(market: MarketFacts) -> Frame:
    """One row an underlying and date; the simulated forward's error is in basis points of the forward."""
    points = market.forwards
    errors = [None if p.simulated is None else p.simulated - p.forward for p in points]
    pairs = list(zip(points, errors, strict=True))
    return tidy.frame(
        {
            "underlying": [p.underlying for p in points],
            "date": [p.date for p in points],
            "forward": [p.forward for p in points],
            "dividend": [p.dividend for p in points],
            "floor": [p.floor for p in points],
            "simulated_forward": [p.simulated for p in points],
            "simulated_error_bp": [None if e is None else 1e4 * ratio(e, p.forward) for p, e in pairs],
            "simulated_standard_error_bp": [
                None if (s := p.simulated_standard_error) is None else 1e4 * ratio(s, p.forward) for p in points
            ],
            "simulated_error_standard_errors": [
                None if e is None else ratio(e, p.simulated_standard_error or 0.0) for p, e in pairs
            ],
        },
        text="underlying",
        dates="date",
    )


def credit(market: MarketFacts) -> Frame:
    """One row a name and date."""
    points = market.credit
    return tidy.frame(
        {
            "name": [p.name for p in points],
            "date": [p.date for p in points],
            "recovery_percent": [_percent(p.recovery) for p in points],
            "hazard_rate_percent": [_percent(p.hazard_rate) for p in points],
            "survival_probability_percent": [_percent(p.survival_probability) for p in points],
        },
        text="name",
        dates="date",
    )


def funding(market: MarketFacts) -> Frame:
    """One row a date."""
    points = market.funding
    return tidy.frame(
        {
            "date": [p.date for p in points],
            "borrowing_spread_bp": [_bp(p.borrowing_spread) for p in points],
            "lending_spread_bp": [_bp(p.lending_spread) for p in points],
        },
        dates="date",
    )


def agreements(market: MarketFacts) -> Frame:
    """One row a netting set."""
    text = "netting_set counterparty currency collateral close_out"
    frame = tidy.records(market.agreements, Agreement, text=text, whole="margin_period_days")
    frame["collateral_spread"] = [_bp(spread) for spread in frame["collateral_spread"]]
    return frame.rename(columns={"collateral_spread": "collateral_spread_bp"})


def _in_vol_points(name: str) -> str:
    return f"{name}_vol_points" if name.startswith("worst_") else name


def _percent(value: float | None) -> float | None:
    """In percent, without the last binary digits that the unit would add to a number such as 0.0085."""
    return None if value is None else round(100.0 * value, 12)


def _bp(value: float) -> float:
    return round(1e4 * value, 10)


def _less(value: float | None, other: float | None, unit: float) -> float | None:
    return None if value is None or other is None else unit * (value - other)
