"""The sample's trades on a path: every kind is there, half of them have a past, and their states are the ones told."""

from __future__ import annotations

from collections import Counter
from dataclasses import replace
from datetime import date
from functools import lru_cache

import pytest

from pricer.contracts.autocall import Autocall
from pricer.contracts.average import Average, AverageOf
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.contract import Contract
from pricer.contracts.coupons import Coupons
from pricer.contracts.events import events
from pricer.contracts.exercise import Exercise, ExercisedBy, ExerciseStyle
from pricer.contracts.feature import Ending
from pricer.contracts.life_cycle import AsOf, Status
from pricer.contracts.locked_in import LockedIn
from pricer.contracts.option import Conversion
from pricer.contracts.performance_sum import PerformanceSum
from pricer.contracts.realised_correlation import RealisedCorrelation
from pricer.contracts.realised_variance import RealisedVariance
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction
from pricer.loader import load_book, load_market
from pricer.market.standing import standing
from tests.end_to_end.desk import SAMPLE, saltmarsh

TONIGHT, TOMORROW = date(2026, 11, 30), date(2026, 12, 1)


@lru_cache
def market():
    return load_market(SAMPLE / "market.xlsx")


@lru_cache
def states() -> dict[str, AsOf]:
    """Where every trade that is no European option stands."""
    book = load_book(SAMPLE / "book.xlsx")
    return {trade.trade_id: standing(trade, market()) for trade in book if isinstance(trade.contract, Contract)}


def contracts() -> list[Contract]:
    return [state.contract for state in states().values()]


def features(kind: type) -> list:
    return [feature for contract in contracts() for feature in contract.features if isinstance(feature, kind)]


def past(state: AsOf) -> list[date]:
    return [day for day in state.contract.dates if day <= TONIGHT]


def ids(status: Status, ending: Ending | None = None) -> list[str]:
    return [name for name, state in states().items() if state.status is status and ending in (None, state.ending)]


def test_half_of_them_are_in_the_middle_of_their_life():
    seasoned = [name for name, state in states().items() if past(state)]
    assert len(states()) == 71
    assert len(seasoned) >= len(states()) / 2
    assert ids(Status.UNDETERMINED) == []


def test_every_statistic_is_in_the_book():
    found = Counter(type(contract.statistic) for contract in contracts())
    assert {Average, PerformanceSum, LockedIn, RealisedVariance, RealisedCorrelation} <= set(found)
    assert {c.statistic.of for c in contracts() if isinstance(c.statistic, Average)} == set(AverageOf)
    variances = [c.statistic for c in contracts() if isinstance(c.statistic, RealisedVariance)]
    assert {statistic.as_volatility for statistic in variances} == {True, False}
    assert any(statistic.weights[-1] < 0.0 for statistic in variances), "a dispersion"


def test_references_are_set_by_one_day_and_by_several_in_the_past_and_to_come():
    dates = [
        (len(state.contract.levels.reference_dates), len(state.setting_dates_to_come)) for state in states().values()
    ]
    assert {(1, 1), (3, 0), (3, 1)} <= set(dates)


def test_barriers_of_every_sort_are_in_the_book():
    barriers = features(Barrier)
    assert {(barrier.kind, barrier.trigger.direction) for barrier in barriers} == {
        (kind, direction) for kind in BarrierKind for direction in Direction
    }
    assert {barrier.continuous for barrier in barriers} == {True, False}
    assert any(barrier.trigger.scales is not None for barrier in barriers), "levels of the underlyings themselves"
    assert any(barrier.rebate_at_hit for barrier in barriers), "a rebate at the hit"
    assert any(b.kind is BarrierKind.OUT and b.rebate_at_hit is None and b.instead.capital for b in barriers)
    assert any(len(barrier.schedule) == 1 for barrier in barriers), "watched at expiry"
    assert any(1 < len(barrier.schedule) < 30 for barrier in barriers), "watched on dates"
    assert any(len(barrier.schedule) > 200 for barrier in barriers), "watched daily"
    assert any(sum(isinstance(f, Barrier) for f in contract.features) == 2 for contract in contracts())


def test_notes_of_every_sort_are_in_the_book():
    calls, coupons = features(Autocall), features(Coupons)
    assert sum(call.levels[0] > call.levels[-1] for call in calls) >= 3, "triggers that step down"
    assert any(len(set(call.amounts)) > 1 for call in calls), "a premium that grows"
    assert any(c.memory for c in coupons)
    assert any(c.trigger is None for c in coupons), "paid whatever happens"
    accruals = [c for c in coupons if c.label == "range accrual"]
    assert {c.trigger.aggregate.kind for c in accruals} == {"worst of", "best of"}
    payouts = [contract.payout for contract in contracts() if isinstance(contract.payout, Redemption)]
    assert any(payout.leverage > 1.0 for payout in payouts)
    assert any(payout.floor is not None and payout.call_strike is not None for payout in payouts)


