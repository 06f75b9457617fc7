"""The overhedge books payouts that are nowhere better for the desk; on which side that is follows from the terms."""

from __future__ import annotations

from dataclasses import replace
from datetime import date

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pricer.contracts.ageing import start, walk
from pricer.contracts.aggregate import Aggregate
from pricer.contracts.autocall import Autocall
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.coupons import Coupon, Coupons
from pricer.contracts.exercise import Exercise, ExercisedBy
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.option import EuropeanOption
from pricer.contracts.overhedge import STEPS, Overhedge, overhedged
from pricer.contracts.profile import PiecewiseLinear, Profile, ProfileKind
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction, Trigger
from tests.unit.seasoned_contracts import contract, observed, week

WORST = Aggregate.worst_of(2)
UP, DOWN = Trigger(Direction.UP, WORST), Trigger(Direction.DOWN, WORST)
LEVELS = np.linspace(0.0, 2.0, 801)
PUT = Redemption(put_strike=1.0)  # a note's capital less a put


def european(profile):
    return EuropeanOption(("ORLUMA", "VESKA"), (1.0, 1.0), WORST, profile, week(4), week(5), True)


def hedge(spread=0.0, shift=0.0):
    return Overhedge(spread, shift)


def barrier(kind, **changes):
    schedule = (observed(1), observed(2), observed(3))
    return Barrier(kind, DOWN, schedule, (0.6,) * 3, **changes)


def paid(trade, path):
    """The sum of all payments on a path of the worst performance, at weeks 0, 1, ...; both underlyings move alike."""
    found = walk(trade, start(trade), trade.dates, np.array([[100.0 * path[day]] * 2 for day in trade.dates]))
    assert not found.gaps
    return sum(payment.amount for payment in found.progress.payments)


@pytest.mark.parametrize("kind", [kind for kind in ProfileKind if "digital" in kind])
@pytest.mark.parametrize("long", [True, False])
def test_the_spread_of_a_digital_is_nowhere_better_for_the_desk_and_reaches_no_further_than_its_width(kind, long):
    plain = european(Profile(kind, 1.0))
    (safer,) = overhedged(plain, hedge(0.05), long=long)
    side = 1.0 if long else -1.0
    gap = side * (safer.profile.payoff()(LEVELS) - plain.profile.payoff()(LEVELS))
    assert np.max(gap) <= 1e-12
    assert np.min(gap) < -0.9  # close to the jump nearly all of it is given up
    assert np.all(np.abs(gap[np.abs(LEVELS - 1.0) > 0.05 + 1e-12]) < 1e-12)
    assert safer.profile.payoff().is_continuous


def test_a_long_digital_call_is_booked_as_the_call_spread_above_its_strike():
    (safer,) = overhedged(
        european(Profile(ProfileKind.CASH_DIGITAL_CALL, 1.0, cash_amount=3.0)), hedge(0.04), long=True
    )
    spread = 3.0 / 0.04 * (np.maximum(LEVELS - 1.0, 0.0) - np.maximum(LEVELS - 1.04, 0.0))
    np.testing.assert_allclose(safer.profile.payoff()(LEVELS), spread, atol=1e-12)


def test_a_short_digital_call_is_booked_as_the_call_spread_below_its_strike():
    (safer,) = overhedged(european(Profile(ProfileKind.CASH_DIGITAL_CALL, 1.0)), hedge(0.04), long=False)
    spread = (np.maximum(LEVELS - 0.96, 0.0) - np.maximum(LEVELS - 1.0, 0.0)) / 0.04
    np.testing.assert_allclose(safer.profile.payoff()(LEVELS), spread, atol=1e-12)


@given(
    st.lists(st.tuples(st.floats(-3.0, 3.0), st.floats(-2.0, 2.0)), min_size=1, max_size=4),
    st.floats(-0.2, 0.2).filter(lambda share: abs(share) > 1e-3),
)
@settings(max_examples=100, deadline=None)
def test_ramps_stay_on_their_side_of_any_jumps(jumps, share):
    knots = tuple(sorted({round(knot, 2) for knot, _ in jumps}))
    f = PiecewiseLinear(0.3, -0.2, knots, (0.7,) * len(knots), tuple(jump for _, jump in jumps[: len(knots)]))
    levels = np.linspace(-5.0, 5.0, 2001) + 1e-7
    gap = f.ramped(share)(levels) - f(levels)
    assert np.max(np.sign(share) * gap) <= 1e-9
    assert not any(jump for knot, jump in zip(f.ramped(share).knots, f.ramped(share).jumps, strict=True) if knot)


def test_a_payout_without_jumps_is_left_alone():
    plain = european(Profile(ProfileKind.CALL, 1.0))
    assert overhedged(plain, hedge(0.05, 0.05), long=True) == (plain,)


