"""Best, worst, k-th best and weights on sorted levels: every route against another one."""

from __future__ import annotations

from math import comb

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import ProfileKind
from pricer.engines.closed_form.black_scholes import BLACK_SCHOLES
from pricer.engines.closed_form.exchange import EXCHANGE
from pricer.engines.closed_form.extremes import EXTREMES, TWO_ASSET_EXTREMES, Extreme
from pricer.engines.closed_form.one_factor_ranks import ONE_FACTOR_RANKS
from pricer.engines.closed_form.order_statistics import ORDER_STATISTICS, kth_best
from pricer.engines.closed_form.quadrature import integrate, normal_density
from pricer.engines.closed_form.ranked_quadrature import RANKED_QUADRATURE, RankedLevels
from pricer.engines.closed_form.ranks import SingleRank
from tests.unit.closed_form_cases import equal_correlation, law, problem, random_correlation

LAW3 = law([1.0, 0.9, 1.1], [0.2, 0.45, 0.3], random_correlation(np.random.default_rng(3), 3), 1.5)


def agree(one, other):
    assert one.value == pytest.approx(other.value, abs=one.error + other.error)


def aggregate_of_rank(rank, n):
    return {1: Aggregate.best_of(n), n: Aggregate.worst_of(n)}.get(rank, Aggregate.kth_best(rank, n))


@pytest.mark.parametrize("n", [3, 4, 5])
@pytest.mark.parametrize(
    "kind", [ProfileKind.CALL, ProfileKind.PUT, ProfileKind.CASH_DIGITAL_CALL, ProfileKind.STRADDLE]
)
def test_with_one_common_factor_conditioning_agrees_with_normal_probabilities(n, kind):
    rng = np.random.default_rng(n)
    loading = rng.uniform(0.3, 0.9, n) * rng.choice([-1.0, 1.0], n)
    correlation = np.outer(loading, loading)
    np.fill_diagonal(correlation, 1.0)
    joint = law(rng.uniform(0.8, 1.2, n), rng.uniform(0.15, 0.4, n), correlation, 2.0)
    for rank in range(1, n + 1):
        p = problem(joint, aggregate_of_rank(rank, n), kind, 1.05)
        exact = (EXTREMES if rank in (1, n) else ORDER_STATISTICS).reference(p)
        agree(ONE_FACTOR_RANKS.reference(p), exact)


@pytest.mark.parametrize("strike", [-0.5, 0.6, 1.0, 1.7])
@pytest.mark.parametrize("rank", [1, 2, 3])
def test_the_quadrature_over_gaps_agrees_with_normal_probabilities(strike, rank):
    weights = np.array([1.0 if k == rank else 0.0 for k in (1, 2, 3)])
    gaps, probabilities = RankedLevels(LAW3, weights), kth_best(LAW3, rank)
    agree(gaps.mean(), probabilities.mean())
    for side in (1, -1):
        agree(gaps.option(strike, side), probabilities.option(strike, side))
        agree(gaps.digital(strike, side), probabilities.digital(strike, side))


@pytest.mark.parametrize("n", [3, 4, 5])
def test_the_ranked_levels_add_up_to_the_levels(n):
    joint = law(np.linspace(0.8, 1.2, n), np.linspace(0.4, 0.2, n), random_correlation(np.random.default_rng(n), n))
    means = [kth_best(joint, rank).mean() for rank in range(1, n + 1)]
    assert sum(m.value for m in means) == pytest.approx(joint.forwards.sum(), abs=sum(m.error for m in means) + 1e-14)
    calls = [kth_best(joint, rank).option(1.0, 1) for rank in range(1, n + 1)]
    single = [
        BLACK_SCHOLES.reference(problem(joint, Aggregate.weighted_sum(tuple(row)), ProfileKind.CALL, 1.0)).value
        for row in np.eye(n)
    ]
    assert sum(c.value for c in calls) == pytest.approx(sum(single), abs=sum(c.error for c in calls) + 1e-14)


def test_the_factors_of_inclusion_and_exclusion_add_up_to_one_over_whole_sizes_of_subsets():
    for n in (3, 4, 5):
        for rank in range(2, n):
            mixture = kth_best(law(np.ones(n), np.full(n, 0.2), equal_correlation(n, 0.3)), rank)
            assert sum(factor for factor, _ in mixture.parts) == pytest.approx(1.0)
            sizes = {part.law.n_assets for _, part in mixture.parts}
            assert len(mixture.parts) == sum(comb(n, size) for size in sizes)


def test_the_best_of_two_is_one_asset_and_the_option_to_exchange_it():
    joint = law([1.0, 0.9], [0.2, 0.4], equal_correlation(2, 0.3))
    best = Extreme(joint, best=True).mean()
    exchange = EXCHANGE.reference(problem(joint, Aggregate.weighted_sum((1.0, -1.0)), ProfileKind.EXCHANGE))
    assert best.value == pytest.approx(0.9 + exchange.value, abs=1e-14)


