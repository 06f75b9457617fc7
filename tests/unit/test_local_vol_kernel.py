"""The compiled local-volatility kernel against its plain NumPy twin, and what every scheme must keep."""

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear
from pricer.simulation import local_vol_plain as plain
from pricer.simulation import sobol
from pricer.simulation.kernels import local_vol_paths, local_vol_tables
from pricer.simulation.kernels.sources import digest
from pricer.simulation.local_vol_sampler import LocalVolSampler, local_vol_levels
from pricer.simulation.local_vol_tables import StepRows
from pricer.simulation.path_noise import PathNoise
from pricer.simulation.time_grid import TimeGrid
from tests.unit.local_vol_cases import Table, plan_of, power, skewed, tabulated

N = 6
NEAR_100 = PiecewiseLinear(1.0, -0.3, (60.0, 95.0, 130.0), (0.5, -1.0, 0.7), (20.0, 0.0, -30.0))
NEAR_0 = PiecewiseLinear(1.0, -0.3, (-20.0, 0.0, 30.0), (0.5, -1.0, 0.7), (20.0, 10.0, -30.0))
CASES = {
    "basket": (Aggregate.weighted_sum((0.2, 0.1, 0.3, 0.1, 0.2, 0.1)), NEAR_100),
    "spread": (Aggregate.weighted_sum((0.4, -0.5, 0.5, 0.3, -0.4, -0.3)), NEAR_0),
    "mostly negative": (Aggregate.weighted_sum((1.0, -0.2, -0.2, -0.2, -0.2, -0.2)), NEAR_0),
    "geometric": (Aggregate.geometric((0.2, 0.1, 0.3, 0.1, 0.2, 0.15)), NEAR_100),
    "best of": (Aggregate.best_of(N), NEAR_100),
    "worst of": (Aggregate.worst_of(N), NEAR_100),
    "rank weighted": (Aggregate.rank_weighted((1.0, 0.5, 0.2, -0.1, -0.5, -1.0)), NEAR_0),
    "one asset": (Aggregate.weighted_sum((1.0,)), NEAR_100),
}


def generators(n: int = 2) -> list[np.random.Generator]:
    return [np.random.default_rng([5, i]) for i in range(n)]


@pytest.mark.parametrize("coarse", [False, True])
@pytest.mark.parametrize("dividends", [False, True])
@pytest.mark.parametrize("case", CASES)
def test_the_kernel_sums_what_its_twin_sums(case, dividends, coarse):
    aggregate, payoff = CASES[case]
    n = len(aggregate.weights)
    problem = skewed(aggregate, payoff, floors=np.linspace(0.0, 9.0, n) if dividends else None, years=2.0)
    plan = plan_of(problem, triangular=aggregate.is_ranked)
    grid = TimeGrid.of(2.0, steps=8, ending=0.5)
    noise = PathNoise(grid, plan.loadings, plan.sizes, generators())
    used = grid.halved() if coarse else grid
    got = LocalVolSampler(plan, used, noise).extend(2048) / 2048
    words = sobol.random_words(generators(), 8 * n)
    motions = [plain.brownian(plan, grid.times, w, 2048)[:: 2 if coarse else 1] for w in words]
    want = np.stack([plain.path_sums(plan, used, m) for m in motions]) / 2048
    # single precision; of 2,048 paths one may stand on the other side of a tie
    slack = 2e-3 if aggregate.is_ranked else 2e-5
    size = np.maximum(np.abs(want).max(axis=0), 1e-3)
    assert np.max(np.abs(got - want) / size) < slack


def test_a_singular_correlation_is_sampled_without_smoothing():
    problem = skewed(Aggregate.weighted_sum((0.5, 0.5)), NEAR_100, correlation=np.ones((2, 2)))
    plan = plan_of(problem)
    assert not plan.smooth and plan.loadings.shape == (2, 1)
    grid = TimeGrid.of(1.5, steps=4)
    got = LocalVolSampler(plan, grid, PathNoise(grid, plan.loadings, plan.sizes, generators())).extend(1024) / 1024
    motions = [plain.brownian(plan, grid.times, w, 1024) for w in sobol.random_words(generators(), 4)]
    want = np.stack([plain.path_sums(plan, grid, m) for m in motions]) / 1024
    assert got == pytest.approx(want, rel=1e-3, abs=1e-3)  # jumps: a path may stand on the other side