def test_an_overhedge_of_nothing_changes_nothing():
    trade = contract(
        Coupons((Coupon(week(1), week(1), 0.1, level=0.9),), UP),
        Autocall((observed(1), observed(2)), UP, (1.0, 0.9), (1.0, 1.0)),
        barrier(BarrierKind.IN, instead=Redemption()),
        payout=PUT,
    )
    assert overhedged(trade, hedge(), long=True) == (trade,)


@pytest.mark.parametrize(("long", "level"), [(True, 0.66), (False, 0.54)])
def test_the_knock_in_of_a_notes_put_comes_sooner_for_a_long_desk_and_later_for_a_short_one(long, level):
    trade = contract(barrier(BarrierKind.IN, instead=Redemption()), payout=PUT)
    (safer,) = overhedged(trade, hedge(shift=0.1), long=long)
    assert safer.features[0].levels == pytest.approx((level,) * 3)


@pytest.mark.parametrize(("kind", "long", "level"), [
    (BarrierKind.IN, True, 0.54), (BarrierKind.IN, False, 0.66),
    (BarrierKind.OUT, True, 0.66), (BarrierKind.OUT, False, 0.54),
])  # fmt: skip
def test_the_barrier_of_an_option_moves_against_the_desk(kind, long, level):
    trade = contract(barrier(kind), payout=Profile(ProfileKind.PUT, 1.0))
    (safer,) = overhedged(trade, hedge(shift=0.1), long=long)
    assert safer.features[0].levels == pytest.approx((level,) * 3)


@pytest.mark.parametrize(("direction", "sooner"), [(Direction.UP, 0.9), (Direction.DOWN, 1.1)])
def test_sooner_is_below_for_an_upward_barrier_and_above_for_a_downward_one(direction, sooner):
    out = Barrier(BarrierKind.OUT, Trigger(direction, WORST), (observed(1),), (1.0,))
    (safer,) = overhedged(contract(out, payout=Profile(ProfileKind.CALL, 1.0)), hedge(shift=0.1), long=True)
    assert safer.features[0].levels == pytest.approx((sooner,))


def test_a_negative_barrier_moves_by_its_size():
    spread = Trigger(Direction.UP, Aggregate.weighted_sum((1.0, -1.0)))
    out = Barrier(BarrierKind.OUT, spread, (observed(1),), (-0.5,))
    (safer,) = overhedged(contract(out, payout=Profile(ProfileKind.CALL, 1.0)), hedge(shift=0.1), long=True)
    assert safer.features[0].levels == pytest.approx((-0.55,))


def test_where_a_hit_may_gain_or_lose_both_directions_are_booked():
    rebate = barrier(BarrierKind.OUT, instead=Redemption(capital=0.05))  # better than a put near the strike, else worse
    trade = contract(rebate, payout=Profile(ProfileKind.PUT, 1.0))
    found = overhedged(trade, hedge(shift=0.1), long=True)
    assert sorted(other.features[0].levels[0] for other in found) == pytest.approx([0.54, 0.66])


def test_a_knock_out_without_rebate_surely_loses_where_nothing_negative_can_be_paid():
    trade = contract(barrier(BarrierKind.OUT, rebate_at_hit=0.0), payout=Profile(ProfileKind.PUT, 1.0))
    assert [other.features[0].levels[0] for other in overhedged(trade, hedge(shift=0.1), long=True)] == pytest.approx(
        [0.66]
    )
    forward = replace(trade, payout=Profile(ProfileKind.FORWARD, 1.0))
    assert len(overhedged(forward, hedge(shift=0.1), long=True)) == 2
    paying = contract(barrier(BarrierKind.OUT, rebate_at_hit=0.01), payout=Profile(ProfileKind.PUT, 1.0))
    assert len(overhedged(paying, hedge(shift=0.1), long=True)) == 2


def test_a_call_is_moved_both_ways_all_its_dates_together():
    trade = contract(Autocall((observed(1), observed(2)), UP, (1.0, 0.9), (1.0, 1.0)), payout=PUT)
    later, sooner = sorted(
        (other.features[0].levels for other in overhedged(trade, hedge(shift=0.02), long=True)), reverse=True
    )
    assert later == pytest.approx((1.02, 0.918))
    assert sooner == pytest.approx((0.98, 0.882))


def test_two_doubts_make_four_contracts():
    trade = contract(
        Autocall((observed(1),), UP, (1.0,), (1.0,)),
        barrier(BarrierKind.OUT, instead=Redemption(capital=0.05)),
        payout=Profile(ProfileKind.PUT, 1.0),
    )
    assert len(overhedged(trade, hedge(shift=0.1), long=True)) == 4


@pytest.mark.parametrize("long", [True, False])
def test_a_coupon_becomes_a_staircase_that_is_nowhere_better_for_the_desk(long):
    trade = contract(Coupons((Coupon(week(2), week(2), 0.3, level=0.9),), UP), payout=Redemption())
    (safer,) = overhedged(trade, hedge(0.1), long=long)
    assert len(safer.features) == STEPS
    side = 1.0 if long else -1.0
    gaps = []
    for level in np.linspace(0.7, 1.1, 81):
        path = {week(2): level, week(4): 1.0}
        gaps.append(side * (paid(safer, path) - paid(trade, path)))
    assert max(gaps) <= 1e-12
    # As much is given up as by a ramp of that width: half the amount over the width of 0.09.
    assert sum(gaps) * 0.005 == pytest.approx(-0.5 * 0.3 * 0.09, rel=0.05)


