"""What must hold between path-dependent trades whatever the market."""

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.paths.law import PathLaw
from pricer.engines.paths.leg import Event, Fixing, Leg, Payment, Trigger, When
from pricer.engines.paths.plan import PathProblem
from pricer.engines.paths.sample import PathSettings, sample_paths
from tests.unit.barrier_legs import knocked_in, knocked_out, observed_knock_in
from tests.unit.note_legs import Observation
from tests.unit.note_legs import autocallable as leg_of
from tests.unit.path_cases import CALL, PUT, df, law_of, reading

LAW = law_of(m=6)
WORST = reading(Aggregate.worst_of(3))
BEST = reading(Aggregate.best_of(3))
LAST = 5
FINAL = PiecewiseLinear(0.0, 1.0, (0.65,), (-1.0,), (0.35,))
DATES = range(6)


def sample(*legs, law=LAW, points=256):
    settings = PathSettings(initial_points=points, maximum_points=points)
    return sample_paths(PathProblem(law, legs), group="property", seed=2, value_tolerance=0.0, settings=settings)


def worth(*legs, **kwargs):
    return sample(*legs, **kwargs).value


def put(when=When.SURVIVING, payoff=PUT, on=WORST):
    return Payment(payoff, df(LAW, LAST), when, on)


def note(trigger=1.0, coupon=0.05, coupon_level=0.8, memory=False, final=FINAL):
    seen = [Observation(j, df(LAW, j), trigger, 1.0, coupon_level, coupon) for j in DATES]
    return leg_of(seen, WORST, final, memory=memory)


@pytest.mark.parametrize("sides", [{"below": 0.8}, {"above": 1.2}, {"above": 1.15, "below": 0.7}])
@pytest.mark.parametrize("payoff", [CALL, PUT])
def test_knocked_in_and_knocked_out_make_the_plain_option(sides, payoff):
    triggers = {side: Trigger(WORST, level) for side, level in sides.items()}
    end = put(payoff=payoff)
    both = (knocked_out(end, LAST, DATES, **triggers), *knocked_in(end, LAST, DATES, **triggers))
    plain = Leg((Event(LAST, payments=(put(When.ALIVE, payoff),)),))
    found, whole = sample(*both), sample(plain)
    # the same draws: they differ by rounding alone
    assert found.value == pytest.approx(whole.value, abs=1e-10)
    assert found.log_deltas == pytest.approx(whole.log_deltas, abs=1e-6)


def test_a_note_that_is_never_called_is_its_coupons_and_its_redemption():
    seen = [Observation(j, df(LAW, j), 1e6, 1.0, None, 0.01) for j in DATES]
    called = leg_of(seen, WORST, FINAL)
    bond = Leg(tuple(Event(j, payments=(Payment.fixed(0.01, df(LAW, j), When.ALIVE),)) for j in DATES))
    option = Leg((Event(LAST, payments=(put(When.ALIVE, FINAL),)),))
    assert worth(called) == pytest.approx(worth(bond, option), abs=1e-9)


def test_a_note_that_is_called_at_once_pays_its_first_redemption():
    found = sample(note(trigger=1e-6, coupon=0.0))
    assert found.value == pytest.approx(df(LAW, 0), abs=1e-9)
    assert found.legs[0].life == pytest.approx(LAW.times[0], abs=1e-9)
    assert found.log_deltas == pytest.approx(np.zeros(3), abs=1e-9)


def test_values_are_monotone_in_trigger_coupon_and_barrier():
    levels = [0.85, 0.95, 1.05, 1.15]
    out = [worth(knocked_out(put(), LAST, DATES, below=Trigger(WORST, level - 0.2))) for level in levels]
    assert np.all(np.diff(out) < 0.0)
    into = [worth(*knocked_in(put(), LAST, DATES, below=Trigger(WORST, level - 0.2))) for level in levels]
    assert np.all(np.diff(into) > 0.0)
    coupons = [worth(note(coupon=c)) for c in (0.0, 0.02, 0.04)]
    assert np.all(np.diff(coupons) > 0.0)
    coupon_levels = [worth(note(coupon_level=c)) for c in (0.6, 0.7, 0.8)]
    assert np.all(np.diff(coupon_levels) < 0.0)
    called = [sample(note(trigger=t)).legs[0].stopped_above for t in levels]
    assert np.all(np.diff(called) < 0.0)


