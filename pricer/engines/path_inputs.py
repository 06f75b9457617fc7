"""From a market to what drives the paths of a trade's levels: motions, their correlation, variances by time."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.book import Trade
from pricer.contracts.option import Conversion
from pricer.market.calendars import year_fraction
from pricer.market.fx import currencies_of
from pricer.market.market import Market

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Drivers:
    """What moves the prices of n assets: their own Brownian motions and those of m exchange-rate factors.

    ``correlation`` (n + m, n + m). ``exposures`` (n, m) of each asset's exchange rate. ``times`` (k + 1,) from 0,
    ``variances`` (n + m, k + 1) total, linear between: every time at which a volatility jumps is among them.
    """

    correlation: Array
    exposures: Array
    times: Array
    variances: Array

    @classmethod
    def of(cls, trade: Trade, market: Market) -> Drivers:
        """Up to the trade's expiry. Raises as :meth:`Market.log_covariance`."""
        names, expiry, today = trade.contract.underlyings, trade.contract.expiry_date, market.valuation_date
        currencies = [market.underlyings[name].currency for name in names]
        chains = [market.fx.log_factors(c, trade.currency) if c != trade.currency else {} for c in currencies]
        pairs = sorted({pair for chain in chains for pair in chain})
        factors = [*names, *pairs]
        quoted = {day for name in names for day in market.pure_volatility(name).dates}
        quoted |= {day for pair in pairs for day in market.fx.volatilities[currencies_of(pair)].dates}
        dates = [*sorted(day for day in quoted if today < day < expiry), expiry]
        times = np.array([0.0, *(year_fraction(today, day) for day in dates)])
        variances = np.zeros((len(factors), len(times)))
        for row, factor in enumerate(factors):
            variances[row, 1:] = [market.log_covariance([factor], day)[0, 0] for day in dates]
        exposures = np.array([[chain.get(pair, 0.0) for pair in pairs] for chain in chains])
        return cls(
            correlation=market.driver_correlation(factors),
            exposures=exposures.reshape(len(names), len(pairs)),
            times=times,
            variances=np.maximum.accumulate(variances, axis=1),
        )

    def with_volatility_moved(self, row: int, by: float) -> Drivers:
        """A volatility to every date moved by ``by`` (0.01: a point), correlations as they are."""
        variances = self.variances.copy()
        deviations = np.sqrt(variances[row]) + by * np.sqrt(self.times)
        variances[row] = np.maximum.accumulate(np.maximum(deviations, 0.0) ** 2)
        return replace(self, variances=variances)


def is_converted(trade: Trade, market: Market) -> bool:
    """Whether exchange rates enter prices: a composite with an underlying in another currency than the payment's."""
    currencies = {market.underlyings[name].currency for name in trade.contract.underlyings}
    return trade.contract.conversion is Conversion.COMPOSITE and currencies != {trade.currency}
