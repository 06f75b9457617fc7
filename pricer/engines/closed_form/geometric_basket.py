"""Weighted geometric basket: a product of lognormal levels is lognormal."""

from __future__ import annotations

import math

import numpy as np

from pricer.contracts.aggregate import AggregateKind
from pricer.engines.closed_form.family import AggregateLaw, Family
from pricer.engines.closed_form.lognormal import ShiftedLognormal
from pricer.engines.problem import EuropeanProblem, ReferenceKind


def _law(problem: EuropeanProblem) -> AggregateLaw | None:
    if problem.aggregate.kind is not AggregateKind.GEOMETRIC:
        return None
    weights, law = np.array(problem.aggregate.weights), problem.law
    variance = float(weights @ law.covariance @ weights)
    if variance <= 0.0:
        return None
    mean_log = float(weights @ (np.log(law.forwards) - 0.5 * np.diag(law.covariance)))
    return ShiftedLognormal(0.0, math.exp(mean_log + 0.5 * variance), math.sqrt(variance))


GEOMETRIC_BASKET = Family("geometric basket", ReferenceKind.EXACT, "Kemna & Vorst (1990); Gentle (1993)", _law)
