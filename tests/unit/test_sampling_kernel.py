"""The compiled kernel against its plain NumPy twin, sum by sum."""

from dataclasses import replace

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear
from pricer.market.joint_lognormal import JointLognormal
from pricer.simulation import plain, sobol
from pricer.simulation.batch_means import batch_estimate
from pricer.simulation.design import Design, reflected
from pricer.simulation.estimates import estimates
from pricer.simulation.kernels import fused
from pricer.simulation.kernels.sources import digest
from pricer.simulation.sampler import Sampler

N = 6
CORRELATION = 0.3 + 0.7 * np.eye(N)
LAW = JointLognormal.from_volatilities(
    np.array([80.0, 95.0, 100.0, 110.0, 120.0, 90.0]),
    np.array([0.15, 0.2, 0.3, 0.4, 0.25, 0.35]),
    CORRELATION,
    1.5,
)
NEAR_100 = PiecewiseLinear(1.0, -0.3, (60.0, 95.0, 130.0), (0.5, -1.0, 0.7), (20.0, 0.0, -30.0))
NEAR_0 = PiecewiseLinear(1.0, -0.3, (-20.0, 0.0, 30.0), (0.5, -1.0, 0.7), (20.0, 10.0, -30.0))
CASES = {
    "basket": (Aggregate.weighted_sum((0.2, 0.1, 0.3, 0.1, 0.2, 0.1)), NEAR_100),
    "spread": (Aggregate.weighted_sum((0.4, -0.5, 0.5, 0.3, -0.4, -0.3)), NEAR_0),
    "mostly negative": (Aggregate.weighted_sum((1.0, -0.2, -0.2, -0.2, -0.2, -0.2)), NEAR_0),
    "all negative": (Aggregate.weighted_sum((-0.2, -0.1, -0.3, -0.1, -0.2, -0.1)), reflected(NEAR_100)),
    "geometric": (Aggregate.geometric((0.2, 0.1, 0.3, 0.1, 0.2, 0.15)), NEAR_100),
    "best of": (Aggregate.best_of(N), NEAR_100),
    "worst of": (Aggregate.worst_of(N), NEAR_100),
    "second best": (Aggregate.kth_best(2, N), NEAR_100),
    "rank weighted": (Aggregate.rank_weighted((1.0, 0.5, 0.2, -0.1, -0.5, -1.0)), NEAR_0),
    "rank weighted, negative": (Aggregate.rank_weighted((-1.0, 0.0, 0.0, 0.0, 0.5, 0.0)), NEAR_0),
}
COLUMNS = ("by level", "by log", "by factor", "second", "level")


def words(dimensions: int, n: int = 2) -> list[np.random.Generator]:
    return [np.random.default_rng([dimensions, i]) for i in range(n)]


@pytest.mark.parametrize("smoothed", [True, False])
@pytest.mark.parametrize("triangular", [True, False])
@pytest.mark.parametrize("case", CASES)
def test_the_kernel_sums_what_its_twin_sums(case, triangular, smoothed):
    aggregate, payoff = CASES[case]
    design = Design.of(LAW, aggregate, payoff, triangular=triangular)
    if not smoothed:  # any loadings will do for plain payoffs
        design = replace(design, common=0.0, n_common=N)
    got = Sampler(design, words(design.dimensions)).extend(2048) / 2048
    random = sobol.random_words(words(design.dimensions), design.dimensions)
    want = plain.sums(design, random, 0, 2048) / 2048
    assert got[:, :3] == pytest.approx(want[:, :3], rel=1e-6, abs=1e-6)
    # a kernel in single precision may see a path on the other side of a tie or a kink: 1 path in 2,048
    slack = 3e-6 if smoothed and not aggregate.is_ranked else 2e-3
    for k, column in enumerate(COLUMNS):
        a, b = got[:, 3 + k :: 5], want[:, 3 + k :: 5]
        assert a == pytest.approx(b, abs=slack * max(1e-12, float(np.max(np.abs(b))))), column


@pytest.mark.parametrize("n", [1, 2, 3, 5, 9, 30])
def test_any_number_of_assets_fits_the_tiles(n):
    law = JointLognormal.from_volatilities(np.full(n, 100.0), np.full(n, 0.3), 0.2 + 0.8 * np.eye(n), 1.0)
    payoff = PiecewiseLinear(0.0, 0.0, (100.0,), (1.0,), (0.0,))
    for triangular in (True, False):
        design = Design.of(law, Aggregate.weighted_sum((1.0 / n,) * n), payoff, triangular=triangular)
        if n == 1:
            assert design.dimensions == 0
            continue
        got = Sampler(design, words(n)).extend(512)
        want = plain.sums(design, sobol.random_words(words(n), design.dimensions), 0, 512)
        assert got[:, :3] == pytest.approx(want[:, :3], rel=1e-6)


