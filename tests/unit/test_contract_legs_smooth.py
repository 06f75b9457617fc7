"""Contracts as legs under lognormal levels: against closed forms, against contracts shown simulated prices, bumps."""

from dataclasses import replace
from datetime import timedelta

import numpy as np
import pytest
from scipy.special import ndtr

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.average import Average
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.contract import Contract
from pricer.contracts.coupons import Coupon, Coupons
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.levels import Levels
from pricer.contracts.notes import autocallable, knock_in
from pricer.contracts.observation import Observation
from pricer.contracts.performance_sum import PerformanceSum
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction, Trigger
from pricer.engines.closed_form.barrier import Corridor, WatchedLevel, knock_out
from pricer.engines.contract_legs.drawing import draw
from pricer.engines.contract_legs.mapping import contract_legs
from pricer.engines.contract_legs.result import ContractLegs, NotAsLegs
from pricer.engines.contract_legs.smooth import smooth_value
from pricer.engines.contract_legs.thinned import two_levels
from pricer.engines.model_value import Asked
from pricer.engines.paths.law import PathLaw
from pricer.engines.paths.plan import PathProblem
from pricer.engines.paths.sample import PathSettings, sample_paths
from tests.unit.contract_terms_cases import NAMES, SPOTS, quarter, seen, simulated, terms_of
from tests.unit.seasoned_contracts import week

CALL = Profile(ProfileKind.CALL, 1.0)


def asked(value=1e-4, delta=1e-3):
    return Asked("test", 1, value, delta, 0.0)


def valued(terms, precision=1e-4, delta=1e-3, **settings):
    legs = contract_legs(terms)
    assert isinstance(legs, ContractLegs), legs
    return smooth_value(terms, legs, asked(precision, delta), PathSettings(**settings), ())


def on(n, aggregate, features=(), payout=CALL, statistic=None, references=None):
    levels = Levels(NAMES[:n], (100.0,) * n) if references is None else references
    statistic = statistic or ExpiryLevel(quarter(4), aggregate)
    return Contract(levels, statistic, payout, seen(4), tuple(features))


def note(memory=True, daily=False):
    worst = Aggregate.worst_of(3)
    calls = [seen(k) for k in range(1, 5)]
    rows = tuple(Coupon(c.day, c.payment_date, 0.03, 0.8) for c in calls)
    watched = [Observation(week(k), week(k)) for k in range(1, 53)] if daily else calls[-1:]
    return autocallable(
        Levels(NAMES, tuple(SPOTS)), worst, calls[-1], calls, (1.0, 0.97, 0.94, 0.91), (1.0,) * 4,
        Redemption(put_strike=1.0), Coupons(rows, Trigger(Direction.UP, worst), memory), knock_in(worst, watched, 0.75),
    )  # fmt: skip


