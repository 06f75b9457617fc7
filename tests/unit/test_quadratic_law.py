"""Sums of squares of normals: against the chi-square laws of scipy, an integral of their own, and parity."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import stats
from scipy.integrate import quad
from scipy.special import gammaln

from pricer.engines.closed_form.quadratic_law import QuadraticLaw


def equal(n=12, deviation=0.03, mean=0.01, shift=0.002, factor=4.0):
    return QuadraticLaw(shift, factor, np.full(n, deviation), np.full(n, mean))


def chi_square(law):
    """The same law where all terms are alike: shift + factor deviation^2 times a non-central chi-square."""
    deviation = law.deviations[0]
    return stats.ncx2(
        law.deviations.size,
        law.deviations.size * (law.means[0] / deviation) ** 2,
        loc=law.shift,
        scale=law.factor * deviation**2,
    )


@pytest.mark.parametrize("quantile", [1e-6, 0.01, 0.3, 0.5, 0.9, 0.999, 1.0 - 1e-7])
def test_probabilities_are_those_of_a_non_central_chi_square(quantile):
    law = equal()
    strike = float(chi_square(law).ppf(quantile))
    above, below = law.digital(strike, 1), law.digital(strike, -1)
    assert above is not None and below is not None
    assert above.value == pytest.approx(float(chi_square(law).sf(strike)), rel=1e-7, abs=1e-12)
    assert below.value == pytest.approx(float(chi_square(law).cdf(strike)), rel=1e-7, abs=1e-12)


@pytest.mark.parametrize("quantile", [0.01, 0.3, 0.5, 0.9, 0.999])
def test_options_are_integrals_of_the_same_density(quantile):
    law, density = equal(), chi_square(equal())
    strike, end = float(density.ppf(quantile)), float(density.ppf(1.0 - 1e-15))
    call = quad(lambda x: (x - strike) * density.pdf(x), strike, end, epsabs=1e-13, limit=400)[0]
    found, put = law.option(strike, 1), law.option(strike, -1)
    assert found is not None and put is not None
    assert found.value == pytest.approx(call, abs=1e-10)
    assert found.value - put.value == pytest.approx(law.mean().value - strike, abs=1e-12)


def test_the_root_of_a_central_sum_is_that_of_a_chi_distribution():
    for n in (1, 2, 7, 252):
        law = QuadraticLaw(0.0, 252.0 / n, np.full(n, 0.0125), np.zeros(n))
        chi = math.sqrt(2.0) * math.exp(gammaln(0.5 * (n + 1)) - gammaln(0.5 * n))
        expected = math.sqrt(252.0 / n) * 0.0125 * chi
        assert law.mean_root().value == pytest.approx(expected, rel=1e-10)


def test_the_root_holds_what_was_counted_before():
    law = equal(n=3, shift=0.01)
    density = chi_square(law)
    expected = quad(lambda x: math.sqrt(x) * density.pdf(x), law.shift, float(density.ppf(1.0 - 1e-15)), limit=400)[0]
    assert law.mean_root().value == pytest.approx(expected, rel=1e-7)


def test_terms_of_many_sizes_agree_with_simulation():
    random = np.random.default_rng(4)
    deviations, means = random.uniform(0.005, 0.05, 30), random.normal(0.0, 0.01, 30)
    law = QuadraticLaw(0.001, 2.0, deviations, means)
    draws = 0.001 + 2.0 * np.sum((deviations * random.standard_normal((200_000, 30)) + means) ** 2, axis=1)
    strike = float(np.quantile(draws, 0.7))
    for found, sample in (
        (law.option(strike, 1), np.maximum(draws - strike, 0.0)),
        (law.digital(strike, 1), (draws > strike).astype(float)),
        (law.mean_root(), np.sqrt(draws)),
    ):
        assert found is not None
        assert abs(found.value - sample.mean()) < 4.0 * sample.std() / math.sqrt(sample.size)


def test_a_strike_below_all_that_can_be_counted_is_certain():
    law = equal()
    assert law.digital(0.001, 1).value == 1.0
    assert law.option(0.001, 1).value == pytest.approx(law.mean().value - 0.001, abs=1e-15)
    assert law.option(0.001, -1).value == 0.0


def test_one_or_two_squares_leave_a_density_too_rough_for_the_contour():
    assert equal(n=1).option(0.01, 1) is None
