"""Legs pay, path by path, what the contract pays."""

import math

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from pricer.contracts.ageing import start, walk
from pricer.contracts.aggregate import Aggregate
from pricer.contracts.barrier import Barrier
from pricer.contracts.contract import Contract
from pricer.contracts.coupons import Coupon, Coupons
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.levels import Levels
from pricer.contracts.life_cycle import Status, as_of
from pricer.contracts.notes import autocallable, knock_in
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.redemption import Redemption
from pricer.contracts.remainder import remainder
from pricer.contracts.trigger import Direction, Trigger
from pricer.engines.contract_legs.mapping import contract_legs
from pricer.engines.contract_legs.result import NotAsLegs
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.paths import plain
from tests.property.seasoned_contracts_at_random import (
    DAYS,
    aggregates,
    autocalls,
    barriers,
    coupons,
    numbers,
    observation,
    path,
    record,
    seasoned_contracts,
    statistics,
)


def _discount(day):
    return math.exp(-0.001 * (day - DAYS[0]).days)


def _terms(standing):
    contract, today = standing.contract, standing.valuation_date
    dates = tuple(day for day in contract.dates if day > today)
    n = len(contract.underlyings)
    return ContractTerms(
        as_of=standing,
        contract=contract,
        dates=dates,
        times=np.array([standing.years_to(day) for day in dates]),
        forwards=np.full((len(dates), n), 100.0),
        floors=np.zeros((len(dates), n)),
        covariances=np.tile(0.0009 * np.eye(n), (len(dates), 1, 1)),
        discount=_discount,
        known_value=0.0,
        unit_notional=1.0,
        random_spots=np.full(n, 100.0),
        rates=np.ones(n),
    )


def _by_walking(standing, prices):
    contract = standing.contract
    places = [DAYS.index(day) for day in contract.dates]
    found = walk(contract, start(contract), contract.dates, prices[places]).progress
    later = [p for p in found.payments if p.observed_on > standing.valuation_date]
    return sum(p.amount * _discount(p.payment_date) for p in later), found


def _by_legs(found, terms, prices):
    levels = np.stack([prices[DAYS.index(day)] for day in terms.dates])[:, :, np.newaxis]
    return sum(float(plain.leg_values(leg, found.legs, levels)[0]) for leg in found.legs)


def _check(contract, seed, today):
    n = len(contract.underlyings)
    past = path(seed, n)
    standing = as_of(contract, today, record(past, contract.underlyings), {})
    if standing.status is not Status.LIVE:
        return None
    terms = _terms(standing)
    found = contract_legs(terms)
    if isinstance(found, NotAsLegs):
        return found
    now = DAYS.index(today) + 1
    for other in range(seed, seed + 6):
        future = path(other, n)
        mixed = np.concatenate((past[:now], past[now - 1] * future[now:] / future[now - 1]))
        expected, progress = _by_walking(standing, mixed)
        assert _by_legs(found, terms, mixed) == pytest.approx(expected, rel=1e-11, abs=1e-13)
        _check_stops(found, terms, mixed, progress)
    return found


def _check_stops(found, terms, prices, progress):
    levels = np.stack([prices[DAYS.index(day)] for day in terms.dates])[:, :, np.newaxis]
    sampled = [plain.stops(leg, levels, terms.times) for leg in found.legs]
    life = found.life_of(sampled, terms.dates)
    ended = terms.as_of.years_to(progress.ended_on)
    assert life.expected_life == pytest.approx(ended, abs=1e-12)
    happened = [(end.day, end.what) for end in life.ends if end.probability == 1.0]
    if str(progress.ending) != "expired":
        assert happened == [(progress.ended_on, str(progress.ending))]
    else:
        assert happened == []
    if life.knocked is not None and not math.isnan(life.knocked):
        assert life.knocked == float(_is_hit(terms.as_of, progress))


def _is_hit(standing, progress):
    """Whether a barrier that still matters, or one before tonight, was hit."""
    left = remainder(standing).features
    pairs = zip(standing.contract.features, standing.progress.features, progress.features, strict=True)
    for barrier, before, after in pairs:
        if isinstance(barrier, Barrier) and before.hit_on is not None:
            return True
        matters = any(getattr(barrier, "schedule", None) is getattr(feature, "schedule", None) for feature in left)
        if isinstance(barrier, Barrier) and after.hit_on is not None and matters:
            return True
    return False


@settings(max_examples=150)
@given(seasoned_contracts(), st.integers(0, 2**20), st.sampled_from(DAYS[:-1]))
def test_legs_pay_what_any_contract_pays(contract, seed, today):
    _check(contract, seed, today)


@st.composite
def sayable(draw):
    """Contracts of the kinds that legs are made for."""
    n = draw(st.integers(1, 3))
    names = ("A", "B", "C")[:n]
    setting = draw(st.none() | st.just(DAYS[1:2]))
    levels = Levels(names, None, setting) if setting else Levels(names, tuple(draw(st.floats(80, 120)) for _ in names))
    made = draw(st.sampled_from([(coupons,), (coupons, autocalls), (autocalls,), (coupons, autocalls, barriers)]))
    aggregate = draw(aggregates(n))
    statistic = draw(st.sampled_from([ExpiryLevel(DAYS[-1], aggregate), draw(statistics(n))]))
    payout = draw(st.sampled_from([Redemption(put_strike=1.0), Profile(ProfileKind.FORWARD, 1.0)]))
    return Contract(levels, statistic, payout, observation(DAYS[-1]), tuple(draw(kind(n)) for kind in made))


@settings(max_examples=150)
@given(sayable(), st.integers(0, 2**20), st.sampled_from(DAYS[:-1]))
def test_legs_pay_what_notes_pay(contract, seed, today):
    _check(contract, seed, today)


@given(st.integers(1, 3), st.data(), st.integers(0, 2**20), st.sampled_from(DAYS[:-1]))
def test_barriers_of_every_kind_are_legs(n, data, seed, today):
    found = tuple(data.draw(barriers(n)) for _ in range(data.draw(st.integers(1, 3))))
    names = ("A", "B", "C")[:n]
    expiry = ExpiryLevel(DAYS[-1], data.draw(aggregates(n)))
    contract = Contract(
        Levels(names, (100.0,) * n), expiry, Profile(ProfileKind.CALL, 1.0), observation(DAYS[-1]), found
    )
    _check(contract, seed, today)


@given(st.booleans(), st.booleans(), numbers, numbers, st.integers(0, 2**20), st.sampled_from(DAYS[:-1]))
def test_an_everyday_note_is_always_legs(at_expiry, memory, call, level, seed, today):
    assume(level < call)
    n, names = 3, ("A", "B", "C")
    worst = Aggregate.worst_of(n)
    calls = tuple(map(observation, DAYS[10::10]))
    watched = calls[-1:] if at_expiry else tuple(map(observation, DAYS[4:]))
    note = autocallable(
        Levels(names, (100.0,) * n),
        worst,
        observation(DAYS[-1]),
        calls,
        (call,) * len(calls),
        (1.0,) * len(calls),
        Redemption(put_strike=1.0),
        coupons_on(calls, worst, level, memory=memory),
        knock_in(worst, watched, level),
    )
    assert not isinstance(_check(note, seed, today), NotAsLegs)


def coupons_on(schedule, aggregate, level, *, memory):
    rows = tuple(Coupon(seen.day, seen.payment_date, 0.02, level) for seen in schedule)
    return Coupons(rows, Trigger(Direction.UP, aggregate), memory)
