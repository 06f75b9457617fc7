"""A barrier under a whole smile, walked, against QuantLib's finite differences on the same local volatility."""

from datetime import date

import pytest
import QuantLib as ql

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.fixings import Fixing
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.trigger import Direction, Trigger
from pricer.engines.contract_walk.engine import walk_reference
from pricer.engines.contract_walk.settings import WalkSettings
from pricer.market.local_vol_surface import LocalVolSurface
from tests.reference.quantlib_local_vol import tabulated_in_quantlib
from tests.unit.markets import TODAY
from tests.unit.smiled_markets import real_market
from tests.unit.walk_cases import ASKED, contract, paid_at_once, performances, terms_of, weekdays

EXPIRY = date(2027, 9, 17)


def barrier_on_the_martingale(market, kind, level):
    """Levels move with the forward, so that the barrier stays where it is for X; watched at all times."""
    days = (TODAY, *weekdays(EXPIRY))
    forwards = [1.0, *(market.affine_price("BELCOR").at(day).scale / 50.0 for day in days[1:])]
    levels = tuple(level * forward for forward in forwards)
    trigger = Trigger(Direction.DOWN, Aggregate.worst_of(1))
    barrier = Barrier(kind, trigger, tuple(map(paid_at_once, days)), levels, continuous=True)
    payout = Profile(ProfileKind.PUT, forwards[-1])
    found = contract(barrier, levels=performances("BELCOR"), last=EXPIRY, payout=payout, names=("BELCOR",))
    return found, forwards[-1]


def in_quantlib(market, kind, level, years):
    today = ql.Date(TODAY.day, TODAY.month, TODAY.year)
    ql.Settings.instance().evaluationDate = today
    local = LocalVolSurface.from_implied(market.implied_surface("BELCOR"), horizon=years)
    days = ql.Actual365Fixed()
    zero = ql.YieldTermStructureHandle(ql.FlatForward(today, 0.0, days))
    black = ql.BlackVolTermStructureHandle(ql.BlackConstantVol(today, ql.NullCalendar(), 0.3, days))
    surface = ql.LocalVolTermStructureHandle(tabulated_in_quantlib(local, today))
    process = ql.GeneralizedBlackScholesProcess(ql.QuoteHandle(ql.SimpleQuote(1.0)), zero, zero, black, surface)
    kinds = {BarrierKind.IN: ql.Barrier.DownIn, BarrierKind.OUT: ql.Barrier.DownOut}
    exercise = ql.EuropeanExercise(today + (EXPIRY - TODAY).days)
    option = ql.BarrierOption(kinds[kind], level, 0.0, ql.PlainVanillaPayoff(ql.Option.Put, 1.0), exercise)
    values = []
    for size in (400, 800):
        engine = ql.FdBlackScholesBarrierEngine(process, size, size, 0, ql.FdmSchemeDesc.Douglas(), True)
        option.setPricingEngine(engine)
        values.append(option.NPV())
    return values[1], abs(values[1] - values[0])


@pytest.mark.parametrize("kind", BarrierKind)
def test_a_barrier_watched_at_all_times_under_a_smile(kind):
    """Daily steps stand for all times by a moved barrier: 3e-5 of the notional for what that leaves."""
    market = real_market()
    found, forward = barrier_on_the_martingale(market, kind, 0.8)
    trade, terms, _ = terms_of(found, market, [Fixing("BELCOR", TODAY, 50.0)])
    walked = walk_reference(trade, terms, market, ASKED, WalkSettings(reference_cells=2e7), smiled=True)
    known, error = in_quantlib(market, kind, 0.8, terms.years)
    expected = terms.discount(EXPIRY) * forward * known
    assert error < 1e-4
    assert abs(walked.value - expected) < 4.0 * walked.error + error + 3e-5
    assert walked.error < 1e-4
