"""Coupons, autocalls, barriers and exercise, along paths whose payments are worked out by hand."""

from datetime import date

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.autocall import Autocall
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.contract import Contract
from pricer.contracts.coupons import Coupon, Coupons
from pricer.contracts.exercise import Exercise, ExercisedBy, ExerciseStyle
from pricer.contracts.feature import Ending
from pricer.contracts.levels import Levels
from pricer.contracts.life_cycle import Status, as_of
from pricer.contracts.notes import autocallable, knock_in, reverse_convertible
from pricer.contracts.observation import Observation
from pricer.contracts.option import Conversion, EuropeanOption
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction, Trigger
from tests.unit.seasoned_contracts import NAMES, contract, fixings, observed, week

WORST = Aggregate.worst_of(2)
UP, DOWN = Trigger(Direction.UP, WORST), Trigger(Direction.DOWN, WORST)
SHORT_PUT = Redemption(put_strike=1.0)


def payments(terms, rows, first=1):
    """(payment's week, amount, reason) of all payments along ``rows``, from week ``first`` on."""
    state = as_of(terms, week(first + len(rows) - 1), fixings(rows, first), {})
    assert state.issues == ()
    return [((p.observed_on - week(0)).days // 7, pytest.approx(p.amount), p.reason) for p in state.progress.payments]


def conditional(level=0.8, memory=False, weeks=(1, 2, 3, 4), amount=0.03):
    coupons = (Coupon(week(k), observed(k).payment_date, amount, level) for k in weeks)
    return Coupons(tuple(coupons), UP, memory)


def test_a_conditional_coupon_is_lost_when_missed():
    terms = contract(conditional(), payout=Redemption())
    rows = [(90, 80), (90, 79), (70, 95), (80, 80)]  # at the level counts
    assert payments(terms, rows) == [(1, 0.03, "coupon"), (4, 0.03, "coupon"), (4, 1.0, "final payoff")]


def test_a_coupon_with_memory_brings_those_missed_before_it():
    terms = contract(conditional(memory=True), payout=Redemption())
    rows = [(90, 80), (90, 79), (70, 95), (80, 80)]
    assert payments(terms, rows) == [(1, 0.03, "coupon"), (4, 0.09, "coupon"), (4, 1.0, "final payoff")]


def test_the_next_coupon_is_announced_with_what_it_brings():
    state = as_of(contract(conditional(memory=True)), week(2), fixings([(79, 90), (79, 90)], 1), {})
    assert [(item.day, item.amount, item.level) for item in state.appointments(0)] == [
        (week(3), pytest.approx(0.09), 0.8),
        (week(4), pytest.approx(0.09), 0.8),
    ]


def test_memory_left_at_the_end_is_lost():
    terms = contract(conditional(memory=True), payout=Redemption())
    assert payments(terms, [(70, 90)] * 4) == [(4, 1.0, "final payoff")]


def test_an_accrual_pays_the_share_of_the_days_in_its_range():
    first = Coupon(week(2), observed(2).payment_date, 0.10, 0.8, (week(0), week(1), week(2)), ceiling=1.1)
    second = Coupon(week(4), observed(4).payment_date, 0.10, 0.8, (week(3), week(4)), ceiling=1.1)
    terms = contract(Coupons((first, second), UP), payout=Redemption(capital=0.0))
    rows = [(80, 120), (111, 112), (90, 90), (79, 90), (110, 130)]  # in; above; in; below; in
    found = payments(terms, rows, first=0)
    assert found == [(2, 0.10 * 2 / 3, "coupon"), (4, 0.10 / 2, "coupon"), (4, 0.0, "final payoff")]


def test_fixed_coupons_need_no_fixings():
    terms = contract(Coupons((Coupon(week(1), observed(1).payment_date, 0.02),)), payout=Redemption())
    state = as_of(terms, week(2), fixings([]), {})
    assert state.status is Status.LIVE
    assert [p.amount for p in state.progress.payments] == [0.02]


def note(**changes):
    calls = [observed(k) for k in (1, 2, 3, 4)]
    terms = {"coupons": conditional(memory=True), "barrier": knock_in(WORST, [observed(4)], 0.6)}
    return autocallable(
        contract().levels,
        WORST,
        observed(4),
        calls,
        (1.0, 0.95, 0.9, 0.85),
        (1.0, 1.01, 1.02, 1.03),
        SHORT_PUT,
        **(terms | changes),
    )


def test_a_note_is_called_on_the_first_date_at_its_falling_level_with_the_coupon_of_the_day():
    rows = [(79, 120), (94.9, 120), (90, 120), (200, 200)]
    assert payments(note(), rows) == [(2, 0.06, "coupon"), (3, 0.03, "coupon"), (3, 1.02, "call")]
    assert as_of(note(), week(4), fixings(rows, 1), {}).ending is Ending.CALLED


def test_a_note_never_called_redeems_its_capital_above_the_barrier_and_its_worst_below():
    assert payments(note(), [(70, 90)] * 3 + [(60, 90)])[-1] == (4, 1.0, "final payoff")  # at the barrier: not below
    assert payments(note(), [(70, 90)] * 3 + [(59, 90)])[-1] == (4, 0.59, "final payoff")


def test_a_daily_barrier_remembers_a_hit_that_recovered():
    daily = knock_in(WORST, [observed(k) for k in (1, 2, 3, 4)], 0.6)
    rows = [(70, 90), (59, 90), (70, 90), (75, 90)]
    assert payments(note(barrier=daily), rows)[-1] == (4, 0.75, "final payoff")
    state = as_of(note(barrier=daily), week(3), fixings(rows, 1), {})
    assert state.progress.features[2].hit_on == week(2)


def test_a_reverse_convertible_pays_its_coupons_whatever_happens():
    coupons = Coupons(tuple(Coupon(week(k), observed(k).payment_date, 0.02) for k in (2, 4)))
    terms = reverse_convertible(contract().levels, WORST, observed(4), SHORT_PUT, coupons)
    assert payments(terms, [(50, 50), (50, 50), (50, 50), (40, 90)]) == [
        (2, 0.02, "coupon"),
        (4, 0.02, "coupon"),
        (4, 0.4, "final payoff"),
    ]


SCHEDULE = tuple(observed(k) for k in (1, 2, 3, 4))


def barrier(kind, level=0.8, **terms):
    return Barrier(kind, DOWN, SCHEDULE, (level,) * 4, **terms)


@pytest.mark.parametrize("last", [(85, 90), (75, 90)])
@pytest.mark.parametrize("middle", [(85, 90), (78, 90)])
def test_a_knock_in_and_a_knock_out_add_up_to_the_plain_payoff(middle, last):
    rows = [(90, 90), middle, (90, 90), last]
    both = [payments(contract(barrier(kind)), rows)[-1][1].expected for kind in BarrierKind]
    assert sorted(both) == [0.0, min(last) / 100]


def test_a_rebate_at_hit_is_paid_after_the_hit_and_ends_the_contract():
    terms = contract(barrier(BarrierKind.OUT, rebate_at_hit=0.05))
    rows = [(90, 90), (78, 90), (90, 90), (90, 90)]
    state = as_of(terms, week(2), fixings(rows[:2], 1), {})
    assert (state.ending, state.status) == (Ending.KNOCKED_OUT, Status.TO_BE_PAID)
    assert [(p.payment_date, p.amount) for p in state.to_be_paid] == [(observed(2).payment_date, 0.05)]
    assert payments(terms, rows) == [(2, 0.05, "rebate")]


def test_what_is_observed_after_the_end_on_the_same_day_pays_nothing():
    call = Autocall(SCHEDULE[:1], UP, (1.0,), (1.01,))
    rows = [(101, 102)]
    assert payments(contract(call, conditional(weeks=(1,))), rows) == [(1, 1.01, "call")]
    assert payments(contract(conditional(weeks=(1,)), call), rows) == [(1, 0.03, "coupon"), (1, 1.01, "call")]


def test_a_rebate_at_expiry_waits_for_it():
    terms = contract(barrier(BarrierKind.OUT, instead=Redemption(capital=0.05)))
    assert payments(terms, [(90, 90), (78, 90), (90, 90), (90, 90)]) == [(4, 0.05, "final payoff")]


def test_of_several_barriers_each_must_leave_the_payout_in_force():
    up = Barrier(BarrierKind.OUT, Trigger(Direction.UP, WORST), SCHEDULE, (1.2,) * 4)
    terms = contract(barrier(BarrierKind.IN), up)
    assert payments(terms, [(79, 90), (90, 90), (90, 90), (90, 95)])[-1][1] == 0.9
    assert payments(terms, [(79, 90), (130, 125), (90, 90), (90, 95)])[-1][1] == 0.0
    assert payments(terms, [(90, 90)] * 4)[-1][1] == 0.0


def test_the_desks_own_record_of_a_hit_counts_though_no_fixing_shows_it():
    terms = contract(barrier(BarrierKind.IN, continuous=True, recorded_hit=observed(2)))
    assert payments(terms, [(90, 90)] * 4)[-1][1] == 0.9
    assert (
        payments(contract(barrier(BarrierKind.IN, continuous=True, clear_until=week(4))), [(70, 90)] * 4)[-1][1] == 0.0
    )


BETWEEN = Observation(date(2026, 1, 14), date(2026, 1, 16))


@pytest.mark.parametrize("rebate", [None, 0.05])
def test_a_recorded_hit_between_two_observations_counts_from_its_day(rebate):
    terms = contract(barrier(BarrierKind.OUT, continuous=True, recorded_hit=BETWEEN, rebate_at_hit=rebate))
    fixed = fixings([(90, 90)] * 2, 1)
    before, after = (as_of(terms, day, fixed, {}) for day in (date(2026, 1, 13), BETWEEN.day))
    assert (before.status, before.progress.features[0].hit_on) == (Status.LIVE, None)
    assert after.progress.features[0].hit_on == BETWEEN.day
    assert after.ending is (None if rebate is None else Ending.KNOCKED_OUT)
    assert [p.payment_date for p in after.to_be_paid] == ([] if rebate is None else [BETWEEN.payment_date])
    assert as_of(terms, week(2), fixed, {}).issues == ()


CALL = Profile(ProfileKind.CALL, 1.0)


def exercise(**terms):
    rights = tuple(observed(k) for k in (1, 2, 3))
    return Exercise(ExercisedBy.HOLDER, rights, WORST, **({"payout": CALL} | terms))


def test_a_right_that_was_not_used_passes_and_needs_no_fixing():
    state = as_of(contract(exercise()), week(2), fixings([]), {})
    assert (state.status, state.progress.payments) == (Status.LIVE, ())
    assert [item.day for item in state.appointments(0)] == [week(3)]


def test_an_exercise_on_record_pays_the_payout_of_its_day():
    terms = contract(exercise(exercised=observed(2)))
    assert payments(terms, [(150, 120)], first=2) == [(2, 0.2, "exercise")]
    assert as_of(terms, week(3), fixings([(150, 120)], 2), {}).ending is Ending.EXERCISED


def test_an_issuer_redeems_at_the_amount_of_the_date():
    called = Exercise(ExercisedBy.ISSUER, SCHEDULE[:3], WORST, amounts=(1.01, 1.02, 1.03), exercised=observed(2))
    assert payments(contract(called), [], first=3) == [(2, 1.02, "exercise")]


def test_only_an_american_right_may_be_used_between_its_dates():
    with pytest.raises(ValueError, match="no right to it"):
        exercise(exercised=BETWEEN)
    assert exercise(exercised=BETWEEN, style=ExerciseStyle.AMERICAN).dates == (BETWEEN.day,)


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (lambda: Autocall(SCHEDULE, UP, (1.0,), (1.0,) * 4), "one level and one amount per observation"),
        (lambda: barrier(BarrierKind.IN, rebate_at_hit=0.1), "only a knock-out"),
        (lambda: barrier(BarrierKind.IN, recorded_hit=observed(5)), "not watched"),
        (lambda: barrier(BarrierKind.IN, recorded_hit=observed(2), clear_until=week(2)), "was not clear"),
        (lambda: Barrier(BarrierKind.IN, DOWN, SCHEDULE[::-1], (1.0,) * 4), "increase strictly"),
        (lambda: Coupons((Coupon(week(1), week(1), 0.1, 0.8),)), "need a trigger"),
        (lambda: Coupon(week(1), week(0), 0.1), "before that"),
        (lambda: Coupon(week(1), week(1), 0.1, None, (week(0),)), "needs a level"),
        (lambda: exercise(amounts=(1.0, 1.0, 1.0)), "either a payout or amounts"),
        (lambda: contract(Autocall((observed(5),), UP, (1.0,), (1.0,))), "after the expiry date"),
        (lambda: contract(conditional(), n=3), "3 underlyings"),
        (lambda: contract(conditional(), levels=Levels(NAMES[:2], None, (week(2),))), "when the references are set"),
    ],
)
def test_parts_that_do_not_fit_are_refused(make, message):
    with pytest.raises(ValueError, match=message):
        make()


