"""Closed forms for contracts, beside the contracts' own payments on simulated prices and beside each other."""

from __future__ import annotations

from dataclasses import replace
from datetime import timedelta

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.autocall import Autocall
from pricer.contracts.average import Average, AverageOf
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.contract import Contract
from pricer.contracts.coupons import Coupon, Coupons
from pricer.contracts.exercise import Exercise, ExercisedBy
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.levels import Levels
from pricer.contracts.life_cycle import Status
from pricer.contracts.locked_in import LockedIn
from pricer.contracts.notes import autocallable, knock_in
from pricer.contracts.observation import Observation
from pricer.contracts.performance_sum import PerformanceSum
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.realised_correlation import RealisedCorrelation
from pricer.contracts.realised_variance import RealisedVariance
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction, Trigger
from pricer.engines.closed_form.contract_references import contract_references
from pricer.engines.problem import ReferenceKind
from tests.unit.contract_terms_cases import quarter, seen, simulated, terms_of, with_uneven_steps
from tests.unit.seasoned_contracts import NAMES, fixings, week

ONE, GEOMETRIC = Aggregate.weighted_sum((1.0,)), Aggregate.geometric((0.3, 0.3, 0.4))
WORST, BASKET = Aggregate.worst_of(3), Aggregate.weighted_sum((0.3, 0.3, 0.4))
ALONE, THREE = Levels(NAMES[:1], (100.0,)), Levels(NAMES, (100.0,) * 3)
CALL, FORWARD = Profile(ProfileKind.CALL, 1.0), Profile(ProfileKind.FORWARD, 0.0)
QUARTERS = tuple(seen(k) for k in range(1, 5))
DAYS = tuple(observation.day for observation in QUARTERS)
WEEKS = tuple(week(k) for k in range(53))
EXACT = ReferenceKind.EXACT


def up(aggregate):
    return Trigger(Direction.UP, aggregate)


def coupons(aggregate, *, memory=False):
    return Coupons(tuple(Coupon(s.day, s.payment_date, 0.03, 0.8) for s in QUARTERS), up(aggregate), memory=memory)


def accrual(aggregate):
    days = [tuple(week(13 * (k - 1) + j) for j in (4, 8, 13)) for k in range(1, 5)]
    pairs = zip(QUARTERS, days, strict=True)
    return Coupons(tuple(Coupon(s.day, s.payment_date, 0.03, 0.85, d, 1.2) for s, d in pairs), up(aggregate))


def note(levels, aggregate, features=None, barrier=None):
    return autocallable(
        levels, aggregate, seen(4), QUARTERS[:3], (1.0, 0.98, 0.95), (1.0, 1.01, 1.02), Redemption(put_strike=1.0),
        features, barrier,
    )  # fmt: skip


def at_expiry(levels, aggregate, payout=CALL, *features):
    return Contract(levels, ExpiryLevel(quarter(4), aggregate), payout, seen(4), features)


def on(statistic, levels=ALONE, payout=CALL):
    return Contract(levels, statistic, payout, seen(4))


def barrier(kind, direction, aggregate, level, schedule=QUARTERS, **more):
    return Barrier(kind, Trigger(direction, aggregate), schedule, (level,) * len(schedule), **more)


def limited_sum(payout):
    local = Profile(ProfileKind.FORWARD, 1.0, floor=-0.05, cap=0.05)
    return on(PerformanceSum((quarter(0), *DAYS), WORST, local), THREE, payout)


