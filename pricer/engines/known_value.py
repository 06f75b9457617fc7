"""A trade that has ended: what is decided and still to be paid."""

from __future__ import annotations

import numpy as np

from pricer.contracts.book import Trade
from pricer.contracts.life_cycle import AsOf
from pricer.engines.contract_terms import decided_value, discounting
from pricer.engines.model_value import Life, ModelValue, UnitRatios
from pricer.engines.sampled_value import SampledValue
from pricer.engines.selector import Headline, Interval
from pricer.market.market import Market


def known_value(trade: Trade, as_of: AsOf, market: Market) -> ModelValue:
    """The discounted known amounts of one unit, 0 once all is settled; nothing moves it but the curve."""
    value = decided_value(as_of, discounting(trade, as_of.contract, market))
    none = np.zeros(len(trade.contract.underlyings))
    return ModelValue(
        headline=Headline(value, 0.0, value, value, Interval.EXACT, "known amounts, discounted"),
        sample=SampledValue(value, 0.0, 1, 0, 0, "nothing was sampled: the amounts are known"),
        references=(),
        ratios=UnitRatios(none, none, none, none, none, none, "known amounts"),
        life=Life(0.0, 0.0),
    )


def known_notional(trade: Trade, as_of: AsOf, market: Market) -> float:
    """What one unit of an ended trade refers to, by prices on its last day; they outlive the underlyings' quotes."""
    contract = as_of.contract
    levels = [market.fixings.level(name, contract.expiry_date) for name in contract.underlyings]
    prices = [
        market.underlyings[name].spot if level is None and name in market.underlyings else level or 1.0
        for name, level in zip(contract.underlyings, levels, strict=True)
    ]
    return contract.unit_notional(np.array(prices))