@pytest.mark.parametrize(
    ("kind", "at", "above"),
    [(ProfileKind.CASH_DIGITAL_CALL, 0.0, 0.1), (ProfileKind.CASH_DIGITAL_PUT, 0.1, 0.0)],
)
def test_a_level_at_a_digitals_strike_but_for_rounding_is_not_above_it(kind, at, above):
    terms = contract(payout=Profile(kind, 0.2999999999999997, 0.1))  # 0.3 as a sum may come out
    assert payments(terms, [(30.0, 90)], first=4) == [(4, at, "final payoff")]
    assert payments(terms, [(30.1, 90)], first=4) == [(4, above, "final payoff")]


def test_a_european_option_is_a_contract_and_comes_back():
    option = EuropeanOption(
        NAMES[:2], (100.0, 50.0), WORST, CALL, week(4), observed(4).payment_date, True, Conversion.QUANTO
    )
    terms = Contract.european(option)
    assert terms.as_european() == option
    assert terms.product == option.product
    assert contract(barrier(BarrierKind.IN), payout=CALL).as_european() is None


def test_products_are_named_after_their_parts():
    assert note().product == "worst of memory coupon autocallable knock-in note"
    assert contract(barrier(BarrierKind.OUT), payout=CALL, n=2).product == "worst of knock-out call"


@pytest.mark.parametrize(
    ("aggregate", "name"),
    [
        (Aggregate.weighted_sum((0.5, 0.5)), "basket"),
        (Aggregate.weighted_sum((1.0, -1.0)), "spread"),
        (Aggregate.geometric((0.5, 0.5)), "geometric basket"),
        (Aggregate.best_of(2, cash=1.0), "best of assets and cash"),
    ],
)
def test_contracts_and_european_options_share_the_names_of_aggregates(aggregate, name):
    terms = contract(aggregate=aggregate, payout=CALL)
    assert terms.product == f"{name} call"
    assert terms.as_european().product == terms.product


def test_a_unit_refers_to_the_notional_of_the_european_option():
    prices = np.array([90.0, 40.0])
    dear = contract(levels=Levels.of_prices(NAMES[:2]), aggregate=Aggregate.weighted_sum((2.0, -1.0)))
    assert contract().unit_notional(prices) == 1.0
    assert dear.unit_notional(prices) == 220.0