def test_rights_and_writers_of_every_sort_are_in_the_book():
    rights = features(Exercise)
    assert {(right.by, right.style) for right in rights} == {
        (ExercisedBy.HOLDER, ExerciseStyle.BERMUDAN),
        (ExercisedBy.HOLDER, ExerciseStyle.AMERICAN),
        (ExercisedBy.ISSUER, ExerciseStyle.BERMUDAN),
    }
    writers = [contract.writer for contract in contracts() if contract.writer is not None]
    assert {writer.structural is None for writer in writers} == {True, False}
    assert {contract.conversion for contract in contracts()} == {None, *Conversion}


def test_no_more_than_eight_live_trades_may_be_ended_early_by_a_decision():
    """Each costs seconds; the whole book is meant to be priced within a minute."""
    live = [s for s in states().values() if s.status is Status.LIVE]
    assert sum(any(isinstance(f, Exercise) for f in state.contract.features) for state in live) == 8


def test_what_is_over_is_called_expired_exercised_or_paid():
    assert ids(Status.TO_BE_PAID, Ending.CALLED) == ["SMD-0125"]
    assert ids(Status.TO_BE_PAID, Ending.EXPIRED) == ["SMD-0126"]
    assert ids(Status.TO_BE_PAID, Ending.EXERCISED) == ["SMD-0145"]
    assert ids(Status.SETTLED) == ["SMD-0127"]
    (redeemed,) = states()["SMD-0125"].to_be_paid
    assert (redeemed.amount, redeemed.payment_date) == (1.0675, date(2026, 12, 2))
    wexmoor_and_druvex = [fixing / first for fixing, first in zip(
        *([saltmarsh("history").fixing(name, day) for name in ("DRUVEX", "WEXMOOR")]
          for day in (date(2026, 11, 27), date(2025, 11, 27))), strict=True)]  # fmt: skip
    coupon, capital = (payment.amount for payment in states()["SMD-0126"].to_be_paid)
    assert coupon == 0.06
    assert capital == pytest.approx(1.0 - max(0.9 - min(wexmoor_and_druvex), 0.0), abs=1e-12)


def test_memory_hits_and_records_are_kept():
    def state(trade_id: str, kind: type):
        found = states()[trade_id]
        return next(
            s for f, s in zip(found.contract.features, found.progress.features, strict=True) if isinstance(f, kind)
        )

    assert state("SMD-0114", Coupons).memory == pytest.approx(0.024)
    assert state("SMD-0119", Barrier).hit_on == date(2026, 10, 20)
    assert state("SMD-0130", Barrier).hit_on == date(2026, 11, 12)
    assert state("SMD-0104", Barrier).hit_on == date(2026, 4, 21)  # a knock-out that still pays its rebate at expiry
    assert state("SMD-0099", Barrier).hit_on == date(2026, 11, 24)  # recorded, between two fixings
    assert states()["SMD-0099"].contract.features[0].recorded_hit is not None


def test_one_fixing_of_today_is_not_published_yet_and_the_spot_stands_in_for_it():
    assert set(saltmarsh("history").UNPUBLISHED) == {("SORBEQ", TONIGHT)}
    assumed = {name: state.assumed for name, state in states().items() if state.assumed}
    assert set(assumed.values()) == {("SORBEQ",)}
    assert "SMD-0120" in assumed
    (coupon,) = states()["SMD-0120"].to_be_paid
    assert coupon.observed_on == TONIGHT


def test_triggers_and_forward_starts_are_due_tomorrow():
    tomorrow = {(name, event.what) for name, state in states().items() for event in events(state, TOMORROW)}
    assert {("SMD-0121", "call"), ("SMD-0096", "reference")} <= {(name, what.split()[0]) for name, what in tomorrow}


def test_fixings_end_at_tonights_spots_and_agree_with_the_price_history():
    fixings = market().fixings
    for name, underlying in market().underlyings.items():
        assert fixings.level(name, TONIGHT) in (underlying.spot, None), name
    history = saltmarsh("market").market_tables()["price_history"]
    assert all(fixings.level(row["underlying"], row["date"]) in (row["level"], None) for row in history)


def test_a_missing_past_fixing_costs_the_trades_that_need_it():
    """Without ORLUMA's fixing of a month-end: an average and a reference observe it, a sold option does not."""
    day = date(2026, 10, 30)
    levels = {name: dict(days) for name, days in market().fixings.levels.items()}
    del levels["ORLUMA"][day]
    poorer = replace(market(), fixings=replace(market().fixings, levels=levels))
    book = load_book(SAMPLE / "book.xlsx")
    lost = {t.trade_id for t in book if standing(t, poorer).status is Status.UNDETERMINED}
    assert {"SMD-0086", "SMD-0089", "SMD-0092"} <= lost
    observing = {t.trade_id for t in book if isinstance(t.contract, Contract) and day in t.contract.dates
                 and "ORLUMA" in t.contract.underlyings}  # fmt: skip
    assert lost <= observing
