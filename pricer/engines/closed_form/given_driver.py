"""Payoffs weighted by a function of one normal variable that moves together with the levels.

Given that variable the levels are still jointly lognormal, so that every law known without it is known
with it, and one integral is left. It serves the assets of a writer who may default, and a barrier on a level
outside the aggregate.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.closed_form.family import Estimate, Family, expectation
from pricer.engines.closed_form.quadrature import RANGE, edges_between, integrate, normal_density
from pricer.engines.problem import EuropeanProblem, ReferenceKind
from pricer.market.joint_lognormal import JointLognormal

Array = NDArray[np.float64]
#: ``E[payoff(aggregate)]`` of a problem, undiscounted; None where it is not known.
ValueOf = Callable[[EuropeanProblem], Estimate | None]

_RELATIVE_TOLERANCE = 1e-10
_PANELS = 6


def first_exact(families: Sequence[Family]) -> ValueOf:
    """The value by the first of ``families`` that is exact and knows every part of the payoff."""
    exact = [family for family in families if family.kind is ReferenceKind.EXACT]

    def value_of(problem: EuropeanProblem) -> Estimate | None:
        for family in exact:
            law = family.law(problem)
            value = None if law is None else expectation(problem.payoff, law)
            if value is not None:
                return value
        return None

    return value_of


def expectation_given(
    problem: EuropeanProblem,
    loadings: Array,
    weight: Callable[[Array], Array],
    value_of: ValueOf,
    *,
    breaks: Sequence[float] = (),
    reach: float = 0.0,
    payoff_at: Callable[[float], PiecewiseLinear] | None = None,
    evaluations: int = 4_000,
) -> Estimate | None:
    """``E[weight(w) payoff(A)]``, undiscounted; None where a conditional value is not known.

    ``loadings`` (n,) are the covariances of the log-levels with the standard normal ``w``; ``weight`` maps
    (m,) to (m,). It may jump or bend at ``breaks``, and grow like ``exp(reach |w|)``. ``payoff_at`` makes the payoff
    depend on ``w``. The error adds that of the integral and the largest of the conditional ones.
    """
    variance = np.diag(problem.law.covariance)
    if np.any(loadings**2 > variance * (1.0 + 1e-12) + 1e-300):
        raise ValueError("a level cannot have more covariance with the driver than its own deviation")
    rest = problem.law.covariance - np.outer(loadings, loadings)
    # What is left of a level that moves with the driver alone is rounding.
    gone = np.diag(rest) <= 1e-14 * variance
    rest[gone, :] = rest[:, gone] = 0.0
    largest = 0.0
    known = True

    def given(w: float) -> float:
        nonlocal largest, known
        forwards = problem.law.forwards * np.exp(loadings * (w - 0.5 * loadings))
        payoff = problem.payoff if payoff_at is None else payoff_at(w)
        conditional = replace(problem, law=JointLognormal(forwards, rest), payoff=payoff)
        value = value_of(conditional) if known else None
        if value is None:
            known = False
            return 0.0
        largest = max(largest, value.error)
        return value.value

    def density(w: Array) -> Array:
        weights = normal_density(w) * weight(w)
        # The weight is 0 on whole panels (a default that pays nothing): no value is asked for there.
        values = np.array([given(float(x)) if factor != 0.0 else 0.0 for x, factor in zip(w, weights, strict=True)])
        return np.asarray(weights * values)

    far = RANGE + reach + float(np.abs(loadings).max(initial=0.0))
    scale = float(np.abs(problem.law.forwards).max()) + max((abs(k) for k in problem.payoff.knots), default=0.0)
    edges = edges_between(-far, far, _PANELS, np.asarray(breaks, dtype=float), np.zeros(len(breaks)))
    found = integrate(density, edges, _RELATIVE_TOLERANCE * scale, evaluations)
    if not known:
        return None
    return Estimate(found.value, found.error + largest)