def test_memory_is_worth_something_and_no_more_than_sure_coupons():
    with_memory, without = worth(note(memory=True)), worth(note())
    assert without < with_memory < worth(note(coupon_level=None))


def test_stops_and_survivors_make_one():
    triggers = {"above": Trigger(BEST, 1.25), "below": Trigger(WORST, 0.75)}
    end = Payment.fixed(1.0, 1.0, When.SURVIVING)
    leg = sample(knocked_out(end, LAST, DATES, **triggers)).legs[0]
    assert leg.stopped_above + leg.stopped_below + leg.value == pytest.approx(1.0, abs=1e-9)
    assert 0.0 < leg.life < LAW.times[-1]


def test_a_rebate_at_the_end_is_worth_less_than_at_the_hit():
    trigger = Trigger(WORST, 0.8)
    nothing = Payment.fixed(0.0, df(LAW, LAST), When.SURVIVING)
    hit = {j: df(LAW, j) for j in DATES}
    late = sample(knocked_out(nothing, LAST, DATES, below=trigger, rebate=1.0))
    early = sample(knocked_out(nothing, LAST, DATES, below=trigger, rebate=1.0, rebate_discount_factors=hit))
    assert late.value == pytest.approx(df(LAW, LAST) * late.legs[0].stopped_below, rel=1e-9)
    assert late.value < early.value < late.legs[0].stopped_below


def test_an_observed_knock_in_lies_between_never_and_always():
    main = Leg(
        tuple(Event(j, Trigger(WORST, 1.0), None, (Payment.fixed(1.0, df(LAW, j), When.STOPPED_ABOVE),)) for j in DATES)
    )
    touched = PiecewiseLinear(0.0, 1.0, (1.0,), (-1.0,), (0.0,))
    whole = PiecewiseLinear(1.0, 0.0)
    end = put()
    never, some, often, always = (
        worth(*observed_knock_in(main, Trigger(WORST, level), DATES, touched, whole, end))
        for level in (0.01, 0.6, 0.8, 50.0)
    )
    assert never > some > often > always


def test_an_average_of_one_fixing_is_that_fixing():
    basket = reading(Aggregate.weighted_sum((0.5, 0.3, 0.2)))
    averaged = Leg(
        (Event(LAST, payments=(Payment(CALL, 0.9, When.ALIVE, basket, averaged=True),), fixing=Fixing(basket, 1.0)),)
    )
    plain = Leg((Event(LAST, payments=(Payment(CALL, 0.9, When.ALIVE, basket),)),))
    found, whole = sample(averaged), sample(plain)
    assert found.value == pytest.approx(whole.value, rel=1e-9)
    assert found.log_deltas == pytest.approx(whole.log_deltas, rel=1e-6)


def test_relabelling_the_assets_relabels_the_deltas():
    turn = np.array([2, 0, 1])
    law = PathLaw(LAW.times, LAW.forwards[:, turn], LAW.covariances[:, turn][:, :, turn])
    here, there = sample(note(), points=4096), sample(note(), law=law, points=4096)
    # other coordinates for other assets, so equal up to sampling only
    assert there.value == pytest.approx(here.value, abs=5.0 * np.hypot(here.standard_error, there.standard_error))
    error = np.hypot(here.log_delta_errors[turn], there.log_delta_errors)
    assert np.all(np.abs(there.log_deltas - here.log_deltas[turn]) < 5.0 * error)


def test_an_observation_tomorrow_does_not_unsettle_deltas():
    times = np.array([1.0 / 365.0, 0.5, 1.0])
    near = PathLaw.constant(times, np.full(3, 100.0), np.zeros(3), np.array([0.2, 0.3, 0.25]), 0.5 + 0.5 * np.eye(3))
    seen = [Observation(j, 1.0, 1.0, 1.0) for j in range(3)]
    found = sample(leg_of(seen, WORST, FINAL), law=near, points=4096)
    assert np.all(found.log_delta_errors < 0.02 * np.abs(found.log_deltas).max())
