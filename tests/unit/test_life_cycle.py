"""Where contracts stand on a valuation date."""

from dataclasses import replace
from datetime import timedelta

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.autocall import Autocall
from pricer.contracts.average import Average
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.coupons import Coupon, Coupons
from pricer.contracts.feature import Ending
from pricer.contracts.fixings import Fixing, Fixings
from pricer.contracts.levels import Levels
from pricer.contracts.life_cycle import Status, as_of
from pricer.contracts.option import Conversion
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.realised_correlation import RealisedCorrelation
from pricer.contracts.trigger import Direction, Trigger
from pricer.contracts.writer import StructuralDefault, Writer
from pricer.core.issues import Severity
from tests.unit.seasoned_contracts import NAMES, contract, fixings, observed, spots, week

WORST = Aggregate.worst_of(2)
SCHEDULE = tuple(observed(k) for k in (1, 2, 3, 4))
CALL = Autocall(SCHEDULE, Trigger(Direction.UP, WORST), (1.0,) * 4, (1.05,) * 4)
KNOCK_IN = Barrier(BarrierKind.IN, Trigger(Direction.DOWN, WORST), SCHEDULE, (0.6,) * 4)


def codes(state):
    return [issue.code for issue in state.issues]


def test_an_observation_today_takes_todays_fixing():
    state = as_of(contract(CALL), week(1), fixings([(101, 102)], 1), spots(90.0, 90.0))
    assert (state.ending, codes(state), state.assumed) == (Ending.CALLED, [], ())
    assert state.confirmed == state.progress


def test_an_observation_today_without_a_fixing_takes_the_spot_and_says_so():
    state = as_of(contract(CALL), week(1), fixings([]), spots(101.0, 102.0))
    assert (state.ending, state.assumed) == (Ending.CALLED, NAMES[:2])
    (issue,) = state.issues
    assert str(issue) == (
        "found an observation today, 2026-01-12, without a fixing of ORLUMA, VESKA; expected today's fixings. "
        "Today's spots stand in for them; enter the fixings once they are published."
    )
    assert issue.severity is Severity.WARNING
    assert state.status is Status.TO_BE_PAID
    assert state.confirmed.ending is None


def test_today_each_underlying_takes_its_own_fixing_if_it_has_one():
    state = as_of(contract(CALL), week(1), fixings([(101, None)], 1), spots(90.0, 100.5))
    assert (state.ending, state.assumed) == (Ending.CALLED, ("VESKA",))


def test_today_is_asked_again_tomorrow():
    first = as_of(contract(CALL), week(1), fixings([]), spots(101.0, 102.0))
    later = as_of(contract(CALL), week(1) + timedelta(days=1), fixings([(99, 102)], 1), spots(1, 1), known=first)
    assert (later.status, later.progress.features) == (Status.LIVE, (1,))


def test_an_observation_today_without_fixing_or_spot_is_an_error():
    state = as_of(contract(CALL), week(1), fixings([]), spots(101.0))
    assert (state.status, codes(state)) == (Status.UNDETERMINED, ["missing-fixing"])
    assert "VESKA on 2026-01-12" in state.issues[0].found


def test_a_past_observation_without_a_fixing_is_an_error_that_names_underlying_and_days():
    rows = [(90, 90), (90, None), (None, None)]
    state = as_of(contract(CALL), week(4) - timedelta(days=1), fixings(rows, 1), spots(90.0, 90.0))
    assert state.status is Status.UNDETERMINED
    assert [issue.found for issue in state.issues] == [
        "no fixing of ORLUMA on 2026-01-26",
        "no fixing of VESKA on 2026-01-19, 2026-01-26",
    ]
    assert state.progress.features == (1,)  # what is known up to the gap


def test_many_missing_days_are_counted_and_the_reason_is_told():
    days = tuple(observed(k) for k in range(1, 20))
    daily = Barrier(BarrierKind.IN, Trigger(Direction.DOWN, WORST), days, (0.6,) * 19)
    missing = Fixings.from_rows([Fixing("VESKA", week(2), None, "exchange closed")])
    state = as_of(contract(daily, weeks=19), week(9), missing, spots(90.0, 90.0))
    assert state.issues[1].found == (
        "no fixing of VESKA on 2026-01-12, 2026-01-19, 2026-01-26, 2026-02-02, 2026-02-09 and 3 more days "
        "up to 2026-03-02 (exchange closed)"
    )


def test_fixings_that_no_longer_matter_are_not_asked_for():
    hit = as_of(contract(KNOCK_IN), week(3), fixings([(55, 90)], 1), spots(90.0, 90.0))
    assert (hit.status, hit.progress.features[0].hit_on) == (Status.LIVE, week(1))
    called = as_of(contract(CALL), week(4), fixings([(101, 102)], 1), spots(90.0, 90.0))
    assert (called.status, codes(called)) == (Status.SETTLED, [])
    averaged = contract(KNOCK_IN, statistic=Average(tuple(map(week, (1, 2, 3))), WORST))
    assert codes(as_of(averaged, week(3), fixings([(55, 90)], 1), spots(90.0, 90.0))) == ["missing-fixing"] * 2


def test_a_decided_amount_is_to_be_paid_until_the_day_before_its_payment():
    fixed = fixings([(101, 102)], 1)
    statuses = [
        as_of(contract(CALL), week(1) + timedelta(days=d), fixed, spots(90.0, 90.0)).status for d in (-1, 0, 1, 2, 9)
    ]
    assert statuses == [Status.LIVE, Status.TO_BE_PAID, Status.TO_BE_PAID, Status.SETTLED, Status.SETTLED]