def test_best_minus_worst_of_two_is_a_straddle_on_the_spread():
    # max - min = |S1 - S2|
    joint = law([1.0, 0.9], [0.2, 0.4], equal_correlation(2, 0.3))
    ranked = problem(joint, Aggregate.rank_weighted((1.0, -1.0)), ProfileKind.FORWARD, 0.0)
    spread = problem(joint, Aggregate.weighted_sum((1.0, -1.0)), ProfileKind.STRADDLE, 0.0)
    agree(RANKED_QUADRATURE.reference(ranked), EXCHANGE.reference(spread))


def test_weights_on_sorted_levels_agree_with_sampling():
    weights, strike = (0.6, 0.3, 0.1), 1.05
    rng = np.random.default_rng(12)
    half = rng.multivariate_normal(np.zeros(3), LAW3.covariance, 300_000)
    x = np.concatenate((half, -half))
    levels = LAW3.forwards * np.exp(x - 0.5 * np.diag(LAW3.covariance))
    aggregate = Aggregate.rank_weighted(weights)
    for kind in (ProfileKind.CALL, ProfileKind.PUT, ProfileKind.CASH_DIGITAL_PUT):
        p = problem(LAW3, aggregate, kind, strike)
        payoffs = p.payoff(aggregate(levels)).reshape(2, -1).mean(axis=0)
        exact = RANKED_QUADRATURE.reference(p)
        # 4.5 standard errors: one false alarm in 100,000
        assert abs(payoffs.mean() - exact.value) < 4.5 * payoffs.std() / np.sqrt(payoffs.size) + exact.error
        assert exact.error < 1e-7


def test_equal_weights_on_sorted_levels_are_a_basket():
    p = problem(LAW3, Aggregate.rank_weighted((0.3, 0.3, 0.3)), ProfileKind.CALL, 0.9)
    assert RANKED_QUADRATURE.reference(p) is None
    assert SingleRank.of(p) is None


def test_one_weighted_rank_scales_the_ranked_level():
    single = problem(LAW3, Aggregate.kth_best(2, 3), ProfileKind.PUT, 1.0)
    doubled = problem(LAW3, Aggregate.rank_weighted((0.0, 2.0, 0.0)), ProfileKind.PUT, 2.0)
    negative = problem(LAW3, Aggregate.rank_weighted((0.0, -2.0, 0.0)), ProfileKind.CALL, -2.0)
    value = ORDER_STATISTICS.reference(single).value
    assert ORDER_STATISTICS.reference(doubled).value == pytest.approx(2.0 * value, rel=1e-13)
    assert ORDER_STATISTICS.reference(negative).value == pytest.approx(2.0 * value, rel=1e-13)


def test_an_asset_without_variance_is_cash():
    two = law([1.0, 0.9], [0.2, 0.4], equal_correlation(2, 0.3))
    three = law([1.0, 0.9, 0.95], [0.2, 0.4, 0.0], equal_correlation(3, 0.3))
    for best, floor in ((True, "of_floored_argument"), (False, "of_capped_argument")):
        aggregate = Aggregate.best_of if best else Aggregate.worst_of
        for kind in (ProfileKind.CALL, ProfileKind.PUT, ProfileKind.CASH_DIGITAL_CALL):
            with_cash = problem(two, aggregate(2), kind, 0.97)
            folded = type(with_cash)(two, aggregate(2), getattr(with_cash.payoff, floor)(0.95), 1.0)
            agree(EXTREMES.reference(problem(three, aggregate(3), kind, 0.97)), TWO_ASSET_EXTREMES.reference(folded))


def test_a_digital_struck_exactly_at_a_level_without_variance_pays_only_above_it():
    joint = law([1.0, 1.5], [0.0, 0.01], np.eye(2))
    at = problem(joint, Aggregate.worst_of(2), ProfileKind.CASH_DIGITAL_CALL, 1.0)
    assert TWO_ASSET_EXTREMES.reference(at).value == 0.0
    put = problem(joint, Aggregate.worst_of(2), ProfileKind.CASH_DIGITAL_PUT, 1.0)
    assert TWO_ASSET_EXTREMES.reference(put).value == pytest.approx(1.0)


def test_identical_assets_count_once():
    same = law([1.0, 1.0, 1.0], [0.25, 0.25, 0.25], equal_correlation(3, 1.0))
    one = problem(same, Aggregate.weighted_sum((1.0, 0.0, 0.0)), ProfileKind.CALL, 1.1)
    for rank in (1, 2, 3):
        p = problem(same, aggregate_of_rank(rank, 3), ProfileKind.CALL, 1.1)
        agree((ORDER_STATISTICS if rank == 2 else EXTREMES).reference(p), BLACK_SCHOLES.reference(one))


