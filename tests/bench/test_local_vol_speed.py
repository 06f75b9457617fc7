"""Local-volatility paths beside vectorised NumPy, and values beside QuantLib's finite differences.

One core, one run, the rivals taking turns; the best of several rounds each, so that a busy
machine disturbs all alike. A point is one step of one asset on one path.
Run alone: ``python -m pytest -m bench -s tests/bench/test_local_vol_speed.py``.
"""

from __future__ import annotations

import time

import numpy as np
import pytest
import QuantLib as ql
from threadpoolctl import threadpool_limits

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import Profile, ProfileKind
from pricer.core.randomness import Purpose, stream
from pricer.engines.local_vol_monte_carlo import sample_local_vol
from pricer.engines.local_vol_problem import LocalVolProblem
from pricer.simulation.local_vol_sampler import LocalVolSampler
from pricer.simulation.local_vol_tables import LocalVolTables
from pricer.simulation.lognormal_steps import LognormalSteps
from pricer.simulation.path_noise import PathNoise
from pricer.simulation.time_grid import TimeGrid
from tests.reference.quantlib_local_vol import process, value
from tests.unit.local_vol_cases import Table, constant, paths_of, power, tabulated

pytestmark = pytest.mark.bench

STEPS = 32
#: Paths that NumPy works on together: (20, 1024) doubles stay in the second-level cache.
CHUNK = 1024


def basket(n: int) -> LocalVolProblem:
    """An invented basket: n unlike assets with skews, correlation 0.5, call at the money for a year."""
    rng = np.random.default_rng(n)
    volatilities, weights = rng.uniform(0.15, 0.4, n), rng.uniform(0.5, 1.5, n)
    surfaces = tuple(tabulated(power(float(v), 0.5), float(v), 1.0, cells=32, nodes=161) for v in volatilities)
    aggregate = Aggregate.weighted_sum(tuple(weights / weights.sum()))
    payoff, forwards = Profile(ProfileKind.CALL, 100.0).payoff(), np.full(n, 100.0)
    correlation = 0.5 + 0.5 * np.eye(n)
    times = constant(volatilities, 1.0)
    return LocalVolProblem(surfaces, correlation, forwards, np.zeros(n), *times, 1.0, aggregate, payoff, 1.0)