def test_an_expired_contract_that_pays_nothing_is_settled():
    out = contract(payout=Profile(ProfileKind.CALL, 1.0))
    state = as_of(out, week(4), fixings([(90, 120)], 4), {})
    assert (state.ending, state.status, state.to_be_paid) == (Ending.EXPIRED, Status.SETTLED, ())


def test_a_live_note_may_have_a_coupon_to_be_paid():
    coupons = Coupons(
        (Coupon(week(1), observed(1).payment_date, 0.02), Coupon(week(3), observed(3).payment_date, 0.02))
    )
    state = as_of(contract(coupons), week(1) + timedelta(days=1), fixings([]), spots(90.0, 90.0))
    assert state.status is Status.LIVE
    assert [(p.payment_date, p.amount, p.reason) for p in state.to_be_paid] == [
        (observed(1).payment_date, 0.02, "coupon")
    ]
    (item,) = state.appointments(0)
    assert (item.day, item.amount) == (week(3), 0.02)
    assert state.years_to(item.day) == 13 / 365


IN = Levels(NAMES[:2], None, tuple(map(week, (0, 1, 2))))


def test_references_are_the_mean_of_the_prices_that_set_them():
    rows = [(100, 50), (110, 52), (96, 54)]
    early = as_of(contract(levels=IN), week(1), fixings(rows), spots(98.0, 53.0))
    assert (early.references, early.levels) == (None, None)
    assert early.progress.references.sums == (210.0, 102.0)
    assert early.setting_dates_to_come == (week(2),)
    late = as_of(contract(levels=IN), week(2), fixings(rows), spots(98.0, 53.0))
    np.testing.assert_allclose(late.references, [102.0, 52.0])
    np.testing.assert_allclose(late.levels, [98.0 / 102.0, 53.0 / 52.0])
    assert late.setting_dates_to_come == ()


def test_a_forward_start_measures_performance_from_the_price_of_one_day():
    terms = contract(levels=Levels(NAMES[:2], None, (week(1),)))
    state = as_of(terms, week(4), fixings([(80, 50), (1, 1), (1, 1), (88, 60)], 1), {})
    assert state.progress.payments[-1].amount == pytest.approx(1.1)
    assert terms.product.startswith("worst of forward-start")


def test_a_missing_price_among_those_that_set_references_is_an_error():
    state = as_of(contract(levels=IN), week(3), fixings([(100, 50), (110, None), (96, 54)]), spots(98.0, 53.0))
    assert [issue.found for issue in state.issues] == ["no fixing of VESKA on 2026-01-12"]


def test_a_composite_is_fixed_in_the_trades_currency():
    levels = Levels(NAMES[:2], (100.0, 40.0), conversion=Conversion.COMPOSITE)
    rates = {"VESKA": "USDEUR"}
    pair = fixings([(1.25,)], 4, names=("EURUSD",))  # 0.8 EUR for a USD
    both = Fixings({**fixings([(90, 60)], 4).levels, **pair.levels})
    terms = contract(levels=levels, aggregate=Aggregate.best_of(2))
    for day in (week(4), week(5)):  # today, and in the past
        assert as_of(terms, day, both, {}, rates).progress.payments[-1].amount == pytest.approx(60 * 0.8 / 40)
    state = as_of(terms, week(5), fixings([(90, 60)], 4), {}, rates)
    assert [issue.found for issue in state.issues] == ["no fixing of USDEUR on 2026-02-02"]
    today = as_of(terms, week(4), fixings([(90, 60)], 4), {**spots(90.0, 60.0), "USDEUR": 0.75}, rates)
    assert today.assumed == ("USDEUR",)
    assert today.progress.payments[-1].amount == pytest.approx(60 * 0.75 / 40)
    assert today.levels == pytest.approx((0.9, 60 * 0.75 / 40))


def test_a_barrier_watched_at_all_times_asks_for_the_desks_record():
    watched = replace(KNOCK_IN, continuous=True)
    fixed = fixings([(90, 90), (90, 90)], 1)
    state = as_of(contract(watched), week(2), fixed, spots(90.0, 90.0))
    assert (state.status, codes(state)) == (Status.LIVE, ["touch-not-recorded"])
    recorded = replace(watched, clear_until=week(2))
    assert codes(as_of(contract(recorded), week(2), fixings([]), spots(90.0, 90.0))) == []
    struck = as_of(contract(watched), week(2), fixings([(59, 90)], 1), spots(90.0, 90.0))
    assert codes(struck) == []


def test_a_writer_in_default_keeps_the_contract_from_being_valued():
    writer = Writer("Ostrevane Trust", 0.4, StructuralDefault("OSTREVANE", 80.0, 0.2), defaulted_on=week(1))
    assert as_of(contract(writer=writer), week(0), fixings([]), spots(90.0, 90.0)).status is Status.LIVE
    state = as_of(contract(writer=writer), week(1), fixings([]), spots(90.0, 90.0))
    assert (state.status, codes(state)) == (Status.UNDETERMINED, ["writer-defaulted"])


def test_a_final_level_that_cannot_be_formed_is_told():
    terms = contract(statistic=RealisedCorrelation(tuple(map(week, (2, 3, 4))), (1.0, 1.0)))
    state = as_of(terms, week(4), fixings([(90, 90), (91, 90), (92, 90)], 2), {})
    assert (state.status, codes(state)) == (Status.UNDETERMINED, ["no-final-level"])


def test_what_is_known_must_be_the_same_contract_on_an_earlier_day():
    earlier = as_of(contract(CALL), week(1), fixings([]), spots(90.0, 90.0))
    for terms, day in ((contract(KNOCK_IN), week(2)), (contract(CALL), week(0))):
        with pytest.raises(ValueError, match="same contract on an earlier day"):
            as_of(terms, day, fixings([]), spots(90.0, 90.0), known=earlier)
