"""The bulk walk against the contract's own ageing: every payment, its amount and its date, on random contracts."""

from collections import defaultdict

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from pricer.contracts.ageing import start, walk
from pricer.contracts.exercise import Exercise
from pricer.contracts.feature import Ending
from pricer.engines.contract_walk.walker import ENDINGS, walk_paths
from tests.property.seasoned_contracts_at_random import DAYS, path, seasoned_contracts

PATHS = 6


class Recorded:
    """All payments by path: amounts by (day observed, day of payment)."""

    def __init__(self):
        self.paid = [defaultdict(float) for _ in range(PATHS)]

    def pay(self, observed_on, payment_date, amounts, where):
        for p in np.flatnonzero(where):
            self.paid[p][observed_on, payment_date] += float(np.broadcast_to(amounts, where.shape)[p])


def usable(contract):
    return all(feature.exercised for feature in contract.features if isinstance(feature, Exercise))


def aged(contract, progress, days, prices):
    """The state after ``days`` of (n_days, n) prices."""
    return walk(contract, progress, days, prices).progress


@settings(deadline=None, max_examples=200)
@given(seasoned_contracts(), st.integers(0, 2**32 - 1), st.integers(-1, len(DAYS) - 2))
def test_the_bulk_walk_pays_what_ageing_pays_from_any_day_on(contract, seed, tonight):
    assume(usable(contract))
    n = len(contract.underlyings)
    past = path(seed, n)
    known = tuple(day for day in contract.dates if tonight >= 0 and day <= DAYS[tonight])
    rows = [DAYS.index(day) for day in known]
    progress = aged(contract, start(contract), known, past[rows])
    assume(progress.ending is None)
    dates = contract.dates[len(known) :]
    ahead = np.stack([path(seed + 1 + p, n)[[DAYS.index(day) for day in dates]] for p in range(PATHS)], axis=2)
    try:
        expected = [aged(contract, progress, dates, ahead[:, :, p]) for p in range(PATHS)]
    except ValueError:
        with pytest.raises(ValueError, match="never moved"):
            walk_paths(contract, progress, dates, ahead, Recorded())
        return
    ledger = Recorded()
    ends = walk_paths(contract, progress, dates, ahead, ledger)
    before = len(progress.payments)
    for p, end in enumerate(expected):
        due = defaultdict(float)
        for payment in end.payments[before:]:
            due[payment.observed_on, payment.payment_date] += payment.amount
        keys = {key for found in (due, ledger.paid[p]) for key, amount in found.items() if amount}
        for key in keys:
            assert ledger.paid[p][key] == pytest.approx(due[key], rel=1e-9, abs=1e-11), key
        assert ENDINGS[ends.kinds[p]] is end.ending
        assert dates[ends.places[p]] == end.ended_on
        if ends.hit is not None:
            barriers = [state for state in end.features if hasattr(state, "hit_on")]
            assert ends.hit[p] == any(state.hit_on for state in barriers)


def test_endings_have_the_numbers_that_ends_use():
    assert set(ENDINGS) == set(Ending)
