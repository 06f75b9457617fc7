"""Refusals of ill-posed path problems, and the corners where no factor smooths."""

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.paths.algebra import difference
from pricer.engines.paths.law import PathLaw
from pricer.engines.paths.leg import Branch, Event, Fixing, Leg, Payment, Reading, Trigger, When
from pricer.engines.paths.plan import PathProblem, Tables
from pricer.engines.paths.sample import PathSettings, sample_paths
from pricer.simulation.common_steps import CommonSteps
from tests.unit.barrier_legs import knocked_out, observed_knock_in
from tests.unit.note_legs import Observation
from tests.unit.note_legs import autocallable as note
from tests.unit.path_cases import CALL, autocallable, law_of, reading

WORST = reading(Aggregate.worst_of(3))
SPREAD = Reading(Aggregate.weighted_sum((1.0, -1.0)), (1.0, 1.0))
ONE = Payment.fixed(1.0, 1.0, When.SURVIVING)


def sample(problem, points=256):
    settings = PathSettings(initial_points=points, maximum_points=points)
    return sample_paths(problem, group="unit", seed=1, value_tolerance=0.0, settings=settings)


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (lambda: Tables(PathProblem(law_of(n=2), (Leg((Event(0, Trigger(SPREAD, 1.0)),)),))), "one sign"),
        (lambda: Reading(Aggregate.weighted_sum((0.0, 0.0)), (1.0, 1.0)), "other than 0"),
        (lambda: Reading(Aggregate.worst_of(2), (1.0,)), "references"),
        (lambda: Reading(Aggregate.worst_of(2, cash=1.0), (1.0, 1.0)), "fold the cash"),
        (lambda: Leg(()), "increasing dates"),
        (lambda: Leg((Event(1), Event(1))), "increasing dates"),
        (lambda: Leg((Event(0),), branch=Branch(0, 1)), "has an event"),
        (lambda: Leg((Event(0, payments=(Payment(CALL, 1.0, When.ALIVE, WORST, True),)),)), "needs a fixing"),
        (lambda: PathProblem(law_of(), (Leg((Event(9),)),)), "after the law's last"),
        (lambda: PathProblem(law_of(), (Leg((Event(0),), branch=Branch(0, 0)),)), "must come before"),
        (lambda: PathLaw(np.array([0.0]), np.ones((1, 1)), np.ones((1, 1, 1))), "after today"),
        (lambda: PathLaw(np.array([1.0]), -np.ones((1, 1)), np.ones((1, 1, 1))), "positive"),
        (lambda: PathLaw(np.array([1.0]), np.ones((1, 2)), np.ones((1, 1, 1))), "do not fit"),
        (lambda: PathSettings(initial_points=100), "power of two"),
        (lambda: Tables(PathProblem(law_of(), (Leg((Event(0),)), Leg((Event(2),), branch=Branch(0, 1))))), "no event"),
        (lambda: Tables(PathProblem(law_of(n=2), (Leg((Event(0, Trigger(WORST, 1.0)),)),))), "3 references for 2"),
        (lambda: Tables(PathProblem(law_of(), (Leg((Event(0, fixing=Fixing(WORST, 0.0)),)),))), "share"),
        (
            lambda: Tables(
                PathProblem(law_of(), (Leg((Event(0, Trigger(reading(Aggregate.worst_of(3), since=0), 1.0)),)),))
            ),
            "needs an earlier one",
        ),
        (
            lambda: note([Observation(0, 1.0, 1.0, 1.0, None, 0.1)], WORST, CALL, memory=True),
            "needs no memory",
        ),
        (lambda: observed_knock_in(Leg((Event(1),)), Trigger(WORST, 0.5), [2], CALL, CALL, ONE), "after the last"),
    ],
)
def test_what_cannot_be_priced_is_refused(make, message):
    with pytest.raises(ValueError, match=message):
        make()


def test_a_leg_without_readings_is_its_payments():
    problem = PathProblem(law_of(), (Leg((Event(3, payments=(ONE,)),)),))
    found = sample(problem)
    assert found.value == 1.0
    assert found.standard_error < 1e-6


def test_a_sample_without_ratios_has_the_same_value():
    problem = PathProblem(law_of(), (autocallable(law_of()),))
    settings = PathSettings(initial_points=256, maximum_points=256, with_ratios=False)
    found = sample_paths(problem, group="unit", seed=1, value_tolerance=0.0, settings=settings)
    assert found.value == sample(problem).value
    assert np.all(np.isnan(found.log_deltas))


def test_without_a_common_factor_values_hold_and_deltas_are_missing():
    """Two assets that move exactly against each other: stops are taken as they fall."""
    correlation = np.array([[1.0, -1.0], [-1.0, 1.0]])
    law = PathLaw.constant(np.array([0.5, 1.0]), np.full(2, 100.0), np.zeros(2), np.full(2, 0.2), correlation)
    best = Reading(Aggregate.best_of(2), (100.0, 100.0))
    found = sample(PathProblem(law, (knocked_out(ONE, 1, [1], above=Trigger(best, 1.1)),)), points=4096)
    # alive at the end: |x| below ln(1.1) about its drift; the two best-of events exclude each other
    from scipy.special import ndtr

    bound = (np.log(1.1) + 0.02) / 0.2
    assert found.value == pytest.approx(2.0 * ndtr(bound) - 1.0, abs=5.0 * found.standard_error)
    assert np.all(np.isnan(found.log_deltas))
    assert "not available" in found.ending


def test_the_factor_of_the_path_leaves_a_covariance_and_no_more():
    law = law_of(m=8)
    steps = CommonSteps.of(law.times, law.covariances)
    lengths = np.diff(law.times, prepend=0.0)
    clock = np.cumsum(steps.common**2 * lengths)
    moves = np.minimum.outer(clock, clock)
    left = moves - np.outer(steps.shifts, steps.shifts)
    values = np.linalg.eigvalsh(left)
    assert abs(values[0]) < 1e-14  # as large as it can be: one direction is used up
    assert np.all(values[1:] > 0.0)
    # w has variance 1 and moves with the common moves as the shifts say
    per_step = steps.common**2 * lengths
    assert steps.projection**2 @ per_step == pytest.approx(1.0)
    assert np.cumsum(steps.projection * per_step) == pytest.approx(steps.shifts)
    # and the steps add up to what they were made of
    rest = np.einsum("tij,tkj->tik", steps.rest, steps.rest)
    whole = (rest + (steps.common**2)[:, None, None]) * lengths[:, None, None]
    assert whole == pytest.approx(law.covariances, abs=1e-12)


def test_independent_points_agree_with_low_discrepancy_ones():
    from pricer.simulation.path_sampler import PathSampler

    problem = PathProblem(law_of(), (autocallable(law_of()),))
    plan = Tables(problem).plan()
    stream = np.random.Generator(np.random.PCG64(2))
    means = PathSampler(plan, stream, 32, independent=True).extend(1024)[:, 0] / 1024
    found = sample(problem, points=1024)
    error = np.hypot(means.std(ddof=1) / np.sqrt(32), found.standard_error)
    assert means.mean() == pytest.approx(found.value, abs=4.0 * error)


def test_a_difference_of_profiles_is_the_difference_of_their_values():
    f = PiecewiseLinear(1.0, -0.5, (0.8, 1.2), (0.5, 1.0), (0.0, 0.3))
    g = PiecewiseLinear(0.2, 0.5, (0.8, 1.0), (0.5, -1.0), (0.0, 0.1))
    a = np.linspace(0.0, 2.0, 37)
    assert difference(f, g)(a) == pytest.approx(f(a) - g(a))
    assert difference(f, f).knots == ()
