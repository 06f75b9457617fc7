"""Calls on a lognormal variable of forward 1: price, vega, and the volatility behind a price."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import ndtr

Array = NDArray[np.float64]


def call(k: ArrayLike, deviation: ArrayLike) -> Array:
    """Undiscounted call of strike ``exp(k)`` on a lognormal X of mean 1; ``deviation`` > 0 of log X (Black 1976)."""
    k, deviation = np.asarray(k, dtype=float), np.asarray(deviation, dtype=float)
    d = -k / deviation + 0.5 * deviation
    out: Array = ndtr(d) - np.exp(k) * ndtr(d - deviation)
    return out


def vega(k: ArrayLike, deviation: ArrayLike) -> Array:
    """Derivative of :func:`call` in ``deviation``."""
    k, deviation = np.asarray(k, dtype=float), np.asarray(deviation, dtype=float)
    d = -k / deviation + 0.5 * deviation
    out: Array = np.exp(-0.5 * d * d) / np.sqrt(2.0 * np.pi)
    return out


def implied_deviation(k: ArrayLike, price: ArrayLike) -> Array:
    """The deviation at which :func:`call` is ``price``; NaN outside the arbitrage bounds.

    Works on the out-of-the-money option, so that deep strikes keep their digits as far as the price has them.
    """
    k, price = np.broadcast_arrays(np.asarray(k, dtype=float), np.asarray(price, dtype=float))
    return deviation_of_time_value(k, price - np.maximum(-np.expm1(k), 0.0))


def deviation_of_time_value(k: ArrayLike, value: ArrayLike) -> Array:
    """The deviation at which :func:`out_of_the_money` is ``value``, by bisection; NaN outside the arbitrage bounds."""
    k, value = np.broadcast_arrays(np.asarray(k, dtype=float), np.asarray(value, dtype=float))
    low, high = np.full(k.shape, 1e-8), np.full(k.shape, 10.0)
    for _ in range(60):
        middle = 0.5 * (low + high)
        above = out_of_the_money(k, middle) > value
        low, high = np.where(above, low, middle), np.where(above, middle, high)
    inside = (value >= 0.0) & (value < np.exp(np.minimum(k, 0.0)))
    return np.where(inside, 0.5 * (low + high), np.nan)


def out_of_the_money(k: Array, deviation: Array) -> Array:
    """The call less its intrinsic value: itself for k >= 0, else the put."""
    d = -k / deviation + 0.5 * deviation
    calls = ndtr(d) - np.exp(k) * ndtr(d - deviation)
    puts = np.exp(k) * ndtr(deviation - d) - ndtr(-d)
    return np.where(k >= 0.0, calls, puts)
