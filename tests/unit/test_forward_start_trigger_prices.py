"""Triggers with a price per underlying, and barriers watched at all times, on references that are still to be set."""

from dataclasses import replace
from datetime import date, timedelta

import numpy as np
import pytest

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.barrier import Barrier, BarrierKind
from pricer.contracts.book import Trade
from pricer.contracts.contract import Contract
from pricer.contracts.coupons import Coupon, Coupons
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.levels import Levels
from pricer.contracts.observation import Observation
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction, Trigger
from pricer.engines.contract_legs.mapping import contract_legs
from pricer.engines.contract_legs.smooth import smooth_value
from pricer.engines.contract_terms import ContractTerms
from pricer.engines.contract_walk.engine import walk_reference
from pricer.engines.model_value import Asked
from pricer.engines.paths.sample import PathSettings
from pricer.engines.stepwise.value import stepwise_value
from pricer.market.standing import standing
from tests.unit.markets import TODAY, small_market

SETTING, END = TODAY + timedelta(days=30), TODAY + timedelta(days=90)
NAMES = ("ARVENNE", "BELCOR")
ASKED = Asked("forward start", 3, 3e-4, np.inf, 0.0)
#: Two independent samples differ by more than four standard errors in one case of 15000.
ERRORS = 4.0


def trade_of(*features, payout=None):
    contract = Contract(
        Levels(NAMES, None, (SETTING,)),
        ExpiryLevel(END, Aggregate.worst_of(2)),
        payout or Redemption(capital=1.0),
        Observation(END, END),
        features,
    )
    return Trade("F1", contract, 1.0, "EUR", "")


def coupon(scales):
    trigger = Trigger(Direction.UP, Aggregate.worst_of(2), scales)
    return Coupons((Coupon(SETTING + timedelta(days=40), END, 0.5, 1.0),), trigger)


def barrier():
    span = [SETTING + timedelta(days=i) for i in range(1, (END - SETTING).days + 1)]
    days = [Observation(day, day) for day in span if day.weekday() < 5]
    trigger = Trigger(Direction.DOWN, Aggregate.worst_of(2))
    return Barrier(BarrierKind.OUT, trigger, tuple(days), (0.9,) * len(days), Redemption(capital=0.0), continuous=True)


def values(trade):
    market = small_market()
    terms = ContractTerms.of(trade, standing(trade, market), market)
    legs = contract_legs(terms)
    walked = walk_reference(trade, terms, market, ASKED, smiled=False)
    smooth = smooth_value(terms, legs, ASKED, replace(PathSettings(), with_ratios=False), ()).sample
    stepped = stepwise_value(trade, terms, legs, market, ASKED, smiled=False)
    return walked, smooth, stepped


@pytest.mark.parametrize(
    "features", [(coupon((0.95, 1.1)),), (barrier(),)], ids=["a price per underlying", "watched at all times"]
)
def test_both_engines_of_legs_give_the_value_of_the_walk(features):
    walked, smooth, stepped = values(trade_of(*features))
    for found in (smooth, stepped.sample):
        error = np.hypot(found.standard_error, walked.error)
        assert abs(found.value - walked.value) < ERRORS * error
        assert error < 1.5e-3  # the scales, or the move of the barrier between dates, are worth many times that


def test_a_price_per_underlying_is_worth_much_more_than_the_errors():
    with_prices, without = (values(trade_of(coupon(scales)))[1].value for scales in ((0.95, 1.1), None))
    assert abs(with_prices - without) > 0.02


def test_deltas_on_prices_per_underlying_agree_between_the_engines():
    market, trade = small_market(), trade_of(coupon((0.95, 1.1)), payout=Redemption(put_strike=1.0))
    asked = Asked("forward start", 3, 5e-5, 2e-3, 0.0)
    terms = ContractTerms.of(trade, standing(trade, market), market)
    legs = contract_legs(terms)
    smooth = smooth_value(terms, legs, asked, PathSettings(), ()).ratios
    stepped = stepwise_value(trade, terms, legs, market, asked, smiled=False).ratios
    errors = np.hypot(smooth.delta_errors, stepped.delta_errors)
    assert np.all(np.abs(smooth.deltas - stepped.deltas) < ERRORS * errors)
    assert date(2026, 12, 30) == SETTING  # before that day a spot moves nothing: performances start from it
    assert np.all(np.abs(smooth.deltas) < ERRORS * smooth.delta_errors + 1e-6)