def test_sums_grow_by_the_same_numbers_however_they_are_extended():
    problem = skewed(*CASES["basket"])
    plan = plan_of(problem)
    grid = TimeGrid.of(1.5, steps=4)
    noises = [PathNoise(grid, plan.loadings, plan.sizes, generators()) for _ in range(2)]
    once, twice = (LocalVolSampler(plan, grid, noise) for noise in noises)
    twice.extend(64)
    twice.extend(512)
    assert np.array_equal(once.extend(2048), twice.extend(2048))


def test_levels_are_martingales_whatever_the_number_of_steps():
    surfaces = [tabulated(power(0.3, 0.4), 0.3, 2.0), tabulated(power(0.25, 1.4), 0.25, 2.0)]
    levels = local_vol_levels(
        surfaces, np.array([[1.0, 0.5], [0.5, 1.0]]), [0.1, 0.5, 2.0], steps=6, points=2**14, streams=generators(16)
    ).astype(float)
    assert levels.shape == (16, 3, 2, 2**14)
    means = levels.mean(axis=3)
    error = means.std(axis=0, ddof=1) / 4.0
    # Student's t of 15 degrees of freedom: beyond 4.1 once in a thousand for each of 6; 3e-6 is the tables' own
    assert np.all(np.abs(means.mean(axis=0) - 1.0) < 4.1 * error + 3e-6)
    assert np.max(error) < 1e-4


def test_a_time_dependent_flat_surface_has_exactly_its_total_variance_at_every_date():
    times = np.array([0.0, 0.3, 1.0, 2.0])
    sigma = np.array([0.5, 0.2, 0.35])
    surface = Table(times, np.array([0.3, 0.35, 0.5]), 8.0, np.repeat(sigma[:, None], 41, axis=1))
    dates = [0.2, 0.7, 2.0, 3.0]
    levels = local_vol_levels([surface], np.eye(1), dates, steps=8, points=2**14, streams=generators(8))
    logs = np.log(levels[:, :, 0].astype(float))
    total = np.array([0.05, 0.3 * 0.25 + 0.4 * 0.04, 0.075 + 0.028 + 0.1225, 0.2255 + 0.1225])
    assert logs.var(axis=2).mean(axis=0) == pytest.approx(total, rel=1e-3)
    assert logs.mean(axis=2).mean(axis=0) == pytest.approx(-0.5 * total, abs=2e-5)


def test_a_step_sees_the_mean_variance_of_the_cells_it_covers():
    surface = Table(np.array([0.0, 1.0, 2.0]), np.array([0.2, 0.2]), 5.0, np.array([[0.1] * 11, [0.3] * 11]))
    rows = StepRows.of(surface, TimeGrid(np.array([0.0, 0.5, 1.5, 4.0]), np.array([3])))
    assert rows.values[:, 3] == pytest.approx([0.1, np.sqrt(0.05), 0.3])


@pytest.mark.parametrize("bad", [-0.1, np.nan])
def test_impossible_volatilities_are_refused(bad):
    surface = Table(np.array([0.0, 1.0]), np.array([0.2]), 5.0, np.array([[0.2, bad, 0.2]]))
    with pytest.raises(ValueError, match="finite and not negative"):
        StepRows.of(surface, TimeGrid.of(1.0, steps=2))


def test_the_disk_cache_is_keyed_by_the_sources_of_all_kernels():
    for kernel in (local_vol_paths.accumulate, local_vol_paths.record, local_vol_tables.build):
        assert digest() in [cell.cell_contents for cell in kernel.py_func.__closure__]
