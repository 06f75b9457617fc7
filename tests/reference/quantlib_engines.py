"""A European problem as QuantLib's own engines see it.

The payoff is taken apart into calls and digitals on the aggregate; each goes to an engine
that shares no code with ours: analytic formulas for one asset, Stulz's formula for calls on
two-asset rainbows, Choi's quadrature for calls on weighted sums, and Sobol simulation for
what is left.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import QuantLib as ql

from pricer.contracts.aggregate import AggregateKind
from pricer.engines.problem import EuropeanProblem

TODAY = ql.Date(30, 11, 2026)
DAYS = 365  # the clock is rescaled: one year carries the whole covariance


@dataclass(frozen=True)
class Independent:
    """QuantLib's value per unit, the engines it came from, and what those are good to.

    ``resolution`` is a fraction of the aggregate's scale (of the amount, for a digital): what
    the engine is good to at the sizes used here, found by refining it.
    """

    value: float
    engines: frozenset[str]
    resolution: float


RESOLUTION = {"analytic": 1e-8, "Stulz": 1e-8, "Choi": 2e-6, "Sobol": 2e-4}


def can_express(problem: EuropeanProblem) -> bool:
    """Whether QuantLib has a basket payoff for this aggregate."""
    return problem.law.n_assets == 1 or problem.aggregate.kind in (
        AggregateKind.WEIGHTED_SUM,
        AggregateKind.BEST_OF,
        AggregateKind.WORST_OF,
    )


def independent_value(problem: EuropeanProblem) -> Independent:
    """The whole payoff by QuantLib."""
    ql.Settings.instance().evaluationDate = TODAY
    payoff = problem.payoff
    engines: set[str] = set()
    total = payoff.intercept
    if payoff.slope:
        # far below any level that matters, a call is a forward
        value, engine = _leg(problem, ql.PlainVanillaPayoff, _bottom(problem))
        total += payoff.slope * (value + _bottom(problem))
        engines.add(engine)
    for knot, bend, jump in zip(payoff.knots, payoff.bends, payoff.jumps, strict=True):
        if bend:
            value, engine = _leg(problem, ql.PlainVanillaPayoff, knot)
            total += bend * value
            engines.add(engine)
        if jump:
            value, engine = _leg(problem, ql.CashOrNothingPayoff, knot)
            total += jump * value
            engines.add(engine)
    return Independent(
        total * problem.discount_factor, frozenset(engines), max((RESOLUTION[e] for e in engines), default=1e-8)
    )


def _bottom(problem: EuropeanProblem) -> float:
    """A strike below every level that has any probability: zero, or minus the short legs' extreme."""
    weights = np.array(problem.aggregate.weights)
    if problem.aggregate.is_ranked or weights.min() >= 0.0:
        return 1e-6
    far = problem.law.forwards * np.exp(8.0 * problem.law.deviations)
    return float(np.minimum(weights, 0.0) @ far)


def _leg(problem: EuropeanProblem, payoff_type, strike: float) -> tuple[float, str]:
    law = problem.law
    processes = [_process(f, s) for f, s in zip(law.forwards, law.deviations, strict=True)]
    correlation = law.correlation
    exercise = ql.EuropeanExercise(TODAY + DAYS)
    vanilla = payoff_type is ql.PlainVanillaPayoff
    if law.n_assets == 1:
        weight = problem.aggregate.weights[0]
        scaled = strike / weight
        base = payoff_type(ql.Option.Call, scaled) if vanilla else payoff_type(ql.Option.Call, scaled, 1.0)
        option = ql.VanillaOption(base, exercise)
        option.setPricingEngine(ql.AnalyticEuropeanEngine(processes[0]))
        return option.NPV() * (weight if vanilla else 1.0), "analytic"

    base = payoff_type(ql.Option.Call, strike) if vanilla else payoff_type(ql.Option.Call, strike, 1.0)
    kind, weights = problem.aggregate.kind, problem.aggregate.weights
    if kind is AggregateKind.WEIGHTED_SUM:
        basket = ql.AverageBasketPayoff(base, ql.Array(list(weights)))
    else:
        basket = ql.MaxBasketPayoff(base) if kind is AggregateKind.BEST_OF else ql.MinBasketPayoff(base)
    option = ql.BasketOption(basket, exercise)
    matrix = ql.Matrix([list(map(float, row)) for row in correlation])

    if law.n_assets == 2 and kind is not AggregateKind.WEIGHTED_SUM and vanilla:
        option.setPricingEngine(ql.StulzEngine(processes[0], processes[1], float(correlation[0, 1])))
        return option.NPV(), "Stulz"
    if kind is AggregateKind.WEIGHTED_SUM and vanilla:
        option.setPricingEngine(ql.ChoiBasketEngine(processes, matrix, 12.0))
        return option.NPV(), "Choi"
    array = ql.StochasticProcessArray(processes, matrix)
    engine = ql.MCEuropeanBasketEngine(array, "LowDiscrepancy", timeSteps=1, requiredSamples=2**16, seed=11)
    option.setPricingEngine(engine)
    return option.NPV(), "Sobol"


def _process(forward: float, deviation: float) -> ql.BlackScholesMertonProcess:
    """Zero rates, spot at the forward, the whole variance within one year."""
    count = ql.Actual365Fixed()
    flat = ql.YieldTermStructureHandle(ql.FlatForward(TODAY, 0.0, count))
    volatility = ql.BlackVolTermStructureHandle(ql.BlackConstantVol(TODAY, ql.NullCalendar(), float(deviation), count))
    return ql.BlackScholesMertonProcess(ql.QuoteHandle(ql.SimpleQuote(float(forward))), flat, flat, volatility)
