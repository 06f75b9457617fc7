"""Options whose writer may default: structural and reduced form, on any aggregate whose European value is known."""

from __future__ import annotations

import math
import sys
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

from pricer.contracts.aggregate import AggregateKind
from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.closed_form.black_scholes import BLACK_SCHOLES
from pricer.engines.closed_form.family import Estimate
from pricer.engines.closed_form.geometric_basket import GEOMETRIC_BASKET
from pricer.engines.closed_form.given_driver import ValueOf, expectation_given
from pricer.engines.closed_form.lognormal import ShiftedLognormal
from pricer.engines.closed_form.one_sided_lognormal import OneSidedLognormal, weighted_expectation
from pricer.engines.closed_form.payoff_pieces import above_zero
from pricer.engines.closed_form.quadrature import RANGE, edges_between, integrate, normal_density
from pricer.engines.closed_form.writer_default import Share, WriterAssets
from pricer.engines.problem import EuropeanProblem

Array = NDArray[np.float64]


def on_one_level(problem: EuropeanProblem, loadings: Array, shares: tuple[Share, ...]) -> Estimate | None:
    """Discounted value by two-dimensional normal probabilities; None unless the aggregate is lognormal.

    ``loadings`` (n,) are the covariances of the log-levels with the writer's driver. For calls and puts on one
    level with the shares of a fixed boundary this is Klein (1996).
    """
    _must_be_claim(problem)
    level = _one_lognormal(problem, loadings)
    if level is None:
        return None
    law, correlation = level
    total = Estimate(0.0)
    for share in shares:
        tilted = law.coefficient * math.exp(correlation * law.deviation * share.tilt)
        part = OneSidedLognormal(tilted, law.deviation, correlation, share.limit - share.tilt, share.where)
        value = weighted_expectation(problem.payoff, part, part.mass())
        if value is None:
            return None
        total = total + value.times(share.factor)
    return total.times(problem.discount_factor)


def on_any_aggregate(
    problem: EuropeanProblem, loadings: Array, shares: tuple[Share, ...], value_of: ValueOf
) -> Estimate | None:
    """Discounted value by one integral over the writer's driver; None where a conditional value is unknown."""
    _must_be_claim(problem)
    value = expectation_given(
        problem,
        loadings,
        lambda w: np.asarray(sum(share(w) for share in shares)),
        value_of,
        breaks=[share.limit for share in shares if math.isfinite(share.limit)],
        reach=max(abs(share.tilt) for share in shares),
    )
    return None if value is None else value.times(problem.discount_factor)


def sole_liability(problem: EuropeanProblem, assets: WriterAssets, value_of: ValueOf) -> Estimate | None:
    """Discounted value where the claim is all that the writer owes: ``min(payoff, assets)`` (Johnson & Stulz 1987).

    Given the assets that is the same payoff with a cap.
    """
    _must_be_claim(problem)
    positive = _is_positive(problem)

    def capped(w: float) -> PiecewiseLinear:
        payoff = problem.payoff.limited(cap=assets.at(w))
        return above_zero(payoff) if positive else payoff

    value = expectation_given(
        problem, assets.loadings, lambda w: np.ones_like(w), value_of, reach=assets.deviation, payoff_at=capped
    )
    return None if value is None else value.times(problem.discount_factor)


def growing_liabilities(
    problem: EuropeanProblem, assets: WriterAssets, liabilities: float, deadweight: float
) -> Estimate | None:
    """Discounted value where the claim counts among what is owed (Klein & Inglis 2001); one lognormal level only.

    Default where the assets are below ``liabilities + payoff``; the claim then gets
    ``(1 - deadweight) assets payoff / (liabilities + payoff)``. One integral over the level, the assets
    being lognormal given it.
    """
    _must_be_claim(problem)
    level = _one_lognormal(problem, assets.loadings)
    if level is None:
        return None
    law, correlation = level
    loading = correlation * assets.deviation
    own = math.sqrt(max(assets.deviation**2 - loading**2, 0.0))

    def density(z: Array) -> Array:
        claim = problem.payoff(law.shift + law.coefficient * np.exp(law.deviation * (z - 0.5 * law.deviation)))
        owed = liabilities + claim
        forward = assets.forward * np.exp(loading * (z - 0.5 * loading))
        with np.errstate(divide="ignore"):
            moneyness = np.log(forward / owed) / max(own, sys.float_info.min)
        solvent = ndtr(moneyness - 0.5 * own)
        left = (1.0 - deadweight) * forward * ndtr(-moneyness - 0.5 * own)
        part = np.divide(claim, owed, out=np.zeros_like(owed), where=owed > 0.0)
        return np.asarray(normal_density(z) * (claim * solvent + part * left))

    at = [math.log(k / law.coefficient) / law.deviation + 0.5 * law.deviation for k in problem.payoff.knots if k > 0.0]
    far = RANGE + law.deviation + abs(loading)
    edges = edges_between(-far, far, 12, at, np.zeros(len(at)))
    return integrate(density, edges, 1e-12 * (law.coefficient + assets.forward)).times(problem.discount_factor)


def _one_lognormal(problem: EuropeanProblem, loadings: Array) -> tuple[ShiftedLognormal, float] | None:
    """The aggregate as one positive lognormal level, and the correlation of its log with the driver."""
    geometric = problem.aggregate.kind is AggregateKind.GEOMETRIC
    law = (GEOMETRIC_BASKET if geometric else BLACK_SCHOLES).law(problem)
    if not isinstance(law, ShiftedLognormal) or law.shift != 0.0 or law.coefficient < 0.0:
        return None
    weights = np.array(problem.aggregate.weights)
    if not geometric:
        # Several levels that move as one have the same loading.
        moving = np.flatnonzero((np.diag(problem.law.covariance) > 0.0) & (weights != 0.0))
        covariance = float(loadings[moving[0]])
    else:
        covariance = float(weights @ loadings)
    return law, min(1.0, max(-1.0, covariance / law.deviation))


def _is_positive(problem: EuropeanProblem) -> bool:
    """Whether the aggregate cannot be negative."""
    return problem.aggregate.kind is AggregateKind.GEOMETRIC or min(problem.aggregate.weights) >= 0.0


def _must_be_claim(problem: EuropeanProblem) -> None:
    """Raise ValueError where the payoff asks the holder to pay: then it is not the writer alone who may fail."""
    if not is_claim(problem.payoff, positive=_is_positive(problem)):
        raise ValueError("only a payoff that is never negative can be a claim on its writer")


def is_claim(payoff: PiecewiseLinear, *, positive: bool) -> bool:
    """Whether the payoff is never negative; ``positive`` says that its level never is."""
    payoff = above_zero(payoff) if positive else payoff
    intercepts, slopes = payoff.pieces()
    edges = (0.0 if positive else -math.inf, *payoff.knots, math.inf)
    return all(
        min(b if m == 0.0 else b + m * end for end in ends) >= -1e-12 * (1.0 + abs(b))
        for b, m, ends in zip(intercepts, slopes, pairwise(edges), strict=True)
    )
