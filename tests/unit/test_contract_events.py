"""The days ahead of a contract, and the distance to its triggers."""

import math
from datetime import date, timedelta

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.autocall import Autocall
from pricer.contracts.average import Average
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.coupons import Coupon, Coupons
from pricer.contracts.events import events
from pricer.contracts.exercise import Exercise, ExercisedBy
from pricer.contracts.levels import Levels
from pricer.contracts.life_cycle import as_of
from pricer.contracts.observation import Observation
from pricer.contracts.trigger import Direction, Trigger
from tests.unit.seasoned_contracts import NAMES, contract, fixings, observed, spots, week

WORST = Aggregate.worst_of(2)
VOLATILITIES = {"ORLUMA": 0.20, "VESKA": 0.30}
CORRELATION = np.array([[1.0, 0.5], [0.5, 1.0]])


def of(terms, until, *now, on=0, fixed=(), **market):
    return events(as_of(terms, week(on), fixings(fixed, 1), spots(*now)), week(until), **market)


def call_on(aggregate, level=1.0):
    return contract(Autocall((observed(1),), Trigger(Direction.UP, aggregate), (level,), (1.05,)))


def test_a_trigger_is_so_many_per_cent_and_deviations_away():
    (event,) = of(call_on(WORST), 1, 96.0, 80.0, volatilities=VOLATILITIES, correlations=CORRELATION)
    assert (event.what, event.amount, event.payment_date) == ("call", 1.05, observed(1).payment_date)
    assert (event.current, event.met_today) == (0.8, False)
    assert event.distance == pytest.approx(0.25)
    assert event.deviations == pytest.approx(math.log(1.25) / (0.30 * math.sqrt(7 / 365)))  # the worst is VESKA


def test_a_basket_has_its_own_deviation():
    basket = Aggregate.weighted_sum((0.5, 0.5))
    (event,) = of(call_on(basket), 1, 96.0, 80.0, volatilities=VOLATILITIES, correlations=CORRELATION)
    a, b = 0.5 * 0.96 * 0.20, 0.5 * 0.80 * 0.30
    size = math.sqrt(a * a + b * b + a * b) / 0.88
    assert event.deviations == pytest.approx(math.log(1.0 / 0.88) / (size * math.sqrt(7 / 365)))


def test_a_geometric_basket_of_equal_underlyings_has_their_deviation():
    geometric = Aggregate.geometric((0.5, 0.5))
    same = {"ORLUMA": 0.2, "VESKA": 0.2}
    (event,) = of(call_on(geometric), 1, 90.0, 90.0, volatilities=same, correlations=np.ones((2, 2)))
    assert event.deviations == pytest.approx(math.log(1.0 / 0.9) / (0.2 * math.sqrt(7 / 365)))


def test_a_spread_through_zero_is_measured_in_plain_differences():
    spread = Aggregate.weighted_sum((1.0, -1.0))
    (event,) = of(call_on(spread, 0.05), 1, 90.0, 100.0, volatilities=VOLATILITIES, correlations=CORRELATION)
    a, b = 0.9 * 0.20, -1.0 * 0.30
    assert event.distance == pytest.approx(1.5)  # from -0.10 up by 0.15
    assert event.deviations == pytest.approx(0.15 / (math.sqrt(a * a + b * b + a * b) * math.sqrt(7 / 365)))


def test_barrier_prices_by_underlying_are_measured_from_the_nearest():
    trigger = Trigger.any_underlying(Direction.DOWN, 2, scales=(0.6, 0.75))
    barrier = Barrier(BarrierKind.IN, trigger, (observed(1),), (1.0,))
    (event,) = of(contract(barrier), 1, 96.0, 80.0)
    assert event.current == pytest.approx(0.80 / 0.75)
    assert event.distance == pytest.approx(0.75 / 0.80 - 1.0)
    assert event.deviations is None  # no volatilities were given


def test_a_weeks_list_holds_every_kind_of_event_in_order_and_nothing_beyond():
    coupons = Coupons(
        (Coupon(week(1), observed(1).payment_date, 0.02), Coupon(week(2), observed(2).payment_date, 0.03, 0.9)),
        Trigger(Direction.UP, WORST),
        memory=True,
    )
    right = Exercise(ExercisedBy.ISSUER, (observed(2), observed(3)), WORST, amounts=(1.0, 1.0))
    terms = contract(coupons, right, weeks=3, statistic=Average((week(2), week(3)), WORST))
    found = of(terms, 3, 95.0, 95.0, on=1)
    assert [(event.day, event.what) for event in found] == [
        (observed(1).payment_date, "payment: coupon"),
        (week(2), "average observed"),
        (week(2), "coupon"),
        (week(2), "issuer may exercise"),
        (week(3), "average observed"),
        (week(3), "issuer may exercise"),
        (week(3), "expiry"),
    ]
    assert [event.met_today for event in found if event.what == "coupon"] == [True]
    assert len(of(terms, 2, 95.0, 95.0, on=1)) == 4


def test_an_ended_contract_has_its_payment_only():
    terms = contract(Autocall((observed(1),), Trigger(Direction.UP, WORST), (1.0,), (1.05,)))
    (event,) = of(terms, 9, 101.0, 101.0, on=1, fixed=[(101, 101)])
    assert (event.day, event.what, event.amount) == (observed(1).payment_date, "payment: call", 1.05)


def test_while_references_are_being_set_triggers_have_no_distance():
    levels = Levels(NAMES[:2], None, (week(1),))
    call = Autocall((observed(2),), Trigger(Direction.UP, WORST), (1.0,), (1.05,))
    first, second = of(contract(call, levels=levels), 2, 95.0, 95.0)
    assert (first.what, second.what, second.current) == ("reference set", "call", None)


def test_a_daily_series_is_one_event_with_the_deviations_to_its_last_day():
    days = [day for day in (week(0) + timedelta(days=i) for i in range(1, 28)) if day.weekday() < 5]
    trigger = Trigger(Direction.DOWN, WORST)
    barrier = Barrier(BarrierKind.IN, trigger, tuple(Observation(d, d) for d in days), (0.6,) * len(days))
    (event,) = of(contract(barrier), 1, 96.0, 80.0, volatilities=VOLATILITIES, correlations=CORRELATION)
    assert (event.day, event.last_day) == (date(2026, 1, 6), week(1))
    assert event.deviations == pytest.approx(math.log(0.75) / (0.30 * math.sqrt(7 / 365)))


def test_a_barrier_that_steps_starts_a_new_event():
    days = [week(0) + timedelta(days=i) for i in range(1, 5)]
    trigger = Trigger(Direction.DOWN, WORST)
    barrier = Barrier(BarrierKind.IN, trigger, tuple(Observation(d, d) for d in days), (0.6, 0.6, 0.5, 0.5))
    found = of(contract(barrier), 1, 96.0, 80.0)
    assert [(event.day, event.last_day, event.level) for event in found] == [
        (days[0], days[1], 0.6),
        (days[2], days[3], 0.5),
    ]