def test_missed_coupons_in_memory_are_remembered_by_each_step():
    coupons = tuple(Coupon(week(k), week(k), 0.3, level=0.9) for k in (1, 2, 3))
    trade = contract(Coupons(coupons, UP, memory=True), payout=Redemption())
    (safer,) = overhedged(trade, hedge(0.1), long=True, after=week(1))
    path = {week(1): 0.8, week(2): 0.7, week(3): 1.2, week(4): 1.0}
    assert paid(safer, path) == pytest.approx(paid(trade, path)) == pytest.approx(1.9)
    assert all(feature.coupons[0].level == 0.9 for feature in safer.features)  # of the past: not moved


def test_an_accrual_keeps_the_days_that_have_passed_and_spreads_the_rest_of_its_period():
    days = tuple(week(k) for k in (1, 2, 3))
    accrual = Coupons((Coupon(week(3), week(3), 0.3, level=0.9, accrual_dates=days, ceiling=1.1),), UP)
    trade = contract(accrual, payout=Redemption())
    (safer,) = overhedged(trade, hedge(0.05), long=True, after=week(1))
    past, *steps = safer.features
    assert past.coupons[0].accrual_dates == days[:1]
    assert past.coupons[0].amount == pytest.approx(0.1)
    assert all(step.coupons[0].level > 0.9 and step.coupons[0].ceiling < 1.1 for step in steps)
    inside = {week(1): 0.91, week(2): 1.0, week(3): 1.0, week(4): 1.0}
    assert paid(safer, inside) == pytest.approx(paid(trade, inside))
    edge = {**inside, week(2): 0.901}
    assert paid(safer, edge) == pytest.approx(paid(trade, edge) - 0.1)


def test_what_has_happened_stays_as_it_was():
    trade = contract(
        Autocall((observed(1), observed(2)), UP, (1.0, 1.0), (1.0, 1.0)),
        barrier(BarrierKind.IN, instead=Redemption()),
        payout=PUT,
    )
    for safer in overhedged(trade, hedge(0.1, 0.1), long=True, after=week(1)):
        call, knock_in = safer.features
        assert call.levels[0] == 1.0
        assert call.levels[1] != 1.0
        assert knock_in.levels[0] == 0.6
        assert knock_in.levels[1] == pytest.approx(0.66)


def test_a_recorded_hit_leaves_nothing_to_move():
    trade = contract(barrier(BarrierKind.IN, instead=Redemption(), recorded_hit=observed(1)), payout=PUT)
    assert overhedged(trade, hedge(shift=0.1), long=True) == (trade,)


def test_the_payout_of_an_exercise_is_spread_like_the_final_one():
    digital = Profile(ProfileKind.CASH_DIGITAL_CALL, 1.0)
    right = Exercise(ExercisedBy.HOLDER, (observed(1), observed(2)), WORST, payout=digital)
    (safer,) = overhedged(contract(right, payout=digital), hedge(0.05), long=True)
    assert safer.payout.jump_ramp == safer.features[0].payout.jump_ramp == 0.05


@given(path=st.lists(st.floats(0.3, 1.5), min_size=4, max_size=4), long=st.booleans())
@settings(max_examples=200, deadline=None)
def test_on_any_path_the_safer_note_pays_the_desk_no_more(path, long):
    """Conditional coupons and a knock-in put, without calls: all directions are known."""
    coupons = Coupons(tuple(Coupon(week(k), week(k), 0.05, level=0.8) for k in (1, 2, 3)), UP)
    knock_in = barrier(BarrierKind.IN, instead=Redemption())
    digital = Profile(ProfileKind.ASSET_DIGITAL_CALL, 0.5, cap=1.0)
    trade = contract(coupons, knock_in, payout=digital, statistic=ExpiryLevel(week(4), WORST))
    (safer,) = overhedged(trade, hedge(0.06, 0.04), long=long)
    levels = {week(k + 1): level for k, level in enumerate(path)}
    side = 1.0 if long else -1.0
    assert side * (paid(safer, levels) - paid(trade, levels)) <= 1e-12


@pytest.mark.parametrize("shares", [(-0.01, 0.0), (0.0, 1.0)])
def test_shares_lie_from_0_to_below_1(shares):
    with pytest.raises(ValueError, match="an overhedge is a share of the level, from 0 to below 1"):
        Overhedge(*shares)


def test_dates_default_to_all():
    trade = contract(barrier(BarrierKind.IN, instead=Redemption()), payout=PUT)
    assert overhedged(trade, hedge(shift=0.1), long=True) == overhedged(
        trade, hedge(shift=0.1), long=True, after=date.min
    )
