"""What is left of a contract pays what the whole of it still pays, on every path."""

from datetime import date

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from pricer.contracts.ageing import start, walk
from pricer.contracts.life_cycle import Status, as_of
from pricer.contracts.remainder import remainder, remaining
from tests.property.seasoned_contracts_at_random import DAYS, path, record, seasoned_contracts


def _paid(contract, prices, after: date):
    places = [DAYS.index(day) for day in contract.dates]
    found = walk(contract, start(contract), contract.dates, prices[places]).progress
    later = [(p.payment_date, p.reason, p.amount) for p in found.payments if p.observed_on > after]
    return [(day, reason) for day, reason, _ in later], [amount for _, _, amount in later], found.ended_on


@given(seasoned_contracts(), st.integers(0, 2**20), st.sampled_from(DAYS[:-1]))
def test_the_remainder_pays_what_the_contract_still_pays(contract, seed, today):
    prices = path(seed, len(contract.underlyings))
    standing = as_of(contract, today, record(prices, contract.underlyings), {})
    left = remainder(standing)
    if standing.status is not Status.LIVE:
        assert left == contract
        return
    for other in (seed, seed + 1, seed + 2):
        future = path(other, len(contract.underlyings))
        n = DAYS.index(today) + 1
        mixed = np.concatenate((prices[:n], prices[n - 1] * future[n:] / future[n - 1]))
        whole_when, whole_amounts, whole_end = _paid(contract, mixed, today)
        when, amounts, end = _paid(left, mixed, today)
        assert (when, end) == (whole_when, whole_end)
        assert amounts == pytest.approx(whole_amounts, rel=1e-12, abs=1e-14)


@given(seasoned_contracts(), st.integers(0, 2**20), st.sampled_from(DAYS[:-1]))
def test_what_remains_keeps_the_states_of_its_features(contract, seed, today):
    prices = path(seed, len(contract.underlyings))
    standing = as_of(contract, today, record(prices, contract.underlyings), {})
    found = remaining(standing)
    states = dict(zip(map(id, contract.features), standing.progress.features, strict=True))
    assert len(found.features) == len(found.contract.features)
    for feature, state in zip(found.contract.features, found.features, strict=True):
        if id(feature) in states:
            assert state is states[id(feature)]
