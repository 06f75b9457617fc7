"""The compiled path kernel against its plain twin, against paths without smoothing, and against bumps."""

from dataclasses import replace

import numpy as np
import pytest

from pricer.engines.paths import plain
from pricer.engines.paths.law import PathLaw
from pricer.engines.paths.plan import PathProblem, Tables
from pricer.simulation.path_sampler import Method, PathSampler
from tests.unit.path_cases import problems, sampler_normals

PROBLEMS = problems()
NAMES = list(PROBLEMS)


def stream(seed=3):
    return np.random.Generator(np.random.PCG64(seed))


def kernel_means(problem, points=256, randomisations=4, **kwargs):
    tables = Tables(problem)
    sampler = PathSampler(tables.plan(), stream(), randomisations, **kwargs)
    return tables, sampler.extend(points) / points


@pytest.mark.parametrize("name", NAMES)
def test_kernel_integrates_the_common_factor_as_its_plain_twin_does(name):
    problem = PROBLEMS[name]
    points, nodes = 16, 1000
    _, means = kernel_means(problem, points=points, randomisations=2)
    legs = len(problem.legs)
    for (rest, common), found in zip(sampler_normals(problem, stream(), 2, points), means[:, :legs], strict=True):
        expected = plain.smooth_values(problem, rest, common, nodes).mean(axis=1)
        # a jump of up to 1 lies anywhere between two of the twin's nodes, path by path
        assert found == pytest.approx(expected, abs=2.0 / nodes / np.sqrt(points))


@pytest.mark.parametrize("name", NAMES)
def test_kernel_without_conditioning_follows_every_path(name):
    problem = PROBLEMS[name]
    _, means = kernel_means(problem, method=Method.PLAIN)
    legs = len(problem.legs)
    for (rest, common), found in zip(sampler_normals(problem, stream(), 4, 256), means[:, :legs], strict=True):
        expected = plain.hard_values(problem, rest, common).mean(axis=1)
        assert found == pytest.approx(expected, rel=3e-6, abs=1e-7)


@pytest.mark.parametrize("name", NAMES)
def test_conditioning_leaves_the_value_unchanged(name):
    problem = PROBLEMS[name]
    random = np.random.default_rng(7)
    shape = (len(problem.law.times), next(sampler_normals(problem, stream(), 1, 2))[0].shape[1], 40_000)
    hard = plain.hard_values(problem, random.standard_normal(shape), random.standard_normal((shape[0], shape[2])))
    _, means = kernel_means(problem, points=1024, randomisations=16)
    legs = means[:, : len(problem.legs)]
    errors = np.hypot(hard.std(axis=1) / np.sqrt(shape[2]), legs.std(axis=0) / 4.0)
    # four standard errors: one in some 16 000 legs lies beyond by chance
    assert np.all(np.abs(hard.mean(axis=1) - legs.mean(axis=0)) < 4.0 * errors + 1e-9)


def deltas_of(tables, means):
    shape = tables.plan().starts.shape
    return tables.forward_deltas(means.mean(axis=0)[-shape[0] * shape[1] :].reshape(shape))


def bumped(problem, date, asset, by):
    forwards = problem.law.forwards.copy()
    forwards[date, asset] *= np.exp(by)
    return PathProblem(PathLaw(problem.law.times, forwards, problem.law.covariances), problem.legs)


def value_of(problem):
    _, means = kernel_means(problem, points=1024, randomisations=16, method=Method.SMOOTH)
    return float(means[:, : len(problem.legs)].sum()) / 16.0


@pytest.mark.parametrize("name", NAMES)
def test_forward_deltas_are_those_of_bumps_on_common_draws(name):
    problem = PROBLEMS[name]
    tables, means = kernel_means(problem, points=1024, randomisations=16)
    deltas = deltas_of(tables, means)
    h = 3e-5
    for date in range(len(problem.law.times)):
        for asset in range(problem.law.n_assets):
            up, down = (value_of(bumped(problem, date, asset, side)) for side in (h, -h))
            # within the bump some of 16 384 paths change which asset or which date decides, and with it their slope:
            # the difference shrinks with the bump, until rounding in single precision takes over
            assert deltas[date, asset] == pytest.approx((up - down) / (2.0 * h), abs=1e-4)


def test_coupons_in_memory_are_those_of_one_branch_per_period():
    one, many = (kernel_means(PROBLEMS[name]) for name in ("memory", "branches"))
    assert one[1][:, 0] == pytest.approx(many[1][:, : len(PROBLEMS["branches"].legs)].sum(axis=1), abs=1e-10)
    deltas = [deltas_of(tables, means) for tables, means in (one, many)]
    assert deltas[0] == pytest.approx(deltas[1], abs=1e-6)  # some rows are kept in single precision


def test_a_problem_extended_in_two_goes_is_the_same_to_the_last_bit():
    plan = Tables(PROBLEMS["worst-of autocallable"]).plan()
    once = PathSampler(plan, stream(), 4).extend(1024)
    twice = PathSampler(plan, stream(), 4)
    twice.extend(512)
    assert np.array_equal(twice.extend(1024), once)


def test_values_and_stops_do_not_depend_on_whether_ratios_are_asked_for():
    problem = PROBLEMS["average"]
    _, with_ratios = kernel_means(problem)
    _, without = kernel_means(problem, method=Method.SMOOTH)
    heads = 1 + 2 * len(problem.legs[0].events)
    assert np.array_equal(with_ratios[:, :heads], without[:, :heads])
    assert not np.any(without[:, heads:])


def test_dates_must_lie_within_the_law():
    problem = PROBLEMS["one asset"]
    law = problem.law
    with pytest.raises(ValueError, match="after the law's last"):
        PathProblem(
            replace(law, times=law.times[:2], forwards=law.forwards[:2], covariances=law.covariances[:2]), problem.legs
        )
