"""One night's market: everything a trade is priced with, frozen."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from datetime import date

import numpy as np
from numpy.typing import NDArray

from pricer.core.issues import Issue
from pricer.core.source import SourceFile
from pricer.market.correlation import CorrelationMatrix
from pricer.market.curves import DiscountCurve
from pricer.market.fx import FxRates
from pricer.market.joint_lognormal import JointLognormal
from pricer.market.underlying import Underlying
from pricer.market.volatility import VolatilityCurve, covariance

#: The key of :attr:`Market.rejected` under which an unusable correlation matrix is explained.
CORRELATIONS = "correlations"


class MissingMarketDataError(LookupError):
    """The market lacks what was asked of it; :func:`pricer.market.coverage.coverage` finds this beforehand."""


@dataclass(frozen=True, slots=True, eq=False)
class Market:
    """The market as it stood at the end of ``valuation_date``.

    ``curves`` is keyed by (currency, collateral), with collateral "" for the currency's
    standard curve. ``rejected`` says of underlyings and curves (by their ids) and of the
    correlation matrix (as ``CORRELATIONS``) that were given but cannot be used, why, of
    exchange rates by their pairs, and of an underlying left out of the matrix as
    ``CORRELATIONS:ID``. An underlying that lost only its volatility may stand in both
    ``underlyings`` and ``rejected``.
    """

    name: str
    valuation_date: date
    reporting_currency: str
    underlyings: Mapping[str, Underlying]
    curves: Mapping[tuple[str, str], DiscountCurve]
    correlation: CorrelationMatrix | None
    fx: FxRates
    issues: tuple[Issue, ...] = ()
    sources: tuple[SourceFile, ...] = ()
    rejected: Mapping[str, tuple[Issue, ...]] = field(default_factory=dict)

    def forward(self, underlying_id: str, day: date) -> float:
        """Forward price for ``day``, in the underlying's currency.

        Spot grown at the currency's standard curve, less dividends:
        ``spot * dividends.growth / discount_factor``. Raises :class:`MissingMarketDataError`,
        and ValueError if ``day`` lies before the valuation date.
        """
        underlying = self._underlying(underlying_id)
        growth = underlying.dividends.growth(self.valuation_date, day)
        return underlying.spot * growth / self.discount_factor(underlying.currency, "", day)

    def joint_lognormal(self, underlying_ids: Sequence[str], expiry_date: date) -> JointLognormal:
        """The joint law of the underlyings' prices on ``expiry_date``, all in one currency.

        On the valuation date itself: today's spots, without variance. Raises
        :class:`MissingMarketDataError`, and ValueError for a date before the valuation date or
        underlyings of several currencies.
        """
        currencies = sorted({self._underlying(name).currency for name in underlying_ids})
        if len(currencies) != 1:
            raise ValueError(f"a joint law needs underlyings in one currency; got {', '.join(currencies) or 'none'}")
        curves = [self._volatility(name) for name in underlying_ids]
        forwards = np.array([self.forward(name, expiry_date) for name in underlying_ids])
        return JointLognormal(forwards, covariance(curves, self._correlation(underlying_ids), expiry_date))

    def discount_factor(self, currency: str, collateral: str, day: date) -> float:
        """Value tonight of 1 unit of ``currency`` paid on ``day`` under ``collateral`` ("" for none named).

        Raises :class:`MissingMarketDataError` without such a curve, ValueError for a day before
        the valuation date.
        """
        curve = self.curves.get((currency, collateral))
        if curve is None:
            raise MissingMarketDataError(
                f'the market has no discount curve for {currency} with collateral "{collateral}"'
            )
        return curve.discount_factor(day)

    def to_reporting(self, currency: str) -> float:
        """Units of the reporting currency for one unit of ``currency``; raises MissingRate."""
        return self.fx.rate(currency, self.reporting_currency)

    def _underlying(self, underlying_id: str) -> Underlying:
        try:
            return self.underlyings[underlying_id]
        except KeyError:
            raise MissingMarketDataError(f'the market has no underlying "{underlying_id}"') from None

    def _volatility(self, underlying_id: str) -> VolatilityCurve:
        volatility = self._underlying(underlying_id).volatility
        if volatility is None:
            raise MissingMarketDataError(f'the market has no volatility for underlying "{underlying_id}"')
        return volatility

    def _correlation(self, ids: Sequence[str]) -> NDArray[np.float64]:
        if len(set(ids)) == 1:
            return np.ones((len(ids), len(ids)))
        if self.correlation is None:
            raise MissingMarketDataError("the market has no usable correlation matrix")
        missing = sorted(name for name in ids if name not in self.correlation)
        if missing:
            raise MissingMarketDataError(f"the market's correlation matrix does not hold {', '.join(missing)}")
        return self.correlation.sub(ids)
