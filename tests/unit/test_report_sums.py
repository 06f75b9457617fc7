from __future__ import annotations

import math
import random

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from pricer.report.styles import decimals_for
from pricer.report.sums import pooled_degrees_of_freedom, quadrature, ratio, total

AMOUNTS = st.lists(st.floats(-1e12, 1e12), min_size=1, max_size=40)


@given(AMOUNTS, st.randoms(use_true_random=False))
def test_sums_do_not_depend_on_the_order_of_the_trades(amounts, shuffler):
    shuffled = random.Random(shuffler.random()).sample(amounts, len(amounts))
    assert total(shuffled) == total(amounts)
    assert quadrature(shuffled) == quadrature(amounts)


@given(AMOUNTS)
def test_quadrature_agrees_with_the_euclidean_norm(errors):
    assert quadrature(errors) == pytest.approx(float(np.linalg.norm(errors)), rel=1e-12, abs=1e-150)


def test_nothing_to_add_is_not_zero():
    assert math.isnan(total([]))
    assert math.isnan(quadrature([]))


def test_infinities_of_both_signs_give_no_number():
    assert math.isnan(total([math.inf, -math.inf]))


def test_a_ratio_to_nothing_is_no_number():
    assert math.isnan(ratio(1.0, 0.0))


@pytest.mark.parametrize("seed", range(5))
def test_pooled_degrees_of_freedom_agree_with_welchs_test(seed):
    """Reference: scipy.stats.ttest_ind(equal_var=False), which pools the degrees of freedom of two means."""
    draws = np.random.default_rng(seed)
    one, two = draws.normal(size=16), 3.0 * draws.normal(size=7)
    errors = [float(stats.sem(one)), float(stats.sem(two))]
    freedom = stats.ttest_ind(one, two, equal_var=False).df
    assert pooled_degrees_of_freedom(errors, [15, 6]) == math.floor(freedom)


def test_equal_trades_pool_all_their_degrees_of_freedom():
    assert pooled_degrees_of_freedom([0.1] * 30, [15] * 30) == 30 * 15


def test_one_sampled_trade_keeps_its_own_degrees_of_freedom():
    assert pooled_degrees_of_freedom([0.0, 0.37], [15, 14]) == 14
    assert pooled_degrees_of_freedom([0.0], [15]) == 0


@pytest.mark.parametrize(
    ("sizes", "errors", "decimals"),
    [
        ([250_000.4, 1_234_567.8], [], 0),
        ([250_000.4, 1_234_567.8], [340.2, 12.7], 0),
        ([250_000.4, 1_234_567.8], [0.031], 3),
        ([250_000.4, 1_234_567.8], [3.1e-6], 4),
        ([4_321.12], [3.5], 2),
        ([12.34, 0.0], [0.0007], 5),
        ([0.00042], [], 5),
        ([1e-15], [], 8),
        ([1_000_000.0, 250_000.0], [], 0),
        ([], [], 0),
        ([math.nan, math.inf], [], 0),
    ],
)
def test_decimals_show_two_digits_of_the_smaller_amounts_and_their_errors(sizes, errors, decimals):
    assert decimals_for(sizes, errors) == decimals
