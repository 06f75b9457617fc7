"""One unit of a trade on tonight's market, as the engines see it: numbers, no names, no dates."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.book import Trade
from pricer.contracts.option import Conversion, EuropeanOption
from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.closed_form.ranks import is_sum
from pricer.engines.problem import EuropeanProblem
from pricer.market.calendars import year_fraction
from pricer.market.joint_lognormal import JointLognormal
from pricer.market.market import Market

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class UnitTerms:
    """Pays ``payoff(aggregate(levels))``, the levels being a random part of law ``law`` plus known ``floors``.

    Levels, forwards and floors (n,) are in units of the reference levels and under the payment
    currency's measure; floors are cash dividends still to come at expiry. ``unit_notional`` is in the
    trade's currency. What turns sensitivities of the random part into those of the market:
    ``random_spots`` (n,) spots less tonight's value of the cash dividends to come, in the underlyings'
    currencies; ``rates`` (n,) units of the trade's currency for one of theirs; ``vega_slopes`` (n,), what a unit
    of the price's own deviation at the forward is to that of the random part; ``drifts`` (n,), by
    which a quanto moves the logarithm of the forward.
    """

    law: JointLognormal
    floors: Array
    aggregate: Aggregate
    payoff: PiecewiseLinear
    discount_factor: float
    years: float
    unit_notional: float
    random_spots: Array
    rates: Array
    vega_slopes: Array
    drifts: Array
    is_composite: bool

    @classmethod
    def of(cls, trade: Trade, market: Market) -> UnitTerms:
        """Of a European option. Raises as :meth:`Market.joint_lognormal`, and TypeError for another contract."""
        option, expiry = trade.contract, trade.contract.expiry_date
        if not isinstance(option, EuropeanOption):
            raise TypeError(f"{trade.trade_id} is no European option")
        names, conversion = option.underlyings, option.conversion
        law = market.joint_lognormal(names, expiry, payment_currency=trade.currency, conversion=conversion, pure=True)
        prices = [market.affine_price(name) for name in names]
        at_expiry = [price.at(expiry) for price in prices]
        currencies = [market.underlyings[name].currency for name in names]
        is_composite = conversion is Conversion.COMPOSITE and any(c != trade.currency for c in currencies)
        references = np.array(option.reference_levels)
        scales = np.array([level.scale for level in at_expiry])
        years = year_fraction(market.valuation_date, expiry)
        deviations = [market.pure_volatility(name).volatility(expiry) * math.sqrt(years) for name in names]
        return cls(
            law=JointLognormal(law.forwards / references, law.covariance),
            floors=np.array([level.floor for level in at_expiry])
            * (law.forwards / scales if is_composite else 1.0)
            / references,
            aggregate=replace(option.aggregate, cash=None),
            payoff=option.payoff_on_core(),
            discount_factor=market.discount_factor(trade.currency, trade.collateral, option.payment_date),
            years=years,
            unit_notional=option.unit_notional(
                np.array([market.spot_in(name, trade.currency, conversion) for name in names])
            ),
            random_spots=np.array([price.random_spot for price in prices]),
            rates=np.array([market.fx.rate(currency, trade.currency) for currency in currencies]),
            vega_slopes=np.array(
                [level.vega_slope(deviation) for level, deviation in zip(at_expiry, deviations, strict=True)]
            ),
            drifts=np.zeros(len(names)) if is_composite else np.log(law.forwards / scales),
            is_composite=is_composite,
        )

    @property
    def has_floors(self) -> bool:
        """Whether any part of a level at expiry is known tonight."""
        return bool(np.any(self.floors > 0.0))

    def lognormal(self) -> EuropeanProblem | None:
        """The problem on the random parts alone; None where the floors cannot be folded into the payoff."""
        if not self.has_floors:
            shift = 0.0
        elif is_sum(self.aggregate.kind, self.aggregate.weights) and not self.is_composite:
            shift = float(np.array(self.aggregate.weights) @ self.floors)
        else:
            return None
        payoff = self.payoff.of_shifted_argument(shift)
        return EuropeanProblem(self.law, self.aggregate, payoff, self.discount_factor)
