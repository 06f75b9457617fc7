"""A basket taken as lognormal with its own first two moments (Levy 1992)."""

from __future__ import annotations

import math

import numpy as np

from pricer.engines.closed_form.family import AggregateLaw, Family
from pricer.engines.closed_form.lognormal import ShiftedLognormal
from pricer.engines.closed_form.lognormal_sum import LognormalSum
from pricer.engines.problem import EuropeanProblem, ReferenceKind


def _law(problem: EuropeanProblem) -> AggregateLaw | None:
    as_sum = LognormalSum.of(problem)
    if as_sum is None or as_sum.n_terms < 2 or not as_sum.one_signed:
        return None
    c = as_sum.coefficients
    total = float(c.sum())
    relative_variance = float(c @ np.expm1(as_sum.covariance) @ c) / (total * total)
    return ShiftedLognormal(as_sum.shift, total, math.sqrt(math.log1p(relative_variance)))


MOMENT_MATCHING = Family("two moments, lognormal", ReferenceKind.APPROXIMATION, "Levy (1992)", _law)
