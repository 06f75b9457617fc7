"""Barriers watched at all times under a smile: legs move them by the local volatility at the barrier, as walks do."""

from datetime import timedelta

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.book import Trade
from pricer.contracts.contract import Contract
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.levels import Levels
from pricer.contracts.observation import Observation
from pricer.contracts.option import Conversion
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction, Trigger
from pricer.engines.contract_legs.mapping import contract_legs
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.contract_walk.between_dates import shift_factors
from pricer.market.local_vol_surface import LocalVolSurface
from pricer.market.standing import standing
from tests.unit.markets import TODAY
from tests.unit.smiled_markets import LEVELS, real_market

DAYS = tuple(day for i in range(300) if (day := TODAY + timedelta(days=i)).weekday() < 5)
MARKET = real_market()


def terms_of(names, direction, level, conversion):
    trigger = Trigger(direction, Aggregate.worst_of(len(names)))
    schedule = tuple(Observation(day, day) for day in DAYS)
    barrier = Barrier(BarrierKind.IN, trigger, schedule, (level,) * len(DAYS), Redemption(capital=1.0), continuous=True)
    contract = Contract(
        Levels(names, tuple(LEVELS[name] for name in names), conversion=conversion),
        ExpiryLevel(DAYS[-1], Aggregate.worst_of(len(names))),
        Redemption(put_strike=1.0),
        schedule[-1],
        (barrier,),
    )
    trade = Trade("B1", contract, 1.0, "EUR", "")
    terms = ContractTerms.of(trade, standing(trade, MARKET), MARKET)
    surfaces = [LocalVolSurface.from_implied(MARKET.implied_surface(name), horizon=terms.years) for name in names]
    return terms, barrier, surfaces


def moves_of(legs):
    """By date what levels are divided by besides their references, (n_dates, n)."""
    leg = next(leg for leg in legs.legs if any(event.above or event.below for event in leg.events))
    found = [event.above or event.below for event in leg.events if event.above or event.below]
    return np.array([trigger.reading.references for trigger in found])


@pytest.mark.parametrize(("direction", "level"), [(Direction.DOWN, 0.65), (Direction.UP, 1.3)])
@pytest.mark.parametrize("conversion", [Conversion.QUANTO, Conversion.COMPOSITE])
def test_the_barrier_is_moved_as_far_as_in_walks(direction, level, conversion):
    names = ("ARVENNE", "CADMUS")
    terms, barrier, surfaces = terms_of(names, direction, level, conversion)
    references = np.array([LEVELS[name] for name in names])
    found = references / moves_of(contract_legs(terms, surfaces))
    np.testing.assert_allclose(found, shift_factors(barrier, terms, references, surfaces), rtol=1e-12)


def test_skewed_prices_move_a_low_barrier_much_further_than_lognormal_ones():
    terms, _, surfaces = terms_of(("BELCOR",), Direction.DOWN, 0.65, Conversion.QUANTO)
    smiled, lognormal = (np.log(moves_of(contract_legs(terms, s)) / LEVELS["BELCOR"]) for s in (surfaces, ()))
    # Measured: 1.15 to 1.4 % against 0.85 %, worth 7.6 bp of a reverse convertible over a year.
    assert np.all(smiled > 1.2 * lognormal)
