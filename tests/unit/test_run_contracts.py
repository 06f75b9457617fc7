"""Runs over contracts: the same to the last bit whoever is beside them, what has ended, what is refused, overhedges."""

from __future__ import annotations

from dataclasses import replace
from datetime import date

import pytest

from pricer.contracts.average import Average, AverageOf
from pricer.contracts.book import Book, Trade
from pricer.contracts.contract import Contract
from pricer.contracts.exercise import Exercise, ExercisedBy
from pricer.contracts.fixings import Fixing, Fixings
from pricer.contracts.locked_in import LockedIn
from pricer.contracts.observation import Observation
from pricer.contracts.overhedge import Overhedge
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.writer import Writer
from pricer.engines.contract_value import ContractSettings
from pricer.engines.contract_walk.settings import WalkSettings
from pricer.run.admission import admit
from pricer.run.outcome import Status
from pricer.run.pricing import price
from pricer.run.settings import Settings
from tests.property.test_seasoning_consistency import (
    BASKET,
    CONTRACTS,
    EXPIRY,
    FIXED,
    NAMES,
    NOTE,
    OBSERVED,
    SPOTS,
    TODAY,
    market_on,
    paid,
)

QUICK = ContractSettings(walk=WalkSettings(reference_cells=1e5, maximum_cells=1e6))
CALL = Profile(ProfileKind.CALL, 1.0)
PAST = date(2026, 11, 25)
LOCKED = Contract(FIXED, LockedIn(OBSERVED[:2], 2), CALL, paid(EXPIRY))
ENDED = Contract(
    FIXED, Average((PAST,), BASKET, AverageOf.UNDERLYINGS), CALL, Observation(PAST, date(2026, 12, 2))
)  # fmt: skip
FIXINGS = Fixings.from_rows(
    Fixing(name, PAST, level) for name, level in zip(NAMES, (126.0, 60.0), strict=True)
)  # performances of 1.2 each: the call pays 0.2


def run(*trades, workers=2, fixings=FIXINGS, **settings):
    market = market_on(TODAY, SPOTS, fixings)
    return price(Book("night", trades), market, Settings(workers=workers, precision_bp=5.0, contract=QUICK, **settings))


def trade(contract, trade_id="T", position=1e6):
    return Trade(trade_id, contract, position, "EUR")


def numbers(outcome):
    return {
        v.trade_id: (v.value, v.standard_error, v.lower, v.upper, v.deltas, v.chances, v.overhedge_cost)
        for v in outcome.valuations
    }


def test_numbers_hang_neither_on_workers_nor_on_order_nor_on_company():
    trades = [
        trade(NOTE, "NOTE"),
        trade(LOCKED, "LOCKED", -2e6),
        trade(CONTRACTS["averaged strike"], "STRIKE"),
        trade(ENDED, "ENDED"),
    ]
    first = numbers(run(*trades, workers=1))
    again = numbers(run(*reversed(trades), workers=2))
    assert repr(again) == repr({name: first[name] for name in again})
    (alone,) = numbers(run(trades[0])).values()
    assert repr(alone) == repr(first["NOTE"])


def test_a_trade_that_ended_is_worth_what_is_still_to_be_paid():
    long, short, settled = run(
        trade(ENDED, "LONG"),
        trade(ENDED, "SHORT", -1e6),
        trade(replace(ENDED, expiry=Observation(PAST, date(2026, 11, 27))), "SETTLED"),
    ).valuations
    discount = market_on(TODAY, SPOTS, FIXINGS).discount_factor("EUR", "", date(2026, 12, 2))
    assert long.value == pytest.approx(0.2e6 * discount, rel=1e-12)
    assert short.value == -long.value
    assert settled.value == 0.0
    assert [v.life_status for v in (long, short, settled)] == ["ended, to be paid", "ended, to be paid", "settled"]
    assert {v.status for v in (long, short, settled)} == {Status.PRICED}
    assert (long.deltas, long.expected_life) == ((), 0.0)


def test_a_missing_fixing_refuses_its_own_trade_and_no_other():
    outcome = run(trade(ENDED, "ENDED"), trade(NOTE, "NOTE"), fixings=Fixings())
    assert [v.trade_id for v in outcome.valuations] == ["NOTE"]
    (refusal,) = outcome.refusals
    assert (refusal.trade_id, [issue.code for issue in refusal.issues]) == (
        "ENDED",
        2 * ["missing-fixing"],
    )  # a name each
    assert outcome.exit_status == 1


def test_the_overhedge_costs_either_side_and_leaves_values_alone():
    book = (trade(NOTE, "LONG"), trade(NOTE, "SHORT", -1e6), trade(CONTRACTS["average of a basket"], "SMOOTH"))
    plain, safer = run(*book), run(*book, overhedge=Overhedge(0.02, 0.01))
    assert [v.value for v in safer.valuations] == [v.value for v in plain.valuations]
    assert {v.overhedge_cost for v in plain.valuations} == {None}
    long, short, smooth = (v.overhedge_cost for v in safer.valuations)
    assert long < -100.0
    assert short < -100.0
    assert smooth == 0.0


def test_a_contract_that_no_engine_covers_is_refused_in_words():
    short_put = Contract(
        FIXED, Average((EXPIRY,), BASKET), Profile(ProfileKind.FORWARD, 1.0), paid(EXPIRY), writer=Writer("VELDRAM")
    )
    outcome = run(trade(short_put, "DOUBTFUL"), trade(NOTE, "NOTE"))
    assert [v.trade_id for v in outcome.valuations] == ["NOTE"]
    assert {issue.code for issue in outcome.refusals[0].issues} <= {"no-writer-credit", "not-covered"}


def test_a_right_beside_an_average_is_refused_before_anything_is_priced():
    right = Exercise(ExercisedBy.HOLDER, tuple(map(paid, OBSERVED)), BASKET, CALL)
    average = Contract(FIXED, Average((*OBSERVED, EXPIRY), BASKET), CALL, paid(EXPIRY), (right,))
    admitted = admit(Book("night", (trade(average, "BOTH"), trade(NOTE, "NOTE"))), market_on(TODAY, SPOTS, FIXINGS))
    assert [kept.trade_id for kept in admitted.trades] == ["NOTE"]
    (issue,) = admitted.refusals[0].issues
    assert issue.code == "not-covered"
    assert "average" in issue.found


def test_events_and_states_come_with_the_values():
    outcome = run(trade(NOTE, "NOTE"), trade(ENDED, "ENDED", -1e6))
    assert [(e.trade_id, e.day, e.amount) for e in outcome.events if "payment" in e.what] == [
        ("ENDED", date(2026, 12, 2), pytest.approx(-0.2e6))
    ]
    assert [facts.trade.trade_id for facts in outcome.contracts] == ["NOTE", "ENDED"]
    (note, _) = outcome.valuations
    assert note.call_probability == pytest.approx(sum(c.probability for c in note.chances))
    assert 0.0 < note.knock_probability < 1.0
    assert 0.0 < note.expected_life < 1.2
