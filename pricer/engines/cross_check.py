"""Does the sampled value agree with everything that is known without sampling?

A book of a thousand trades makes thousands of comparisons, and at any fixed number of
standard errors some of them would fail by chance. The rule shares one error probability
among all comparisons of the book (Bonferroni), with Student's quantile because the
standard error is itself estimated from few randomisations.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from enum import StrEnum

from pricer.engines.problem import Reference, ReferenceKind
from pricer.engines.sampled_value import Sampled
from pricer.engines.selector import sampling_quantile

#: Probability that a book without any error shows even one false disagreement.
FALSE_ALARM = 0.01
#: Differences below this part of the standard error asked for are never called a disagreement.
IMMATERIAL = 0.1
#: Approximations are called close within this many basis points of notional.
APPROXIMATION_BP = 10.0


class Verdict(StrEnum):
    """What a cross-check found."""

    AGREES = "agrees"
    DIFFERS = "differs"
    WITHIN_BOUND = "within bound"
    OUTSIDE_BOUND = "outside bound"
    CLOSE = "approximation close"
    FAR = "approximation far"


#: Verdicts that a person has to look at.
ALARMS = frozenset({Verdict.DIFFERS, Verdict.OUTSIDE_BOUND})


@dataclass(frozen=True, slots=True)
class Comparison:
    """One sampled value beside one reference, per unit."""

    difference: float  # sampled value minus reference
    standard_errors: float | None  # the difference in standard errors, None without sampling error
    tolerance: float
    verdict: Verdict


def is_test(reference: Reference) -> bool:
    """Whether the comparison is a statistical test (an approximation is only measured)."""
    return reference.kind is not ReferenceKind.APPROXIMATION


def compare(
    sample: Sampled, reference: Reference, *, unit_notional: float, asked: float, tests_in_book: int
) -> Comparison:
    """Compare one unit's values, sharing the false-alarm probability among ``tests_in_book`` tests.

    ``asked`` is the standard error asked of the sampled value.
    """
    difference = sample.value - reference.value
    sampled = reference.kind is ReferenceKind.SAMPLE
    error = math.hypot(sample.standard_error, reference.error) if sampled else sample.standard_error
    scale = difference / error if error > 0.0 else None
    if not is_test(reference):
        tolerance = APPROXIMATION_BP * 1e-4 * unit_notional
        verdict = Verdict.CLOSE if abs(difference) <= tolerance else Verdict.FAR
        return Comparison(difference, scale, tolerance, verdict)

    quantile = sampling_quantile(sample.degrees_of_freedom, FALSE_ALARM / max(tests_in_book, 1))
    own = 0.0 if sampled else reference.error
    tolerance = quantile * error + own + reference.allowance + IMMATERIAL * asked
    match reference.kind:
        case ReferenceKind.LOWER_BOUND:
            verdict = Verdict.WITHIN_BOUND if difference >= -tolerance else Verdict.OUTSIDE_BOUND
        case ReferenceKind.UPPER_BOUND:
            verdict = Verdict.WITHIN_BOUND if difference <= tolerance else Verdict.OUTSIDE_BOUND
        case _:
            verdict = Verdict.AGREES if abs(difference) <= tolerance else Verdict.DIFFERS
    return Comparison(difference, scale, tolerance, verdict)
