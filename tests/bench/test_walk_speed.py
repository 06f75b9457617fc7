"""What a walk costs beside its error: the references that stand beside other engines' values."""

from __future__ import annotations

import time
from dataclasses import replace

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.levels import Levels
from pricer.contracts.notes import autocallable, knock_in
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction, Trigger
from pricer.engines.contract_walk.engine import walk_reference
from pricer.market.correlation import checked
from tests.unit.markets import small_market
from tests.unit.walk_cases import ASKED, contract, paid_at_once, quarter, terms_of, weekdays

pytestmark = pytest.mark.bench

NAMES = tuple(f"NAME{i}" for i in range(5))
LEVELS = Levels(NAMES, (100.0,) * 5)
WORST = Aggregate.worst_of(5)


def five_names():
    market = small_market()
    one = market.underlyings["ARVENNE"]
    underlyings = {name: replace(one, underlying_id=name) for name in NAMES}
    matrix = checked(NAMES, np.full((5, 5), 0.5) + 0.5 * np.eye(5))[0]
    return replace(market, underlyings=underlyings, correlation=matrix)


def note():
    days = [quarter(k) for k in range(1, 19)]
    calls = list(map(paid_at_once, days[:-1]))
    levels, amounts = [1.0] * 17, [1.0 + 0.02 * k for k in range(1, 18)]
    barrier = knock_in(WORST, [paid_at_once(days[-1])], 0.6)
    last = paid_at_once(days[-1])
    return autocallable(LEVELS, WORST, last, calls, levels, amounts, Redemption(put_strike=1.0), barrier=barrier)


def daily_barrier():
    days = weekdays(quarter(12))[-750:]
    trigger = Trigger(Direction.DOWN, WORST)
    barrier = Barrier(BarrierKind.IN, trigger, tuple(map(paid_at_once, days)), (0.6,) * len(days))
    return contract(barrier, names=NAMES, levels=LEVELS, last=days[-1], payout=Profile(ProfileKind.PUT, 1.0))


@pytest.mark.parametrize(("make", "seconds", "error"), [(note, 0.6, 5e-4), (daily_barrier, 1.5, 3e-3)])
def test_a_reference_costs_no_more_than_it_may(make, seconds, error):
    trade, terms, market = terms_of(make(), five_names())
    walk_reference(trade, terms, market, ASKED, smiled=False)
    start = time.process_time()
    found = walk_reference(trade, terms, market, ASKED, smiled=False)
    taken = time.process_time() - start
    print(f"{make.__name__}: {found.value:.5f} +- {found.error:.1e} in {taken:.2f} s CPU, {found.source}")
    assert taken < seconds
    assert found.error < error