STARTED = fixings([(95.0, 108.0, 101.0)])
OUT, IN, UP, DOWN = BarrierKind.OUT, BarrierKind.IN, Direction.UP, Direction.DOWN
#: Contracts, the fixings they have, and the method that must be exact.
EXACTLY_KNOWN = {
    "note with memory and knock-in": (
        note(ALONE, ONE, coupons(ONE, memory=True), knock_in(ONE, QUARTERS, 0.7)),
        None,
        "quadrature from",
    ),
    "note with accrual": (note(ALONE, ONE, accrual(ONE)), None, "quadrature from"),
    "note on a geometric basket": (
        note(THREE, GEOMETRIC, None, knock_in(GEOMETRIC, QUARTERS, 0.7)),
        None,
        "quadrature from",
    ),
    "two barriers, a rebate": (
        at_expiry(
            ALONE,
            ONE,
            CALL,
            barrier(OUT, UP, ONE, 1.3, instead=Redemption(0.05)),
            barrier(OUT, DOWN, ONE, 0.8, rebate_at_hit=0.02),
        ),
        None,
        "quadrature from",
    ),
    "forward start with a barrier": (
        at_expiry(Levels(NAMES[:1], None, (quarter(1),)), ONE, CALL, barrier(OUT, DOWN, ONE, 0.8, QUARTERS[1:3])),
        None,
        "quadrature from",
    ),
    "forward start of the worst": (at_expiry(Levels(NAMES, None, (quarter(1),)), WORST), None, "date by date"),
    "range accrual on the worst": (
        at_expiry(THREE, WORST, Redemption(put_strike=0.9), accrual(WORST)),
        None,
        "date by date",
    ),
    "knock-in at maturity on the worst": (
        at_expiry(THREE, WORST, Redemption(put_strike=1.0), knock_in(WORST, QUARTERS[3:], 0.7)),
        None,
        "date by date",
    ),
    "limited sum of the worst": (limited_sum(FORWARD), STARTED, "date by date"),
    "average": (on(Average(DAYS, ONE)), None, "average by convolution"),
    "average of a geometric basket": (
        on(Average(DAYS, GEOMETRIC, AverageOf.AGGREGATE), THREE),
        None,
        "average by convolution",
    ),
    "average of a basket": (on(Average(DAYS, BASKET), THREE), None, "average as a basket"),
    "average sets the reference": (at_expiry(Levels(NAMES[:1], None, DAYS[:2]), ONE), None, "average that sets"),
    "variance": (
        on(RealisedVariance((quarter(0), *DAYS), ONE, (1.0, 0.0), returns_per_year=4.0), payout=FORWARD),
        STARTED,
        "realised variance",
    ),
    "capped variance": (
        on(
            RealisedVariance(WEEKS, ONE, (1.0, 0.0), returns_per_year=52.0),
            payout=Profile(ProfileKind.FORWARD, 0.05, cap=0.02),
        ),
        STARTED,
        "realised variance",
    ),
    "variance of a geometric basket": (
        on(
            RealisedVariance((quarter(0), *DAYS), GEOMETRIC, (0.3, 0.3, 0.4, -1.0), returns_per_year=4.0),
            THREE,
            FORWARD,
        ),
        STARTED,
        "realised variance",
    ),
    "volatility": (
        on(
            RealisedVariance((quarter(0), *DAYS), ONE, (1.0, 0.0), as_volatility=True, returns_per_year=4.0),
            payout=FORWARD,
        ),
        STARTED,
        "realised variance",
    ),
}


def exact(terms, method=""):
    found = contract_references(terms)
    return next(r for r in found if r.kind is EXACT and r.method.startswith(method))


@pytest.mark.parametrize("name", EXACTLY_KNOWN)
def test_exact_values_are_the_mean_of_what_the_contract_pays_on_simulated_prices(name):
    contract, past, method = EXACTLY_KNOWN[name]
    terms = with_uneven_steps(terms_of(contract, past=past))
    value, error = simulated(terms)
    found = exact(terms, method)
    # 17 contracts at a fixed seed: 3.5 standard errors are exceeded by chance once in a hundred runs of them all.
    assert abs(found.value - value) < 3.5 * error + found.error
    assert found.error < 1e-5


#: Fixings of three quarter days: today is the third.
PATH = [(95.0, 108.0, 101.0), (90.0, 99.0, 97.0), (93.0, 102.0, 96.0)]


