"""What must hold for any contract with any past."""

from dataclasses import replace

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from pricer.contracts.ageing import start, walk
from pricer.contracts.autocall import Autocall
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.contract import Contract
from pricer.contracts.feature import Ending
from pricer.contracts.fixings import Fixings
from pricer.contracts.life_cycle import Status, as_of
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction, Trigger
from tests.property.seasoned_contracts_at_random import (
    DAYS,
    aggregates,
    barriers,
    observation,
    path,
    record,
    rows,
    seasoned_contracts,
)

UNHURRIED = settings(max_examples=60, deadline=None)
seeds = st.integers(0, 10_000)
days = st.integers(0, len(DAYS) - 1)


def on(contract, day, prices, fixings=None, known=None):
    today = dict(zip(contract.underlyings, prices[DAYS.index(day)].tolist(), strict=True))
    fixings = record(prices, contract.underlyings) if fixings is None else fixings
    return as_of(contract, day, fixings, today, known=known)


@UNHURRIED
@given(seasoned_contracts(), seeds)
def test_ageing_day_by_day_equals_ageing_at_once(contract, seed):
    prices = path(seed, len(contract.underlyings))
    fixings = record(prices, contract.underlyings)
    state = None
    for day in DAYS:
        state = on(contract, day, prices, fixings, known=state)
        assert state == on(contract, day, prices, fixings)
    assert state.ending is not None


@UNHURRIED
@given(seasoned_contracts(), seeds, days, st.randoms(use_true_random=False))
def test_the_order_of_fixings_and_those_of_other_names_and_later_days_do_not_matter(contract, seed, i, random):
    prices = path(seed, len(contract.underlyings))
    told = [row for row in rows(prices, contract.underlyings) if row.day <= DAYS[i]]
    shuffled = [
        *rows(prices, contract.underlyings),
        *(replace(row, underlying=f"OTHER {row.underlying}") for row in told),
    ]
    random.shuffle(shuffled)
    first, second = (on(contract, DAYS[i], prices, Fixings.from_rows(each)) for each in (told, shuffled))
    assert first == second


@UNHURRIED
@given(seasoned_contracts(), seeds, days)
def test_a_spot_that_turns_out_to_be_the_fixing_changes_nothing_but_the_warning(contract, seed, i):
    prices = path(seed, len(contract.underlyings))
    before = Fixings.from_rows(row for row in rows(prices, contract.underlyings) if row.day < DAYS[i])
    assumed, fixed = on(contract, DAYS[i], prices, before), on(contract, DAYS[i], prices)
    assert assumed.progress == fixed.progress
    assert (assumed.status, assumed.to_be_paid) == (fixed.status, fixed.to_be_paid)
    assert bool(assumed.assumed) == any(issue.code == "spot-for-fixing" for issue in assumed.issues)


@UNHURRIED
@given(seasoned_contracts(), seeds, days, st.data())
def test_a_missing_fixing_is_told_or_did_not_matter(contract, seed, i, data):
    prices = path(seed, len(contract.underlyings))
    gap = data.draw(st.integers(0, i))
    name = data.draw(st.sampled_from(contract.underlyings))
    kept = [row for row in rows(prices, contract.underlyings) if not (row.underlying == name and row.day == DAYS[gap])]
    whole, holed = on(contract, DAYS[i], prices), on(contract, DAYS[i], prices, Fixings.from_rows(kept))
    if holed.status is Status.UNDETERMINED:
        assert [issue.found for issue in holed.issues] == [f"no fixing of {name} on {DAYS[gap]}"]
        assert gap < i  # today's spot stands in for today's fixing
    else:
        assert holed.progress == whole.progress


@UNHURRIED
@given(seasoned_contracts(), seeds)
def test_nothing_is_paid_before_it_is_observed_nor_observed_after_the_end(contract, seed):
    prices = path(seed, len(contract.underlyings))
    state = on(contract, DAYS[-1], prices)
    for payment in state.progress.payments:
        assert payment.observed_on <= min(payment.payment_date, state.progress.ended_on)
    endings = [p for p in state.progress.payments if p.reason in ("call", "rebate", "exercise", "final payoff")]
    assert len(endings) == 1
    for early in (i for i, day in enumerate(DAYS) if day < state.progress.ended_on):
        paid = on(contract, DAYS[early], prices).progress.payments
        assert paid == state.progress.payments[: len(paid)]


@UNHURRIED
@given(seasoned_contracts(), seeds, st.data())
def test_a_knock_in_and_a_knock_out_add_up_to_the_contract_without_barrier(contract, seed, data):
    n = len(contract.underlyings)
    barrier = replace(data.draw(barriers(n)), instead=Redemption(capital=0.0), rebate_at_hit=None)
    plain = replace(contract, features=())
    prices = path(seed, n)
    final = on(plain, DAYS[-1], prices).progress.payments[-1].amount
    parts = [
        on(replace(plain, features=(replace(barrier, kind=kind),)), DAYS[-1], prices).progress.payments[-1].amount
        for kind in BarrierKind
    ]
    assert sorted(parts) == sorted((0.0, final))


@UNHURRIED
@given(seasoned_contracts(), seeds, st.data())
def test_triggers_out_of_reach_change_nothing(contract, seed, data):
    n = len(contract.underlyings)
    schedule = tuple(observation(day) for day in DAYS[10::5])
    up = Trigger(Direction.UP, data.draw(aggregates(n)))
    beyond = (1e6,) * len(schedule)
    call = Autocall(schedule, up, beyond, beyond)
    out = Barrier(BarrierKind.OUT, up, schedule, beyond, rebate_at_hit=1.0)
    prices = path(seed, n)
    watched = replace(contract, features=(*contract.features, call, out))
    for day in (DAYS[20], DAYS[-1]):
        assert on(watched, day, prices).progress.payments == on(contract, day, prices).progress.payments


@UNHURRIED
@given(seasoned_contracts(), seeds, st.floats(0.5, 2.0))
def test_performances_do_not_depend_on_the_unit_of_the_prices(contract, seed, unit):
    """Up to rounding, which a level exactly at a trigger could turn; random levels are not at one."""
    levels = contract.levels
    scaled = None if levels.references is None else tuple(r * unit for r in levels.references)
    other = replace(contract, levels=replace(levels, references=scaled))
    prices = path(seed, len(contract.underlyings))
    first, second = on(contract, DAYS[-1], prices), on(other, DAYS[-1], prices * unit)
    assert first.ending is second.ending
    np.testing.assert_allclose(
        [p.amount for p in first.progress.payments], [p.amount for p in second.progress.payments], rtol=1e-9, atol=1e-12
    )


@UNHURRIED
@given(seasoned_contracts(), seeds)
def test_a_path_walked_in_bulk_pays_what_the_aged_trade_was_paid(contract, seed):
    prices = path(seed, len(contract.underlyings))
    chosen = [i for i, day in enumerate(DAYS) if day in contract.dates]
    walked = walk(contract, start(contract), contract.dates, prices[chosen]).progress
    assert walked == on(contract, DAYS[-1], prices).progress
    assert isinstance(walked.ending, Ending)


@UNHURRIED
@given(seasoned_contracts())
def test_a_contract_compares_by_its_terms(contract):
    copy = Contract(**{name: getattr(contract, name) for name in Contract.__slots__})
    assert copy == contract
    assert hash(copy) == hash(contract)
