"""A spread: one lognormal level against another, the form all two-asset formulas share."""

from __future__ import annotations

from dataclasses import dataclass

from pricer.engines.closed_form.lognormal_sum import LognormalSum
from pricer.engines.problem import EuropeanProblem


@dataclass(frozen=True, slots=True)
class Spread:
    """``shift + long X - short Y`` with ``X`` and ``Y`` lognormal of mean 1.

    ``long`` and ``short`` > 0 are forwards times weights; the variances and the covariance
    are those of the logs over the whole time.
    """

    shift: float
    long: float
    short: float
    long_variance: float
    short_variance: float
    covariance: float

    @classmethod
    def of(cls, problem: EuropeanProblem) -> Spread | None:
        """The problem's aggregate as a spread; None where it is none."""
        as_sum = LognormalSum.of(problem)
        if as_sum is None or as_sum.n_terms != 2 or as_sum.one_signed:
            return None
        i, j = (0, 1) if as_sum.coefficients[0] > 0.0 else (1, 0)
        c, v = as_sum.coefficients, as_sum.covariance
        return cls(as_sum.shift, float(c[i]), -float(c[j]), float(v[i, i]), float(v[j, j]), float(v[0, 1]))

    def mirrored(self) -> Spread:
        """The negative of the spread."""
        return Spread(-self.shift, self.short, self.long, self.short_variance, self.long_variance, self.covariance)

    @property
    def mean(self) -> float:
        return self.shift + self.long - self.short