def half_way():
    """Levels of every week up to today: they stand still within a quarter."""
    return fixings([PATH[k // 13] for k in range(27)])


@pytest.mark.parametrize("name", EXACTLY_KNOWN)
def test_exact_values_hold_half_way_through_the_contracts_life(name):
    contract, _, method = EXACTLY_KNOWN[name]
    terms = with_uneven_steps(terms_of(contract, quarter(2), half_way(), np.array(PATH[2])))
    assert terms.as_of.status is Status.LIVE
    if "forward start" in name or "sets" in name:
        method = ""  # the reference is set: any exact method will do
    value, error = simulated(terms)
    found = exact(terms, method)
    assert abs(found.value - value) < 3.5 * error + found.error


@pytest.mark.parametrize("name", EXACTLY_KNOWN)
def test_all_references_of_a_contract_agree_with_one_another(name):
    contract, past, _ = EXACTLY_KNOWN[name]
    terms = with_uneven_steps(terms_of(contract, past=past))
    found = contract_references(terms)
    best = next(r for r in found if r.kind is EXACT)
    for other in found:
        gap = other.value - best.value
        allowed = other.error + best.error + 1e-12
        if other.kind is EXACT:
            assert abs(gap) <= allowed
        if other.kind is ReferenceKind.LOWER_BOUND:
            assert gap <= allowed
        if other.kind is ReferenceKind.UPPER_BOUND:
            assert gap >= -allowed


def test_one_underlying_gives_the_same_by_quadrature_and_date_by_date():
    contract = at_expiry(
        ALONE, ONE, Redemption(put_strike=1.0), accrual(ONE), Autocall((seen(4),), up(ONE), (1.1,), (1.2,)),
        barrier(OUT, UP, ONE, 1.4, QUARTERS[3:], rebate_at_hit=0.3), knock_in(ONE, QUARTERS[3:], 0.7),
    )  # fmt: skip
    terms = with_uneven_steps(terms_of(contract))
    methods = [r for r in contract_references(terms) if r.kind is EXACT]
    assert [r.method.split(":")[0] for r in methods] == ["quadrature from date to date", "date by date"]
    assert methods[0].value == pytest.approx(methods[1].value, abs=1e-12)


@pytest.mark.parametrize("direction", [UP, DOWN])
def test_knock_in_and_knock_out_add_up_to_the_plain_option(direction):
    level = 1.1 if direction is UP else 0.85
    pair = [exact(terms_of(at_expiry(ALONE, ONE, CALL, barrier(k, direction, ONE, level)))).value for k in (IN, OUT)]
    assert sum(pair) == pytest.approx(exact(terms_of(at_expiry(ALONE, ONE))).value, abs=1e-12)


def test_known_cash_in_the_price_moves_a_dated_barrier_as_it_moves_the_price():
    contract = at_expiry(ALONE, ONE, CALL, barrier(OUT, DOWN, ONE, 0.85))
    terms = terms_of(contract, floors=10.0)
    value, error = simulated(terms)
    assert abs(exact(terms, "quadrature").value - value) < 3.5 * error
    shifted = replace(terms, floors=np.zeros_like(terms.floors))
    moved = at_expiry(
        ALONE, ONE, Profile(ProfileKind.CALL, 0.9), barrier(OUT, DOWN, ONE, 0.75)
    )  # every level 0.1 lower: the same amounts
    same = replace(shifted, contract=moved, as_of=replace(shifted.as_of, contract=moved))
    assert exact(terms).value == pytest.approx(exact(same).value, abs=1e-12)


def test_amounts_already_known_are_part_of_every_reference():
    contract = note(ALONE, ONE, coupons(ONE))
    today = quarter(1)
    terms = terms_of(contract, today, fixings([(95.0,)] * 13 + [(97.0,)]), np.array([97.0, 100.0, 100.0]))
    assert terms.known_value == pytest.approx(0.03 * terms.discount(seen(1).payment_date))
    without = replace(terms, known_value=0.0)
    for with_them, alone in zip(contract_references(terms), contract_references(without), strict=True):
        assert with_them.value == pytest.approx(alone.value + terms.known_value, abs=1e-14)


def business_days():
    days = [week(0) + timedelta(days=d) for d in range(1, 365)]
    return tuple(Observation(day, day) for day in days if day.weekday() < 5 and day <= quarter(4))


@pytest.mark.parametrize(("direction", "level"), [(DOWN, 0.8), (UP, 1.25)])
def test_a_continuous_barrier_is_worth_less_than_a_daily_one_and_its_allowance_tells_the_correction(direction, level):
    daily = barrier(OUT, direction, ONE, level, business_days())
    dated = exact(terms_of(at_expiry(ALONE, ONE, CALL, daily)))
    watched = exact(terms_of(at_expiry(ALONE, ONE, CALL, replace(daily, continuous=True))))
    assert watched.method == "continuous barrier by reflection"
    assert 0.0 < watched.allowance < 0.1 * (dated.value - watched.value)


def test_a_continuous_barrier_under_uneven_growth_is_only_approximated():
    contract = at_expiry(ALONE, ONE, CALL, barrier(OUT, DOWN, ONE, 0.8, business_days(), continuous=True))
    found = contract_references(with_uneven_steps(terms_of(contract)))
    assert [r.kind for r in found] == [ReferenceKind.APPROXIMATION]


def test_a_barrier_on_another_underlying_in_and_out_add_up_to_the_plain_option():
    pair, watched = Aggregate.weighted_sum((0.5, 0.5, 0.0)), Aggregate.weighted_sum((0.0, 0.0, 1.0))
    days = business_days()
    values = [
        exact(terms_of(at_expiry(THREE, pair, CALL, barrier(k, DOWN, watched, 0.85, days, continuous=True)))).value
        for k in (IN, OUT)
    ]
    assert sum(values) == pytest.approx(exact(terms_of(at_expiry(THREE, pair))).value, abs=1e-8)
    assert min(values) > 0.0


def test_a_sum_whose_limits_bend_the_payout_is_not_a_sum_of_options():
    assert contract_references(terms_of(limited_sum(Profile(ProfileKind.CALL, 0.0)), past=STARTED)) == ()
    floored = replace(FORWARD, floor=-0.21)  # below four times the local floor: never reached
    assert exact(terms_of(limited_sum(floored), past=STARTED)).value == pytest.approx(
        exact(terms_of(limited_sum(FORWARD), past=STARTED)).value, abs=1e-14
    )


def test_a_sum_whose_periods_have_all_ended_is_no_option_any_more():
    local = Profile(ProfileKind.FORWARD, 1.0, floor=-0.05, cap=0.05)
    early = on(PerformanceSum((quarter(0), *DAYS[:2]), WORST, local), THREE, FORWARD)
    assert contract_references(terms_of(early, quarter(2), half_way(), np.array(PATH[2]))) == ()


def test_basket_variance_and_correlation_are_approximations_close_to_what_paths_realise():
    dispersion = on(RealisedVariance(WEEKS, BASKET, (0.3, 0.3, 0.4, -1.0), returns_per_year=52.0), THREE, FORWARD)
    correlation = on(RealisedCorrelation(WEEKS, (0.3, 0.3, 0.4), demeaned=False), THREE, FORWARD)
    for contract in (dispersion, correlation):
        terms = terms_of(contract, past=STARTED)
        (found,) = contract_references(terms)
        value, error = simulated(terms, paths=250)
        assert found.kind is ReferenceKind.APPROXIMATION
        assert abs(found.value - value) < 4.0 * error + 0.02 * abs(value)


@pytest.mark.parametrize(
    "contract",
    [
        at_expiry(THREE, WORST, CALL, barrier(OUT, DOWN, WORST, 0.8)),
        at_expiry(THREE, WORST, CALL, coupons(WORST, memory=True)),
        note(THREE, WORST),
        on(LockedIn(DAYS[:3], 3), THREE),
        at_expiry(ALONE, ONE, CALL, Exercise(ExercisedBy.HOLDER, QUARTERS[:3], ONE, CALL)),
    ],
)
def test_nothing_is_claimed_for_contracts_without_a_formula(contract):
    assert contract_references(terms_of(contract)) == ()


def test_nothing_is_claimed_for_a_contract_that_has_ended():
    contract = note(ALONE, ONE, coupons(ONE))
    called = fixings([(95.0,)] * 13 + [(101.0,)])
    terms = terms_of(contract, quarter(1), called, np.array([101.0, 100.0, 100.0]))
    assert terms.as_of.status is Status.TO_BE_PAID
    assert contract_references(terms) == ()