@pytest.mark.parametrize("signs", [(1.0, 1.0, 1.0), (1.0, -1.0, 1.0)])
def test_perfectly_correlated_assets_are_ranked_along_one_factor(signs):
    volatilities, forwards = np.array([0.2, 0.3, 0.5]), np.array([1.0, 0.95, 1.1])
    joint = law(forwards, volatilities, np.outer(signs, signs))
    loadings = volatilities * signs

    for rank in (1, 2, 3):
        aggregate = aggregate_of_rank(rank, 3)

        def density(w, aggregate=aggregate):
            levels = forwards * np.exp(np.multiply.outer(w, loadings) - 0.5 * loadings**2)
            return normal_density(w) * np.maximum(aggregate(levels) - 1.0, 0.0)

        wanted = integrate(density, np.linspace(-9.0, 9.5, 20), 1e-12, 100_000)
        found = (ORDER_STATISTICS if rank == 2 else EXTREMES).reference(
            problem(joint, aggregate, ProfileKind.CALL, 1.0)
        )
        assert found.value == pytest.approx(wanted.value, abs=found.error + wanted.error)


def test_many_assets_with_equal_correlation_agree_with_sampling():
    n = 30
    joint = law(np.linspace(0.9, 1.1, n), np.linspace(0.15, 0.4, n), equal_correlation(n, 0.4))
    rng = np.random.default_rng(7)
    half = rng.multivariate_normal(np.zeros(n), joint.covariance, 40_000)
    levels = joint.forwards * np.exp(np.concatenate((half, -half)) - 0.5 * np.diag(joint.covariance))
    for aggregate, strike in (
        (Aggregate.best_of(n), 1.5),
        (Aggregate.worst_of(n), 0.6),
        (Aggregate.kth_best(5, n), 1.2),
    ):
        p = problem(joint, aggregate, ProfileKind.CALL, strike)
        payoffs = p.payoff(aggregate(levels)).reshape(2, -1).mean(axis=0)
        exact = ONE_FACTOR_RANKS.reference(p)
        assert abs(payoffs.mean() - exact.value) < 4.5 * payoffs.std() / np.sqrt(payoffs.size) + exact.error
        assert exact.error < 1e-6


@pytest.mark.parametrize("kind", [ProfileKind.CALL, ProfileKind.ASSET_DIGITAL_PUT, ProfileKind.STRADDLE])
def test_levels_decades_apart_are_ranked_on_their_own_scale(kind):
    forwards, deviations = np.array([0.27, 790.0, 210.0, 1.9e-4]), np.array([0.208, 0.0014, 0.0069, 0.0014])
    loading = np.array([0.5, -0.3, 0.8, 0.6])
    correlation = np.outer(loading, loading)
    np.fill_diagonal(correlation, 1.0)
    joint = law(forwards, deviations, correlation)
    for rank in range(1, 5):
        level = float(np.sort(forwards)[-rank])
        p = problem(joint, aggregate_of_rank(rank, 4), kind, 0.9995 * level)
        exact = (EXTREMES if rank in (1, 4) else ORDER_STATISTICS).reference(p)
        found = ONE_FACTOR_RANKS.reference(p)
        # Far apart, the ranked level is one asset: Black's formula knows it too.
        single = tuple(1.0 if f == level else 0.0 for f in forwards)
        alone = BLACK_SCHOLES.reference(problem(joint, Aggregate.weighted_sum(single), kind, 0.9995 * level))
        assert found.value == pytest.approx(alone.value, abs=found.error + 1e-13 * level)
        assert found.error < 1e-9 * level
        if rank == 4:
            agree(found, exact)


def test_the_families_apply_where_they_should():
    four = law(np.ones(4), np.full(4, 0.2), random_correlation(np.random.default_rng(1), 4))
    eight = law(np.ones(8), np.full(8, 0.2), random_correlation(np.random.default_rng(1), 8))
    call, digital = ProfileKind.CALL, ProfileKind.CASH_DIGITAL_CALL
    assert EXTREMES.reference(problem(four, Aggregate.best_of(4), call, 1.0)) is not None
    assert ONE_FACTOR_RANKS.reference(problem(four, Aggregate.best_of(4), call, 1.0)) is None
    assert RANKED_QUADRATURE.reference(problem(four, Aggregate.rank_weighted((0.4, 0.3, 0.2, 0.1)), call, 1.0)) is None
    assert EXTREMES.reference(problem(eight, Aggregate.worst_of(8), call, 1.0)) is None
    assert EXTREMES.reference(problem(eight, Aggregate.worst_of(8), digital, 1.0)) is not None
    assert ORDER_STATISTICS.reference(problem(eight, Aggregate.kth_best(3, 8), call, 1.0)) is None
