"""Bits that do not depend on who asks when, and errors that mean what they say."""

from concurrent.futures import ThreadPoolExecutor
from dataclasses import fields

import numpy as np
import pytest
import QuantLib as ql
from scipy.stats import t as student

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import Profile, ProfileKind
from pricer.engines.monte_carlo import Sample, SamplingSettings, prepare, sample
from pricer.engines.problem import EuropeanProblem
from pricer.market.joint_lognormal import JointLognormal

CALL = Profile(ProfileKind.CALL, 100.0).payoff()


def problem(n: int = 4, aggregate: Aggregate | None = None) -> EuropeanProblem:
    law = JointLognormal.from_volatilities(
        np.linspace(90, 110, n), np.linspace(0.2, 0.4, n), 0.4 + 0.6 * np.eye(n), 1.0
    )
    return EuropeanProblem(law, aggregate or Aggregate.weighted_sum((1.0 / n,) * n), CALL, 0.97)


def drawn(p: EuropeanProblem, group: str = "T-1", seed: int = 5, value: float = 1e-2, delta: float = 1e-1, **settings):
    chosen = SamplingSettings(**settings)
    return sample(p, group=group, seed=seed, value_tolerance=value, delta_tolerance=delta, settings=chosen)


def same(a: Sample, b: Sample) -> bool:
    return all(np.array_equal(getattr(a, f.name), getattr(b, f.name)) for f in fields(Sample))


PROBLEMS = [
    problem(3),
    problem(7),
    problem(5, Aggregate.worst_of(5)),
    problem(4, Aggregate.kth_best(2, 4)),
    problem(4, Aggregate.weighted_sum((1.0, -1.0, 0.5, -0.4))),
]


def test_the_same_request_gives_the_same_bits():
    assert all(same(drawn(p), drawn(p)) for p in PROBLEMS)


def test_bits_do_not_depend_on_order_or_threads():
    prepare()
    jobs = [(p, f"T-{i}") for i in range(6) for p in PROBLEMS]
    alone = [drawn(p, group) for p, group in jobs]
    backwards = [drawn(p, group) for p, group in reversed(jobs)][::-1]
    with ThreadPoolExecutor(4) as pool:
        threaded = list(pool.map(lambda job: drawn(*job), jobs))
    assert all(same(a, b) and same(a, c) for a, b, c in zip(alone, backwards, threaded, strict=True))


def test_another_seed_or_group_draws_other_paths():
    base = drawn(PROBLEMS[0])
    assert base.value != drawn(PROBLEMS[0], seed=6).value
    assert base.value != drawn(PROBLEMS[0], group="T-2").value


def test_a_tighter_tolerance_goes_on_from_the_same_points():
    coarse = drawn(PROBLEMS[0], maximum_points=1024)
    assert coarse.paths == 32 * 1024
    fine = drawn(PROBLEMS[0], value=coarse.standard_error / 3)
    again = drawn(PROBLEMS[0], value=0.0, delta=0.0, initial_points=1024, maximum_points=fine.paths // 32)
    assert fine.paths > coarse.paths
    assert fine.reached
    assert (fine.value, fine.standard_error) == (again.value, again.standard_error)


def test_the_ending_says_which_target_was_missed():
    assert drawn(PROBLEMS[2]).ending == "precision reached"
    missed = drawn(PROBLEMS[2], value=1e-9, delta=1e-9, maximum_points=2048)
    assert not missed.reached
    assert missed.ending == (
        f"budget of points spent: standard error {missed.standard_error:.2g} against 1e-09, "
        f"standard error of a log-delta {np.max(missed.log_delta_errors):.2g} against 1e-09"
    )


def test_both_targets_hold_when_precision_is_reached():
    s = drawn(PROBLEMS[2], value=5e-3, delta=2e-2)
    assert s.reached
    assert s.standard_error <= 5e-3
    assert np.max(s.log_delta_errors) <= 2e-2


@pytest.mark.parametrize("ordering", ["principal components", "cholesky", "automatic"])
def test_orderings_agree(ordering):
    reference = drawn(PROBLEMS[1], value=1e-4)
    other = drawn(PROBLEMS[1], value=1e-4, seed=11, ordering=ordering)
    assert abs(other.value - reference.value) < 5 * np.hypot(other.standard_error, reference.standard_error)


def test_paths_are_counted_over_all_randomisations():
    s = drawn(PROBLEMS[0], randomisations=8, initial_points=512, maximum_points=512)
    assert (s.paths, s.randomisations, s.degrees_of_freedom) == (8 * 512, 8, 6)


COVERED = {
    # a forward's control leaves 30 of 32 degrees of freedom, ranked aggregates use 31
    "margrabe": (Aggregate.weighted_sum((1.0, -1.0)), Profile(ProfileKind.EXCHANGE).payoff()),
    "best of two as an exchange": (Aggregate.best_of(2), Profile(ProfileKind.FORWARD, 0.0).payoff()),
}


@pytest.mark.parametrize("case", COVERED)
def test_intervals_cover_the_truth_as_often_as_they_claim(case):
    # 300 seeds, two-sided 95 %: binomial deviation 1.26 %, four of them below
    aggregate, payoff = COVERED[case]
    f, s, rho = np.array([100.0, 96.0]), np.array([0.3, 0.2]), 0.4
    law = JointLognormal(f, np.outer(s, s) * np.array([[1.0, rho], [rho, 1.0]]))
    v = np.sqrt(s @ s - 2 * rho * s[0] * s[1])
    exchange = ql.blackFormula(ql.Option.Call, f[1], f[0], v)
    cumulative = ql.CumulativeNormalDistribution()
    want = {"margrabe": exchange, "best of two as an exchange": f[1] + exchange}[case]
    first_delta = f[0] * cumulative(np.log(f[0] / f[1]) / v + v / 2)
    hits = np.zeros(2)
    for seed in range(300):
        got = drawn(EuropeanProblem(law, aggregate, payoff, 1.0), seed=seed, initial_points=64, maximum_points=64)
        limit = student.ppf(0.975, got.degrees_of_freedom)
        hits += [
            abs(got.value - want) < limit * got.standard_error,
            abs(got.log_deltas[0] - first_delta) < limit * got.log_delta_errors[0],
        ]
    # errors are widened for skewness, and a ranked delta's is held above that of one point on the wrong side
    assert np.all(hits / 300 > 0.95 - 4 * 0.0126)
    assert hits[0] / 300 < 0.995
