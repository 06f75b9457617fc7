"""Averaging-in: a price against the average that sets its strike, exact for one underlying.

Divided by the last price, the fixings counted backwards from it are again lognormal levels of independent
returns: under the payment measure for a ratio, and with the price itself as numeraire for a difference (Geman,
El Karoui & Rochet 1995). The average's law then comes from the same convolutions as an average's that pays out.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.closed_form.average_convolution import with_error
from pricer.engines.closed_form.family import Estimate, Side
from pricer.engines.closed_form.fixing_law import FixingLaw
from pricer.engines.closed_form.lognormal import black
from pricer.engines.closed_form.payoff_pieces import above_zero, lognormal_expectations

Array = NDArray[np.float64]


def price_over_average(
    fixings: FixingLaw, weights: Array, forward: float, variance: float, payoff: PiecewiseLinear, fixed: float = 0.0
) -> Estimate:
    """``E[payoff(S / (fixed + sum weights[j] S(j)))]``, undiscounted: performance against an average.

    ``forward`` and ``variance`` are those of the price S, after the last of the dates; ``weights`` (n_dates,) > 0,
    and ``fixed`` >= 0 is the same sum over fixings already made. One underlying.
    """
    amounts, left = _backwards(fixings, weights, forward, variance, fixed)
    steps = np.sqrt(np.diff(left, prepend=0.0))
    growing = amounts * np.exp(left)  # means of S(j) / S are raised by the variance between
    lift = math.exp(float(steps[0]) ** 2)
    positive = above_zero(payoff)

    def given(means: Array) -> Array:
        return lognormal_expectations(positive, lift / means, float(steps[0]))

    return with_error(given, growing, steps, float(np.abs(payoff(np.array(1.0 / amounts.sum())))) + 1.0)


def price_less_average(
    fixings: FixingLaw, weights: Array, forward: float, variance: float, side: Side, fixed: float = 0.0
) -> Estimate:
    """``E[(side (S - fixed - sum weights[j] S(j)))+]``, undiscounted: an option struck at an average.

    Arguments as for :func:`price_over_average`; the weights include the multiple of the average that is the strike.
    """
    amounts, left = _backwards(fixings, weights, forward, variance, fixed)
    steps = np.sqrt(np.diff(left, prepend=0.0))
    opposite: Side = -1 if side == 1 else 1

    def given(means: Array) -> Array:
        return black(means, 1.0, float(steps[0]), opposite)

    return with_error(given, amounts, steps, 1.0 + float(amounts.sum())).times(forward)


def _backwards(
    fixings: FixingLaw, weights: Array, forward: float, variance: float, fixed: float
) -> tuple[Array, Array]:
    """Amounts in units of the forward, and variances between each date and the end: the latest date first.

    What is fixed already is an amount of today.
    """
    if fixings.forwards.shape != (weights.size, 1):
        raise ValueError(f"one underlying and {weights.size} dates expected; got {fixings.forwards.shape}")
    made = [fixed] if fixed > 0.0 else []
    amounts = np.concatenate((made, weights * fixings.forwards[:, 0]))[::-1] / forward
    left = variance - np.concatenate(([0.0] if made else [], fixings.covariances[:, 0, 0]))[::-1]
    if np.any(weights <= 0.0) or fixed < 0.0 or np.any(np.diff(left, prepend=0.0) <= 0.0):
        raise ValueError("weights must be positive, and variance must increase from date to date and to the end")
    return amounts, left
