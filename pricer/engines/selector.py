"""Which number leads: exact where an exact method applies, sampled otherwise."""

from __future__ import annotations

import math
from dataclasses import dataclass
from enum import StrEnum

import numpy as np
from scipy.special import stdtrit

from pricer.engines.closed_form import best_exact
from pricer.engines.problem import Reference, ReferenceKind
from pricer.engines.sampled_value import Sampled

#: Two-sided probability that a sampling interval covers the value.
COVERAGE = 0.99


class Interval(StrEnum):
    """What ``lower`` and ``upper`` mean."""

    EXACT = "exact"  # closed form or quadrature, with its numerical error
    BOUNDS = "bounds"  # lower and upper bounds computed without sampling
    CERTIFIED = "certified bounds"  # sampled lower and upper bounds, each moved out by its own 99 % error
    SAMPLING = "99 % sampling"  # two-sided 99 % interval from the standard error, cut at a bound if one is nearer


@dataclass(frozen=True, slots=True)
class Headline:
    """The value that leads, per unit, with the interval that goes with it."""

    value: float
    standard_error: float
    lower: float
    upper: float
    interval: Interval
    method: str


def headline(sample: Sampled, references: tuple[Reference, ...], tolerance: float) -> Headline:
    """The leading value of one unit.

    An exact reference leads when its own numerical error is within ``tolerance`` (the
    standard error asked of sampling) and it lies within every bound. Otherwise the sampled
    value leads, with the part of its sampling interval that lies within the bounds; where
    they do not meet at all, the sampling interval stands and the cross-check says so.
    """
    floor = max((r.value - r.error for r in references if r.kind is ReferenceKind.LOWER_BOUND), default=-math.inf)
    ceiling = min((r.value + r.error for r in references if r.kind is ReferenceKind.UPPER_BOUND), default=math.inf)
    exact = best_exact(references, tolerance)
    if exact is not None and floor <= exact.value + exact.error and exact.value - exact.error <= ceiling:
        low, high = exact.value - exact.error, exact.value + exact.error
        return Headline(exact.value, 0.0, low, high, Interval.EXACT, exact.method)

    reach = sampling_quantile(sample.degrees_of_freedom, 1.0 - COVERAGE) * sample.standard_error
    low, high = max(sample.value - reach, floor), min(sample.value + reach, ceiling)
    if low > high:
        low, high = sample.value - reach, sample.value + reach
    value = min(max(sample.value, low), high)
    bounded = (low, high) == (floor, ceiling)
    interval = Interval.BOUNDS if bounded else Interval.SAMPLING
    return Headline(value, sample.standard_error, low, high, interval, "randomised low-discrepancy sampling")


def sampling_quantile(degrees_of_freedom: int, probability: float) -> float:
    """Two-sided Student quantile: the estimate falls outside with ``probability``, in standard errors."""
    return float(np.abs(stdtrit(degrees_of_freedom, 0.5 * probability)))