class BilinearNumpy:
    """Log-Euler with local volatility bilinear in time and log-level: chunks in cache, no search, few copies."""

    def __init__(self, problem: LocalVolProblem) -> None:
        self.problem, self.root = problem, np.linalg.cholesky(problem.correlation)
        tables: list[Table] = list(problem.surfaces)  # type: ignore[arg-type]
        m, k = tables[0].values.shape
        self.reach, self.cells, self.nodes = tables[0].reach, m, k
        # one uniform grid of log-levels per asset, as wide as the last row of its table
        self.widths = np.array([t.widths[-1] for t in tables])
        wide = [self.widths[i] * np.linspace(-t.reach, t.reach, k) for i, t in enumerate(tables)]
        rows = [[np.interp(w, t.widths[c] * np.linspace(-t.reach, t.reach, k), t.values[c]) for c in range(m)]
                for w, t in zip(wide, tables, strict=True)]  # fmt: skip
        self.values = np.array(rows).ravel()
        self.first = (np.arange(len(tables)) * m * k)[:, None]

    def run(self, paths: int) -> float:
        p, n = self.problem, len(self.problem.surfaces)
        rng = np.random.Generator(np.random.SFC64(7))
        h = p.years / STEPS
        scales = np.array(p.aggregate.weights) * p.scales
        half, per = self.reach * self.widths[:, None], ((self.nodes - 1) / (2.0 * self.reach * self.widths))[:, None]
        z, noise = np.empty((n, CHUNK)), np.empty((n, CHUNK))
        total = 0.0
        for _ in range(paths // CHUNK):
            logs = np.zeros((n, CHUNK))
            for s in range(STEPS):
                time_place = max((s + 0.5) / STEPS * self.cells - 0.5, 0.0)
                cell = min(int(time_place), self.cells - 2)
                u = time_place - cell
                place = (logs + half) * per
                np.clip(place, 0.0, self.nodes - 2.0, out=place)
                node = place.astype(np.int64)
                place -= node
                node += self.first + cell * self.nodes
                low = self.values.take(node)
                low += place * (self.values.take(node + 1) - low)
                node += self.nodes
                high = self.values.take(node)
                high += place * (self.values.take(node + 1) - high)
                low += u * (high - low)
                rng.standard_normal(out=z)
                np.matmul(self.root, z, out=noise)
                noise *= low * np.sqrt(h)
                logs += noise
                logs -= (0.5 * h) * low * low
            np.exp(logs, out=logs)
            total += float(np.maximum(scales @ logs - 100.0, 0.0).sum())
        return total / paths


def best(work, rounds: int = 5) -> float:
    """Least seconds of several rounds."""
    taken = []
    for _ in range(rounds):
        start = time.perf_counter()
        work()
        taken.append(time.perf_counter() - start)
    return min(taken)


@pytest.mark.parametrize("n", [5, 20])
def test_points_per_second_against_bilinear_numpy(n):
    problem = basket(n)
    laid_out = paths_of(problem)
    plan, grid = laid_out.plan, TimeGrid.of(1.0, steps=STEPS)
    steps = LognormalSteps.of(
        grid,
        *constant(np.sqrt(problem.variances[:, 1]), 1.0),
        problem.correlation,
        problem.rate_exposures,
        composite=False,
    )
    steps = steps.ordered(plan.design.order, plan.shares)
    paths = 2**15 if n == 5 else 2**14
    rival = BilinearNumpy(problem)
    ours = {}
    with threadpool_limits(1):
        for ratios in (True, False):
            noise = PathNoise(grid, plan.loadings, plan.sizes, stream(1, "bench", Purpose.PRICE, 0), 4)
            sampler = LocalVolSampler(plan, grid, steps, noise, with_ratios=ratios)

            def work(sampler=sampler):
                sampler.points = 0
                sampler.sums[:] = 0.0
                sampler.extend(paths // 4)

            work()
            ours[ratios] = (best(work), float(sampler.sums[:, 0].sum()) / paths)
        theirs = best(lambda: rival.run(paths))
    other = rival.run(paths)
    tables = best(lambda: LocalVolTables.of(plan.surfaces, grid), 3)
    points = paths * STEPS * n / 1e6
    print(
        f"\n{n} assets, {STEPS} steps, million points a second: fused {points / ours[False][0]:.0f}, with deltas "
        f"{points / ours[True][0]:.0f}, numpy {points / theirs:.0f}; ratio {theirs / ours[False][0]:.1f}, with deltas "
        f"{theirs / ours[True][0]:.1f}; tables {1e3 * tables:.0f} ms; values {ours[False][1]:.4f} and {other:.4f}"
    )
    assert abs(ours[False][1] - other) < 0.25  # the same model: numpy's error is near 0.06
    assert theirs / ours[False][0] >= 4.0
    assert theirs / ours[True][0] >= 3.0


@pytest.mark.parametrize("size", [100, 200])
def test_time_to_equal_error_against_quantlibs_finite_differences(size):
    """A basket call on two assets; its value, 10.22311, extrapolated from grids of 200 and 400.

    We are asked for a standard error, steps included, as large as their grid's error.
    """
    want, spots = 10.22311, np.array([100.0, 100.0])
    processes = [process(100.0, 0.05, 0.02, 0.3, 0.5, 2.0, 1.0), process(100.0, 0.05, 0.0, 0.2, 0.7, 2.0, 1.0)]
    growth = np.array([0.03, 0.05])
    surfaces = tuple(
        tabulated(power(v, b, g, 2.0), v, 1.0, cells=64, nodes=321) for v, b, g in ((0.3, 0.5, 0.03), (0.2, 0.7, 0.05))
    )
    problem = LocalVolProblem(
        surfaces,
        np.array([[1.0, 0.4], [0.4, 1.0]]),
        spots * np.exp(growth),
        np.zeros(2),
        *constant([0.3, 0.2], 1.0),
        1.0,
        Aggregate.weighted_sum((0.5, 0.5)),
        Profile(ProfileKind.CALL, 100.0).payoff(),
        float(np.exp(-0.05)),
    )

    start = time.perf_counter()
    theirs_value = value("basket", ql.Option.Call, 100.0, 365, processes, 0.4, size)
    theirs = time.perf_counter() - start
    tolerance = abs(theirs_value - want)

    def work():
        return sample_local_vol(problem, group="bench", seed=1, value_tolerance=tolerance, delta_tolerance=np.inf)

    got = work()
    mine = best(work, 3)
    print(
        f"\nQuantLib {size} x {size} x {size // 2}: off by {theirs_value - want:+.5f} in {theirs:.2f} s; ours off by "
        f"{got.value - want:+.5f} +- {got.standard_error:.5f} ({got.steps} steps, {got.paths} paths) with deltas in "
        f"{mine:.2f} s; ratio {theirs / mine:.1f}"
    )
    assert got.reached and abs(got.value - want) < 4.5 * got.standard_error + 0.5 * tolerance + 1e-4
    assert theirs > mine