CASES = {
    "note with memory": note(),
    "note watched weekly": note(memory=False, daily=True),
    "average of a basket": on(
        3, None, statistic=Average(tuple(week(k) for k in range(4, 53, 4)), Aggregate.weighted_sum((0.5, 0.3, 0.2)))
    ),
    "cliquet": on(
        2,
        None,
        payout=Profile(ProfileKind.FORWARD, 0.0),
        statistic=PerformanceSum(
            tuple(quarter(k) for k in range(1, 5)),
            Aggregate.worst_of(2),
            Profile(ProfileKind.FORWARD, 1.0, floor=-0.03, cap=0.05),
        ),
    ),
    "forward start": on(
        2, Aggregate.best_of(2), references=Levels(NAMES[:2], None, (quarter(1),)), payout=CALL
    ),
    "up and out with a rebate at hit": on(
        2,
        Aggregate.weighted_sum((0.5, 0.5)),
        (
            Barrier(
                BarrierKind.OUT, Trigger.any_underlying(Direction.UP, 2, (1.3, 1.4)), tuple(map(seen, range(1, 5))),
                (1.0,) * 4, rebate_at_hit=0.05,
            ),
        ),
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", CASES)
def test_smooth_values_are_those_of_contracts_shown_simulated_prices(name):
    terms = terms_of(CASES[name])
    found = valued(terms, precision=2e-4, delta=1.0)
    value, error = simulated(terms, paths=400)
    assert abs(found.sample.value - value) < 3.5 * np.hypot(error, found.sample.standard_error)
    assert found.sample.standard_error < 2e-4


def test_decided_amounts_are_part_of_the_value():
    terms = terms_of(CASES["cliquet"])
    more = valued(replace(terms, known_value=0.25), delta=1.0)
    assert more.sample.value - valued(terms, delta=1.0).sample.value == pytest.approx(0.25, abs=1e-14)


@pytest.mark.parametrize("name", ["note with memory", "forward start", "average of a basket"])
def test_deltas_and_vegas_are_those_of_moved_markets(name):
    contract = CASES[name]
    found = valued(terms_of(contract), precision=2e-5, delta=1e-4, maximum_points=2**13)
    n = len(contract.underlyings)
    for i in range(n):
        values = []
        for sign in (1.0, -1.0):
            spots = SPOTS.copy()
            spots[i] *= 1.0 + 0.005 * sign
            moved = terms_of(contract, spots=spots)
            values.append(valued(moved, precision=1e-9, maximum_points=2**12, with_ratios=False).sample.value)
        bumped = (values[0] - values[1]) / (0.01 * SPOTS[i])
        assert found.ratios.deltas[i] == pytest.approx(bumped, abs=4.0 * found.ratios.delta_errors[i] + 2e-5)
    up, down = (
        valued(terms_of(contract).with_volatility_moved(0, by), 1e-9, maximum_points=2**12, with_ratios=False)
        for by in (0.01, -0.01)
    )
    bumped = 0.5 * (up.sample.value - down.sample.value)
    assert found.ratios.vegas[0] == pytest.approx(bumped, abs=5.0 * found.ratios.vega_errors[0] + 2e-5)


def test_vegas_of_a_single_call_are_those_of_black_scholes():
    contract = Contract(Levels(NAMES[:1], (100.0,)), ExpiryLevel(quarter(4), Aggregate.weighted_sum((1.0,))), CALL,
                        seen(4), (Coupons((Coupon(quarter(1), quarter(1), 0.01),)),))  # fmt: skip
    terms = terms_of(contract)
    found = valued(terms, precision=1e-6, maximum_points=2**13)
    deviation = float(np.sqrt(terms.covariances[:, 0, 0].sum()))
    df, forward = terms.discount(seen(4).payment_date), terms.forwards[-1, 0] / 100.0
    coupon = 0.01 * terms.discount(quarter(1))
    d1 = np.log(forward) / deviation + 0.5 * deviation
    call = forward * ndtr(d1) - ndtr(d1 - deviation)  # Black 1976
    assert found.headline.value == pytest.approx(df * call + coupon, abs=4.0 * found.sample.standard_error)
    assert found.sample.standard_error < 5e-6
    vega = df * forward * np.exp(-0.5 * d1**2) / np.sqrt(2.0 * np.pi) * np.sqrt(terms.years) * 0.01
    assert found.ratios.vegas[0] == pytest.approx(vega, rel=1e-4)


@pytest.mark.parametrize(
    ("direction", "level", "bar"),
    [(Direction.DOWN, 0.85, 1e-4), (Direction.UP, 1.25, 4e-4), (Direction.DOWN, 0.70, 5e-5)],
)
def test_a_barrier_watched_at_all_times_is_met_with_the_correction_for_dates(direction, level, bar):
    """Reflection (Merton 1973; Reiner & Rubinstein 1991) against weekly dates corrected by Broadie, Glasserman & Kou.

    What is left (``bar``) is of second order in a week's deviation; a call cut off where it pays most shows most.
    """
    days = tuple(Observation(week(k), week(k)) for k in range(1, 53))
    single = Aggregate.weighted_sum((1.0,))
    gaps = {}
    for continuous in (True, False):
        watched = Barrier(
            BarrierKind.OUT, Trigger(direction, single), days, (level,) * len(days), continuous=continuous
        )
        contract = on(1, single, (watched,))
        terms = terms_of(contract, spots=np.array([100.0]))
        corridor = Corridor(lower=level) if direction is Direction.DOWN else Corridor(upper=level)
        deviation = float(np.sqrt(terms.covariances.sum()))
        exact = knock_out(WatchedLevel(1.0, terms.forwards[-1, 0] / 100.0, deviation), corridor, CALL.payoff()).value
        exact *= terms.discount(seen(4).payment_date)
        gaps[continuous] = abs(valued(terms, precision=2e-5, delta=1.0).sample.value - exact)
    assert gaps[True] < bar
    assert gaps[True] < 0.2 * gaps[False]


def test_a_barrier_that_all_underlyings_share_has_the_correction_of_each():
    """Of equal underlyings that move as one, any of them is the first."""
    days = tuple(Observation(week(k), week(k)) for k in range(1, 53))
    values = []
    for n in (1, 2):
        trigger = Trigger.any_underlying(Direction.DOWN, n)
        watched = Barrier(BarrierKind.OUT, trigger, days, (0.85,) * 52, continuous=True)
        terms = terms_of(on(n, Aggregate.worst_of(n), (watched,)), spots=np.array([100.0, 100.0]))
        shared = terms.covariances[:, :1, :1] * np.ones((1, n, n))
        same = replace(terms, covariances=shared, forwards=terms.forwards[:, :1] * np.ones((1, n)))
        values.append(valued(same, precision=2e-5, delta=np.inf).sample.value)
    assert values[0] == pytest.approx(values[1], abs=1e-6)


def test_life_tells_calls_by_date_and_the_chance_of_a_knock_in():
    terms = terms_of(CASES["note watched weekly"])
    found = valued(terms).life
    assert found is not None
    assert [end.day for end in found.ends] == [quarter(k) for k in range(1, 5)]
    assert {end.what for end in found.ends} == {"called"}
    survive = 1.0 - sum(end.probability for end in found.ends)
    years = {day: t for day, t in zip(terms.dates, terms.times, strict=True)}
    expected = sum(end.probability * years[end.day] for end in found.ends) + survive * terms.years
    assert found.expected_life == pytest.approx(expected, abs=1e-9)
    assert 0.05 < found.knocked < 0.6


def test_what_needs_another_engine_says_so():
    terms = terms_of(CASES["average of a basket"], floors=2.0)
    legs = contract_legs(terms)
    with pytest.raises(ValueError, match="cash dividends"):
        smooth_value(terms, legs, asked(), PathSettings(), ())
    worst_of_means = on(2, None, statistic=Average((quarter(1), quarter(2)), Aggregate.worst_of(2)))
    assert contract_legs(terms_of(worst_of_means)) == NotAsLegs(
        "the underlyings are averaged one by one before they are ranked or multiplied"
    )
    spread = contract_legs(terms_of(on(2, Aggregate.weighted_sum((1.0, -1.0)), (coupon(),))))
    assert spread.has_signed_weights


def coupon():
    return Coupons((Coupon(quarter(1), quarter(1), 0.01),))


@pytest.mark.parametrize("memory", [False, True])
def test_two_levels_have_the_value_and_deltas_of_all_dates(memory):
    worst, days = Aggregate.worst_of(2), [Observation(week(0) + timedelta(days=d), week(60)) for d in range(1, 365)]
    calls = [seen(k) for k in range(1, 5)]
    rows = tuple(Coupon(c.day, c.payment_date, 0.03, 0.8) for c in calls)
    contract = autocallable(
        Levels(NAMES[:2], (100.0, 100.0)), worst, calls[-1], calls, (1.05,) * 4, (1.0,) * 4,
        Redemption(put_strike=1.0), Coupons(rows, Trigger(Direction.UP, worst), memory), knock_in(worst, days, 0.75),
    )  # fmt: skip
    terms = terms_of(contract)
    legs = contract_legs(terms)
    problem = PathProblem(PathLaw(terms.times, terms.forwards, terms.covariances), legs.legs)
    assert len(two_levels(problem).coarse.law.times) < 50
    found = draw(problem, asked(1e-4, 1e-3), PathSettings())
    points = PathSettings(initial_points=1024, maximum_points=1024)
    whole = sample_paths(problem, group="whole", seed=2, value_tolerance=0.0, settings=points)
    assert len(found.parts) == 2
    assert found.standard_error < 1e-4
    assert abs(found.parts[1].value) < 2e-3  # what the dates left out would have cost
    assert abs(found.value - whole.value) < 4.0 * np.hypot(found.standard_error, whole.standard_error)
    errors = np.hypot(found.log_delta_errors, whole.log_delta_errors)
    assert np.all(np.abs(found.log_deltas - whole.log_deltas) < 4.0 * errors)
    hits = [legs.life_of(sampled, terms.dates) for sampled in (found.legs, whole.legs)]
    assert abs(hits[0].knocked - hits[1].knocked) < 4.0 * np.hypot(hits[0].knocked_error, hits[1].knocked_error)
    assert hits[0].expected_life == pytest.approx(hits[1].expected_life, abs=0.005)
