"""Walks with cash dividends, other currencies and smiles: European contracts have values by engines of their own."""

from datetime import date

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.book import Trade
from pricer.contracts.contract import Contract
from pricer.contracts.levels import Levels
from pricer.contracts.observation import Observation
from pricer.contracts.option import Conversion
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.trigger import Direction, Trigger
from pricer.engines.contract_walk.engine import walk_reference, walk_value
from pricer.engines.contract_walk.settings import WalkSettings
from pricer.engines.local_vol_model import local_vol_value, lognormal_value_by_paths
from pricer.engines.local_vol_monte_carlo import LocalVolSettings
from pricer.engines.model_value import Asked
from pricer.engines.surface_replication import surface_reference
from pricer.engines.unit_terms import UnitTerms
from tests.unit.smiled_markets import LEVELS, real_market
from tests.unit.walk_cases import CALL, contract, paid_at_once, performances, terms_of

EXPIRY = date(2028, 3, 17)
DATES = (date(2027, 3, 19), date(2027, 9, 17), EXPIRY)
ASKED = Asked("T1", 3, 1e-4, 1e-3, 1e-3)


def european(*names, conversion=None, profile=CALL, aggregate=None):
    levels = Levels(names, tuple(LEVELS[name] for name in names), conversion=conversion)
    return contract(names=names, levels=levels, last=EXPIRY, payout=profile, aggregate=aggregate)


def both(found, market, *, smiled):
    """The walk's value and that of the engine for European options."""
    trade, terms, _ = terms_of(found, market)
    walked = walk_value(trade, terms, market, ASKED, smiled=smiled)
    plain = Trade("T1", found.as_european(), 1.0, "EUR")
    engine = local_vol_value if smiled else lognormal_value_by_paths
    return walked, engine(plain, UnitTerms.of(plain, market), market, ASKED, LocalVolSettings())


def agree(walked, other):
    error = np.hypot(walked.sample.standard_error, other.sample.standard_error)
    assert abs(walked.sample.value - other.sample.value) < 4.0 * error
    assert error < 3e-4
    errors = np.hypot(walked.ratios.delta_errors, other.ratios.delta_errors)
    assert np.all(np.abs(walked.ratios.deltas - other.ratios.deltas) < 4.5 * errors + 1e-6)


@pytest.mark.parametrize("smiled", [False, True], ids=["lognormal", "smiles"])
@pytest.mark.parametrize("conversion", [Conversion.QUANTO, Conversion.COMPOSITE])
def test_a_european_contract_is_worth_what_its_own_engine_says(conversion, smiled):
    """On the worst of a payer of cash dividends and a level in another currency."""
    market = real_market(smiles=smiled)
    agree(*both(european("ARVENNE", "CADMUS", conversion=conversion), market, smiled=smiled))


def test_one_smile_is_given_back():
    market = real_market()
    found = european("BELCOR", profile=Profile(ProfileKind.PUT, 0.8))
    trade, terms, _ = terms_of(found, market)
    plain = Trade("T1", found.as_european(), 1.0, "EUR")
    known = surface_reference(UnitTerms.of(plain, market), (market.implied_surface("BELCOR"),))
    walked = walk_reference(trade, terms, market, ASKED, smiled=True)
    assert abs(walked.value - known.value) < 3.0 * walked.error + walked.allowance + known.allowance + known.error
    assert walked.error < 2e-4 and walked.allowance < 2e-4


def barrier_put(names=("ARVENNE", "BELCOR")):
    trigger = Trigger(Direction.DOWN, Aggregate.worst_of(len(names)))
    barrier = Barrier(BarrierKind.IN, trigger, tuple(map(paid_at_once, DATES)), (0.8,) * 3)
    return contract(barrier, names=names, last=EXPIRY, payout=Profile(ProfileKind.PUT, 1.0))


def test_daily_dates_take_one_step_each_and_say_that_their_bias_is_not_measured():
    market = real_market()
    days = tuple(
        day for day in (date.fromordinal(d) for d in range(date(2026, 12, 1).toordinal(), DATES[0].toordinal()))
    )
    trigger = Trigger(Direction.DOWN, Aggregate.worst_of(1))
    barrier = Barrier(BarrierKind.OUT, trigger, tuple(map(paid_at_once, days)), (0.8,) * len(days))
    levels = performances("BELCOR")
    found = Contract(levels, contract(last=DATES[0]).statistic, CALL, Observation(DATES[0], DATES[0]), (barrier,))
    trade, terms, _ = terms_of(found, market)
    value = walk_value(trade, terms, market, ASKED, WalkSettings(maximum_cells=1e6), smiled=True)
    assert value.time_steps == len(days) + 1
    assert "bias was not measured" in value.sample.ending


def test_steps_halved_tell_their_bias():
    market = real_market()
    trade, terms, _ = terms_of(barrier_put(), market)
    coarse, fine = (
        walk_value(trade, terms, market, ASKED, WalkSettings(steps=steps, maximum_cells=8e6), smiled=True)
        for steps in (4, 64)
    )
    assert fine.time_steps >= 60 and coarse.time_steps < 20
    gap = abs(coarse.sample.value - fine.sample.value)
    assert gap < 4.0 * np.hypot(coarse.sample.standard_error, fine.sample.standard_error)
