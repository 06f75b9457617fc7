"""Problems for the closed forms' tests, and the same options as QuantLib sees them."""

from __future__ import annotations

import numpy as np
import QuantLib as ql

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.profile import Profile, ProfileKind
from pricer.engines.problem import EuropeanProblem
from pricer.market.joint_lognormal import JointLognormal

TODAY = ql.Date(30, 11, 2026)


def equal_correlation(n, rho):
    return np.full((n, n), rho) + (1.0 - rho) * np.eye(n)


def random_correlation(rng, n, common=0.5):
    """A full-rank correlation matrix; ``common`` adds positive dependence."""
    factors = rng.normal(size=(n, n + 2)) + common * rng.normal(size=n + 2)
    covariance = factors @ factors.T
    scale = np.sqrt(np.diag(covariance))
    return covariance / np.outer(scale, scale)


def law(forwards, volatilities, correlation, years=1.0):
    return JointLognormal.from_volatilities(
        np.array(forwards, float), np.array(volatilities, float), correlation, years
    )


def problem(joint, aggregate, kind, strike=0.0, discount_factor=1.0, **limits):
    return EuropeanProblem(joint, aggregate, Profile(kind, strike, **limits).payoff(), discount_factor)


def random_problem(rng, n, kinds=tuple(AggregateKind), profiles=tuple(ProfileKind)):
    """Forwards around 1, volatilities 10 to 45 %, a month to three years, struck near the money."""
    years = float(rng.choice([0.1, 0.5, 1.0, 3.0]))
    correlation = equal_correlation(n, rng.uniform(0.0, 0.9)) if rng.random() < 0.4 else random_correlation(rng, n)
    joint = law(rng.uniform(0.7, 1.3, n), rng.uniform(0.1, 0.45, n), correlation, years)
    kind = kinds[rng.integers(len(kinds))]
    weights = tuple(rng.dirichlet(np.full(n, 3.0)))
    match kind:
        case AggregateKind.WEIGHTED_SUM:
            signs = rng.choice([-1.0, 1.0], n) if rng.random() < 0.5 else np.ones(n)
            aggregate = Aggregate.weighted_sum(tuple(signs * weights))
        case AggregateKind.GEOMETRIC:
            aggregate = Aggregate.geometric(weights)
        case AggregateKind.BEST_OF:
            aggregate = Aggregate.best_of(n)
        case AggregateKind.WORST_OF:
            aggregate = Aggregate.worst_of(n)
        case AggregateKind.KTH_BEST:
            aggregate = Aggregate.kth_best(int(rng.integers(1, n + 1)), n)
        case AggregateKind.RANK_WEIGHTED:
            aggregate = Aggregate.rank_weighted(weights)
    strike = float(aggregate(joint.forwards)) + 0.15 * rng.normal()
    return problem(joint, aggregate, profiles[rng.integers(len(profiles))], strike, discount_factor=0.97)


class QuantLibMarket:
    """Lognormal assets of one expiry in QuantLib, ``days`` from its evaluation date."""

    def __init__(self, spots, yields, volatilities, correlation, rate, days):
        ql.Settings.instance().evaluationDate = TODAY
        count = ql.Actual365Fixed()
        curve = lambda level: ql.YieldTermStructureHandle(ql.FlatForward(TODAY, level, count))  # noqa: E731
        self.processes = [
            ql.BlackScholesMertonProcess(
                ql.QuoteHandle(ql.SimpleQuote(s)),
                curve(q),
                curve(rate),
                ql.BlackVolTermStructureHandle(ql.BlackConstantVol(TODAY, ql.NullCalendar(), v, count)),
            )
            for s, q, v in zip(spots, yields, volatilities, strict=True)
        ]
        self.exercise = ql.EuropeanExercise(TODAY + days)
        self.matrix = ql.Matrix([[float(x) for x in line] for line in correlation])
        years = days / 365.0
        forwards = np.array(spots) * np.exp((rate - np.array(yields)) * years)
        self.law = law(forwards, volatilities, np.array(correlation), years)
        self.discount_factor = float(np.exp(-rate * years))

    def problem(self, aggregate, kind, strike=0.0):
        return problem(self.law, aggregate, kind, strike, self.discount_factor)

    def basket(self, payoff, engine):
        option = ql.BasketOption(payoff, self.exercise)
        option.setPricingEngine(engine)
        return option.NPV()
