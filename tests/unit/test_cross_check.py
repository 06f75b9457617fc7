"""The verdicts of the cross-check and the choice of the leading number."""

from __future__ import annotations

import numpy as np
import pytest

from pricer.engines.cross_check import ALARMS, Verdict, compare
from pricer.engines.monte_carlo import Sample
from pricer.engines.problem import Reference, ReferenceKind
from pricer.engines.selector import Interval, headline, sampling_quantile

NONE = np.zeros(1)


def sampled(value, error, randomisations=16):
    return Sample(
        value=value, standard_error=error, log_deltas=NONE, log_delta_errors=NONE, log_gammas=None,
        log_gamma_errors=None, deviation_vegas=NONE, deviation_vega_errors=NONE, paths=1, randomisations=randomisations,
        reached=True, ending="", degrees_of_freedom=randomisations - 1,
    )  # fmt: skip


def reference(value, kind=ReferenceKind.EXACT, error=0.0):
    return Reference("method", kind, value, error, "source")


def verdict_on(drawn, known, *, asked=0.0, tests=1):
    return compare(drawn, known, unit_notional=100.0, asked=asked, tests_in_book=tests).verdict


def test_the_quantile_is_students():
    # two-sided 5 % and 1 %, 15 degrees of freedom: 2.131 and 2.947 (any printed table of Student's t, from memory)
    assert sampling_quantile(15, 0.05) == pytest.approx(2.131, abs=5e-4)
    assert sampling_quantile(15, 0.01) == pytest.approx(2.947, abs=5e-4)


@pytest.mark.parametrize(
    ("kind", "value", "verdict"),
    [
        (ReferenceKind.EXACT, 10.02, Verdict.AGREES),
        (ReferenceKind.EXACT, 10.10, Verdict.DIFFERS),
        (ReferenceKind.EXACT, 9.90, Verdict.DIFFERS),
        (ReferenceKind.LOWER_BOUND, 9.0, Verdict.WITHIN_BOUND),
        (ReferenceKind.LOWER_BOUND, 10.02, Verdict.WITHIN_BOUND),
        (ReferenceKind.LOWER_BOUND, 10.10, Verdict.OUTSIDE_BOUND),
        (ReferenceKind.UPPER_BOUND, 11.0, Verdict.WITHIN_BOUND),
        (ReferenceKind.UPPER_BOUND, 9.98, Verdict.WITHIN_BOUND),
        (ReferenceKind.UPPER_BOUND, 9.90, Verdict.OUTSIDE_BOUND),
        (ReferenceKind.APPROXIMATION, 10.05, Verdict.CLOSE),
        (ReferenceKind.APPROXIMATION, 10.20, Verdict.FAR),
    ],
)
def test_each_kind_of_reference_has_its_own_rule(kind, value, verdict):
    # standard error 0.01, one test: the quantile is 2.95, so 0.02 is nothing and 0.1 is a lot
    assert verdict_on(sampled(10.0, 0.01), reference(value, kind)) is verdict


def test_a_larger_book_needs_a_larger_difference_to_cry():
    few, many = (verdict_on(sampled(10.0, 0.01), reference(10.045), tests=tests) for tests in (1, 1000))
    assert (few, many) == (Verdict.DIFFERS, Verdict.AGREES)


def test_a_book_without_errors_rarely_cries_at_all():
    """Simulated: 500 books of 200 honest comparisons each; at most 1 % should raise an alarm."""
    rng = np.random.default_rng(7)
    draws = rng.normal(10.0, 0.04, (500, 200, 16))
    values, errors = draws.mean(axis=2), draws.std(axis=2, ddof=1) / 4.0
    books_that_cry = sum(
        any(
            verdict_on(sampled(v, e), reference(10.0), tests=200) in ALARMS
            for v, e in zip(row, row_errors, strict=True)
        )
        for row, row_errors in zip(values, errors, strict=True)
    )
    # binomial with mean 5: more than 14 has probability 2e-4
    assert books_that_cry <= 14


def test_a_difference_too_small_to_matter_is_no_alarm():
    # asked for 0.01: a tenth of it, 0.001, is immaterial however small the error is
    assert verdict_on(sampled(10.0, 1e-12), reference(10.0 + 9e-4), asked=0.01) is Verdict.AGREES
    assert verdict_on(sampled(10.0, 1e-12), reference(10.0 + 11e-4), asked=0.01) is Verdict.DIFFERS


def test_the_references_own_error_is_allowed_for():
    assert verdict_on(sampled(10.0, 0.001), reference(10.1, error=0.2)) is Verdict.AGREES


def test_without_sampling_error_the_difference_has_no_scale():
    found = compare(sampled(10.0, 0.0, 1), reference(10.0), unit_notional=100.0, asked=0.01, tests_in_book=1)
    assert found.standard_errors is None


def test_an_exact_value_leads_when_its_error_is_small():
    lead = headline(sampled(10.0, 0.01), (reference(10.02, error=0.001),), tolerance=0.01)
    assert (lead.value, lead.standard_error, lead.interval) == (10.02, 0.0, Interval.EXACT)
    assert (lead.lower, lead.upper) == (pytest.approx(10.019), pytest.approx(10.021))


def test_an_exact_method_with_a_large_error_does_not_lead():
    lead = headline(sampled(10.0, 0.01), (reference(10.02, error=0.1),), tolerance=0.01)
    assert (lead.value, lead.interval) == (10.0, Interval.SAMPLING)
    assert lead.upper - lead.lower == pytest.approx(2 * 2.947 * 0.01, rel=1e-3)


LOWER, UPPER = ReferenceKind.LOWER_BOUND, ReferenceKind.UPPER_BOUND


def test_bounds_cut_the_sampling_interval_and_hold_the_value():
    bounds = (reference(9.99, LOWER), reference(10.01, UPPER))
    lead = headline(sampled(10.0, 0.05), bounds, tolerance=0.01)
    assert (lead.lower, lead.upper, lead.interval) == (9.99, 10.01, Interval.BOUNDS)
    lead = headline(sampled(10.03, 0.05), bounds, tolerance=0.01)
    assert (lead.value, lead.upper) == (10.01, 10.01)


def test_one_bound_cuts_one_side():
    lead = headline(sampled(10.0, 0.05), (reference(9.99, LOWER),), tolerance=0.01)
    assert (lead.lower, lead.interval) == (9.99, Interval.SAMPLING)
    assert lead.upper == pytest.approx(10.0 + 2.947 * 0.05, rel=1e-3)


def test_bounds_that_do_not_meet_the_sampling_interval_leave_it_alone():
    lead = headline(sampled(10.0, 0.01), (reference(11.0, LOWER),), tolerance=0.01)
    assert lead.lower < lead.value == 10.0 < lead.upper < 11.0


def test_an_exact_value_outside_a_bound_does_not_lead():
    """A quadrature that missed its mass, say, must not win over its own lower bound."""
    lead = headline(sampled(10.0, 0.01), (reference(0.0), reference(9.9, LOWER)), tolerance=0.01)
    assert (lead.value, lead.interval) == (10.0, Interval.SAMPLING)
