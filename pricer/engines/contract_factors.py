"""What moves the prices a contract sees: random parts of underlyings and exchange rates, from date to date."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from datetime import date

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.option import Conversion
from pricer.market.calendars import year_fraction
from pricer.market.fx import currencies_of
from pricer.market.market import Market
from pricer.market.volatility import VolatilityCurve

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class ContractFactors:
    """Lognormal factors: the underlyings first, then currency pairs.

    ``times`` : (n_dates,) years. ``steps`` : (n_dates, f, f) covariances of their logarithms from the date before.
    ``prices`` : (n, f) how the logarithm of each price moves with them; ``rates`` : (n, f) how that of the exchange
    rate does by which a quanto is *not* converted, 0 for others.
    """

    times: Array
    steps: Array
    prices: Array
    rates: Array

    @classmethod
    def of(
        cls,
        market: Market,
        names: Sequence[str],
        dates: Sequence[date],
        payment_currency: str,
        conversion: Conversion | None,
    ) -> ContractFactors:
        """Raises :class:`MissingMarketDataError`. Correlations hold for all times, as in ``Market.log_covariance``."""
        n = len(names)
        abroad = [market.underlyings[name].currency for name in names]
        rates: list[dict[str, float]] = [
            {} if currency == payment_currency else market.fx.log_factors(currency, payment_currency)
            for currency in abroad
        ]
        pairs = list(dict.fromkeys(pair for row in rates for pair in row))
        by_rate = np.array([[row.get(pair, 0.0) for pair in pairs] for row in rates]).reshape(n, len(pairs))
        curves = [market.pure_volatility(name) for name in names]
        curves += [market.fx.volatilities[currencies_of(pair)] for pair in pairs]
        times = np.array([year_fraction(market.valuation_date, day) for day in dates])
        total = _covariances(curves, market.driver_correlation([*names, *pairs]), times)
        rows = np.concatenate((np.zeros((n, n)), by_rate), axis=1)
        is_composite = conversion is not None and Conversion(conversion) is Conversion.COMPOSITE
        own = np.concatenate((np.eye(n), np.zeros_like(by_rate)), axis=1)
        return cls(
            times=times,
            steps=np.diff(total, axis=0, prepend=np.zeros((1, *total.shape[1:]))),
            prices=own + rows if is_composite else own,
            rates=np.zeros_like(rows) if is_composite else rows,
        )

    @property
    def covariances(self) -> Array:
        """Of the logarithms of prices by step, (n_dates, n, n)."""
        out: Array = self.prices @ self.steps @ self.prices.T
        return out

    @property
    def drifts(self) -> Array:
        """By which quantos move the logarithms of forwards, (n_dates, n): minus the covariance with the rate."""
        out: Array = -np.cumsum(np.einsum("if,tfg,ig->ti", self.prices, self.steps, self.rates), axis=0)
        return out

    def with_volatility_moved(self, asset: int, by: float) -> ContractFactors:
        """The volatility of an underlying's random part to every date moved by ``by`` (0.01: a point).

        Correlations stay. A step whose variance would fall below 0 is left without any.
        """
        steps = self.steps[:, asset, asset]
        roots = np.sqrt(self.times)
        moved = (np.sqrt(np.cumsum(steps)) + by * roots) ** 2
        new = np.maximum(np.diff(moved, prepend=0.0), 0.0)
        factors = np.ones(self.steps.shape[:2])
        factors[:, asset] = np.sqrt(np.divide(new, steps, out=np.ones_like(new), where=steps > 0.0))
        return replace(self, steps=self.steps * factors[:, :, None] * factors[:, None, :])


def _covariances(curves: Sequence[VolatilityCurve], correlation: Array, times: Array) -> Array:
    """As ``volatility.covariance``, from tonight to every one of ``times``: (n_dates, f, f)."""
    nodes = np.unique(np.concatenate([times, *(np.array(curve.times) for curve in curves)]))
    nodes = nodes[nodes <= times[-1]] if len(times) else nodes[:1]
    variances = np.stack([_variances(curve, nodes) for curve in curves])
    deviations = np.sqrt(np.maximum(np.diff(variances, axis=1), 0.0))
    total = np.cumsum(deviations.T[:, :, None] * deviations.T[:, None, :], axis=0)
    out: Array = correlation * total[np.searchsorted(nodes, times) - 1]
    return out


def _variances(curve: VolatilityCurve, nodes: Array) -> Array:
    times, known = np.array(curve.times), np.array(curve.variances)
    out: Array = np.where(nodes < times[-1], np.interp(nodes, times, known), known[-1] * nodes / times[-1])
    return out
