"""Smiles of a price S with cash dividends to come, and of its random part X: one price, two volatilities.

A call on S at strike K is ``F - D`` calls on X at ``(K - D) / (F - D)`` (see :mod:`pricer.market.affine_price`), and
both are in the money together, so their time values are in the same ratio. Black's formula (1976) on either
side turns one volatility into the other, strike by strike. Without dividends to come both are the same.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from pricer.market.affine_price import AffineLevel
from pricer.market.black import deviation_of_time_value, out_of_the_money, vega
from pricer.market.smile_quotes import SmileParameters

Array = NDArray[np.float64]

#: Step of the five-point derivatives at the forward, in standard deviations.
_STEP = 0.05


def pure_log_strikes(level: AffineLevel, strikes: ArrayLike) -> Array:
    """``log((K - D) / (F - D))`` of ``strikes`` in currency, any shape; NaN at and below the floor D."""
    above = np.asarray(strikes, dtype=float) - level.floor
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where(above > 0.0, np.log(above / level.scale), np.nan)


def price_strikes(level: AffineLevel, pure_log_strike: ArrayLike) -> Array:
    """Strikes on S in currency of log-strikes on X, any shape."""
    out: Array = level.floor + level.scale * np.exp(np.asarray(pure_log_strike, dtype=float))
    return out


def pure_deviations(level: AffineLevel, strikes: ArrayLike, deviations: ArrayLike) -> Array:
    """Deviations of log X from those of log S (> 0, volatility times root of time) at ``strikes`` in currency.

    NaN where no X has the price: the strike is not above the floor, the time value of a call is ``F - D`` or more,
    that of a put ``K - D`` or more, or the time value is too small for a computer to tell from 0.
    """
    strikes, deviations = np.asarray(strikes, dtype=float), np.asarray(deviations, dtype=float)
    if level.floor == 0.0:
        return deviations + np.zeros(strikes.shape)
    k = pure_log_strikes(level, strikes)
    value = out_of_the_money(np.log(strikes / level.forward), deviations) * (level.forward / level.scale)
    return np.where(value > 0.0, deviation_of_time_value(k, value), np.nan)


def price_deviations(level: AffineLevel, pure_log_strike: ArrayLike, deviations: ArrayLike) -> Array:
    """Deviations of log S from those of log X at log-strikes on X: the inverse of :func:`pure_deviations`."""
    k, deviations = np.asarray(pure_log_strike, dtype=float), np.asarray(deviations, dtype=float)
    if level.floor == 0.0:
        return deviations + np.zeros(k.shape)
    value = out_of_the_money(k, deviations) * (level.scale / level.forward)
    return deviation_of_time_value(np.log(price_strikes(level, k) / level.forward), value)


def price_error(level: AffineLevel, pure_log_strike: float, deviation: float, size: float) -> float:
    """The error in the volatility of S that an error of ``size`` in that of X makes there, to first order."""
    if level.floor == 0.0:
        return size
    k = np.array([pure_log_strike])
    outer = np.log(price_strikes(level, k) / level.forward)
    own = float(vega(outer, price_deviations(level, k, np.array([deviation])))[0])
    return size * float(vega(k, deviation)[0]) * level.scale / (level.forward * own) if own > 0.0 else size


def pure_parameters(level: AffineLevel, parameters: SmileParameters, time: float) -> SmileParameters:
    """Level, skew and curvature of X from those of S, for an expiry in ``time`` years.

    The slice of S through the parameters is turned into X's at five strikes about the forward; X's derivatives
    there are central differences of fourth order. Raises ValueError where no X has those prices.
    """
    if level.floor == 0.0:
        return parameters
    h = _STEP * parameters.volatility * np.sqrt(time)
    k = h * np.arange(-2.0, 3.0)
    strikes = price_strikes(level, k)
    deviations = np.sqrt(parameters.slice(time).total_variance(np.log(strikes / level.forward)))
    found = pure_deviations(level, strikes, deviations) / np.sqrt(time)
    if not np.all(np.isfinite(found)):
        raise ValueError("options near the forward would be worth more than the random part of the price")
    first = np.array([1.0, -8.0, 0.0, 8.0, -1.0]) @ found / (12.0 * h)
    second = np.array([-1.0, 16.0, -30.0, 16.0, -1.0]) @ found / (12.0 * h * h)
    return SmileParameters(parameters.expiry_date, float(found[2]), float(first), float(second))