def test_a_sequence_may_be_drawn_in_steps():
    design = Design.of(LAW, *CASES["basket"], triangular=False)
    at_once, in_steps = Sampler(design, words(5)), Sampler(design, words(5))
    for points in (64, 128, 256, 1024, 2048):
        in_steps.extend(points)
    # sums of short first blocks are taken anew, so that only the grouping of additions may differ
    assert in_steps.sums == pytest.approx(at_once.extend(2048), rel=1e-13)


def test_a_short_first_block_counts_its_own_points_only():
    design = Design.of(LAW, *CASES["basket"], triangular=False)
    got = Sampler(design, words(5)).extend(32)
    want = plain.sums(design, sobol.random_words(words(5), 5), 0, 32)
    assert got[:, :3] == pytest.approx(want[:, :3], rel=1e-6)


def test_values_are_the_same_with_and_without_sensitivities():
    design = Design.of(LAW, *CASES["spread"], triangular=False)
    with_ratios, without = (Sampler(design, words(5), with_ratios=w).extend(512) for w in (True, False))
    assert np.array_equal(with_ratios[:, :3], without[:, :3])


def test_scrambling_in_the_kernel_is_that_of_the_twin():
    numbers, random = sobol.directions(12), sobol.random_words(words(12, 3), 12)
    columns = np.empty((3, 12, sobol.BITS), dtype=np.uint32)
    fused.scramble(numbers, random, columns)
    for r in range(3):
        assert np.array_equal(columns[r], sobol.scrambled_columns(numbers, random[r]))


def test_levels_too_wide_for_single_precision_are_refused():
    law = JointLognormal(np.ones(2), np.diag([400.0, 1.0]))
    with pytest.raises(ValueError, match="too wide"):
        Design.of(law, Aggregate.best_of(2), NEAR_0, triangular=False)


def test_a_payoff_is_reflected_about_zero():
    a = np.linspace(-150.0, 150.0, 1001) + 0.013
    assert reflected(NEAR_100)(-a) == pytest.approx(NEAR_100(a))


def test_a_control_that_explains_everything_leaves_no_error():
    rng = np.random.default_rng(1)
    control = rng.normal(size=(16, 1))
    estimate, error = batch_estimate(5.0 + 3.0 * control, control)
    assert estimate == pytest.approx([5.0], abs=1e-12)
    assert error == pytest.approx([0.0], abs=1e-12)


def test_errors_with_a_control_cover_as_students_t_says():
    # 4,000 normal samples of 16 batches: 95 % intervals with 14 degrees of freedom, 2.145 (any table of t)
    rng = np.random.default_rng(2)
    x, e = rng.normal(size=(2, 16, 4000))
    estimate, error = batch_estimate(x + 0.5 * e, x)
    covered = np.mean(np.abs(estimate) < 2.145 * error)
    assert covered == pytest.approx(0.95, abs=4 * np.sqrt(0.05 * 0.95 / 4000))


def test_a_control_that_stands_still_is_left_out():
    rng = np.random.default_rng(3)
    y = rng.normal(size=(16, 2))
    with_control, without = batch_estimate(y, np.full((16, 2), 1e-16)), batch_estimate(y)
    assert with_control[0] == pytest.approx(without[0])


@pytest.mark.parametrize("case", ["basket", "spread", "geometric", "best of"])
def test_rounding_to_single_precision_stays_within_the_error_it_is_granted(case):
    design = Design.of(LAW, *CASES[case], triangular=False)
    got = Sampler(design, words(design.dimensions, 4)).extend(4096) / 4096
    want = plain.sums(design, sobol.random_words(words(design.dimensions, 4), design.dimensions), 0, 4096) / 4096
    single, double = estimates(design, got, 4096), estimates(design, want, 4096)
    assert single.rounding < 1e-6 * abs(single.value) + 1e-5
    assert abs(np.mean(got[:, 0]) - np.mean(want[:, 0])) < 2.0 * single.rounding
    assert np.all(np.abs(single.log_deltas - double.log_deltas) < 5.0 * single.log_delta_errors)


def test_the_disk_cache_is_keyed_by_the_sources_of_all_kernels():
    for kernel in (fused.scramble, fused.accumulate):
        assert digest() in [cell.cell_contents for cell in kernel.py_func.__closure__]
