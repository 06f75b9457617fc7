"""The compiled local-volatility kernel against its plain NumPy twin, and what every scheme must keep."""

from pathlib import Path

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear
from pricer.core.randomness import Purpose, stream
from pricer.core.stored_code import digest_of
from pricer.engines.local_vol_paths import LocalVolSettings
from pricer.engines.monte_carlo import SamplingSettings
from pricer.simulation import local_vol_plain as plain
from pricer.simulation import sobol
from pricer.simulation.kernels import local_vol_paths, local_vol_tables
from pricer.simulation.local_vol_sampler import local_vol_levels
from pricer.simulation.local_vol_tables import StepRows
from pricer.simulation.time_grid import TimeGrid
from tests.unit.local_vol_cases import Table, converted, paths_of, power, skewed, tabulated

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


def generator() -> np.random.Generator:
    return stream(5, "test", Purpose.PRICE, 0)


SETTINGS = LocalVolSettings(SamplingSettings(randomisations=4), 8, 8)
SINGULAR = LocalVolSettings(SamplingSettings(randomisations=4), 4, 4)


def compare(problem, *, coarse=False, points=2048, settings=SETTINGS):
    """Means of the kernel's sums and of its twin's, (randomisations, 3 + 4 n)."""
    paths = paths_of(problem, settings=settings)
    sampler = paths.coarse if coarse else paths.fine
    words = sobol.random_words(stream(1, "test", Purpose.PRICE, 0), 4, len(paths.grid.lengths) * len(paths.plan.sizes))
    motions = [plain.brownian(paths.plan, paths.grid.times, w, points)[:: 2 if coarse else 1] for w in words]
    want = np.stack([plain.path_sums(paths.plan, sampler.grid, sampler.steps, m) for m in motions]) / points
    return sampler.extend(points) / points, want


@pytest.mark.parametrize("coarse", [False, True])
@pytest.mark.parametrize("dividends", [False, True])
@pytest.mark.parametrize("case", CASES)
def test_the_kernel_sums_what_its_twin_sums(case, dividends, coarse):
    aggregate, payoff = CASES[case]
    n = len(aggregate.weights)
    problem = skewed(aggregate, payoff, floors=np.linspace(0.0, 9.0, n) if dividends else None, years=2.0)
    got, want = compare(problem, coarse=coarse)
    if coarse:  # sums no sensitivities
        got, want = (x[:, [0, 1, 2, *range(3 + 2 * n, 3 + 3 * n)]] for x in (got, want))
    agree(got, want, problem)


@pytest.mark.parametrize("composite", [False, True])
@pytest.mark.parametrize("case", ["basket", "spread", "geometric", "worst of", "rank weighted"])
def test_the_kernel_converts_currencies_as_its_twin_does(case, composite):
    aggregate, payoff = CASES[case]
    problem = converted(skewed(aggregate, payoff, floors=np.linspace(0.0, 9.0, N), years=2.0), composite=composite)
    got, want = compare(problem)
    agree(got, want, problem)


def agree(got, want, problem):
    # single precision. Of 2,048 paths one may stand on the other side of a tie; tables are straight between
    # nodes, so a path that rounding puts across a node has another slope, which derivatives see
    n = problem.n_assets
    slack = np.full(got.shape[1], 2e-3 if problem.aggregate.is_ranked else 1e-4)
    if got.shape[1] == 3 + 4 * n and not problem.aggregate.is_ranked:
        slack[[0, 1, 2, *range(3 + 2 * n, 3 + 3 * n)]] = 2e-5
    size = np.maximum(np.abs(want).max(axis=0), 1e-3)
    assert got.shape == want.shape
    assert np.all(np.abs(got - want) / size < slack)


def test_a_singular_correlation_is_sampled_without_smoothing():
    problem = skewed(Aggregate.weighted_sum((0.5, 0.5)), NEAR_100, correlation=np.ones((2, 2)))
    plan = paths_of(problem).plan
    assert not plan.smooth and plan.loadings.shape == (2, 1)
    got, want = compare(problem, points=1024, settings=SINGULAR)
    assert got == pytest.approx(want, rel=1e-3, abs=1e-3)  # jumps: a path may stand on the other side


def test_sums_grow_by_the_same_numbers_however_they_are_extended():
    problem = skewed(*CASES["basket"])
    once, twice = (paths_of(problem, settings=SETTINGS).fine for _ in range(2))
    twice.extend(64)
    twice.extend(512)
    assert np.array_equal(once.extend(2048), twice.extend(2048))


def test_levels_are_martingales_whatever_the_number_of_steps():
    surfaces = [tabulated(power(0.3, 0.4), 0.3, 2.0), tabulated(power(0.25, 1.4), 0.25, 2.0)]
    grid, rho = TimeGrid.of([0.1, 0.5, 2.0], steps=6), np.array([[1.0, 0.5], [0.5, 1.0]])
    levels = local_vol_levels(surfaces, rho, grid, points=2**14, stream=generator()).astype(float)
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
    grid = TimeGrid.of(dates, steps=8)
    levels = local_vol_levels([surface], np.eye(1), grid, points=2**14, stream=generator(), randomisations=8)
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
    digest = digest_of(Path(local_vol_paths.__file__).parent.glob("*.py"))
    for kernel in (local_vol_paths.accumulate, local_vol_paths.record, local_vol_tables.build):
        assert digest in kernel.py_func.__qualname__
