"""One lognormal level: the Black-Scholes-Merton formula, for any weight and strike."""

from __future__ import annotations

from pricer.engines.closed_form.family import AggregateLaw, Family
from pricer.engines.closed_form.lognormal import ShiftedLognormal
from pricer.engines.closed_form.lognormal_sum import LognormalSum
from pricer.engines.problem import EuropeanProblem, ReferenceKind


def _law(problem: EuropeanProblem) -> AggregateLaw | None:
    as_sum = LognormalSum.of(problem)
    if as_sum is None or as_sum.n_terms != 1:
        return None
    return ShiftedLognormal(as_sum.shift, float(as_sum.coefficients[0]), float(as_sum.deviations[0]))


BLACK_SCHOLES = Family("Black-Scholes-Merton", ReferenceKind.EXACT, "Black & Scholes (1973); Merton (1973)", _law)
