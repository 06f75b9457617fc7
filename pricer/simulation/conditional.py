"""The exact expectation of a piecewise linear payoff over one lognormal factor.

The aggregate is ``A = exp(v w) S + O`` with ``w ~ N(0, 1)``; S is the part that the factor
scales, O the part outside it. Knot by knot, with threshold ``k = knot - O`` and S, k > 0,
A exceeds the knot when ``w > -d``, ``d = ln(S / k) / v``, and

    E[1{w > -d}]            = Phi(d)
    E[exp(v w) 1{w > -d}]   = G Phi(d + v),                 G = exp(v^2 / 2)
    E[w exp(v w) 1{w > -d}] = G (v Phi(d + v) + phi(d + v))
    G phi(d + v)            = (k / S) phi(d)

(Black & Scholes 1973 per knot). A jump adds to every derivative the density of A at the
knot, ``phi(d) / (v S)`` per unit of S and ``phi(d) / (v k)`` per unit of O. For S < 0
(possible with rank weights) the event is ``w < -d``. Where S and k differ in sign, or
vanish, the event is certain or impossible.

This is the plain twin of the compiled ``integrate_factor``, and what is used where nothing
is left to sample.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

from pricer.contracts.profile import PiecewiseLinear, is_above

_FAR = 37.0
_TINY = 1e-200

Array = NDArray[np.float64]


class Integrated(NamedTuple):
    """A payoff's expectation over the factor and its derivatives; all of the shape of S."""

    value: Array
    by_scaled: Array  # dV/dS
    by_factor: Array  # E[w f'(A) exp(v w)]
    by_outside: Array  # dV/dO
    by_scaled_twice: Array
    by_outside_twice: Array


def integrate_factor(
    payoff: PiecewiseLinear, v: float | Array, scaled: Array, outside: Array, gross: Array | float = 0.0
) -> Integrated:
    """``E[payoff(exp(v w) scaled + outside)]`` and derivatives; ``v`` one for all, or of the shape of ``scaled``.

    ``v = 0`` throughout gives the payoff itself and its slope, at a knot those from its left; second
    derivatives and the effect of jumps on first ones are then missing. ``gross`` : sum of the
    absolute terms behind the level, beside which a level is at a knot (see ``is_above``).
    """
    growth = np.exp(0.5 * v * v)
    ones = np.ones(np.broadcast_shapes(scaled.shape, outside.shape))
    value = payoff.intercept + payoff.slope * (growth * scaled + outside)
    by_scaled = payoff.slope * growth * ones
    by_factor = payoff.slope * growth * v * ones
    by_outside = payoff.slope * ones
    by_scaled_twice = 0.0 * ones
    by_outside_twice = 0.0 * ones
    size = np.maximum(np.abs(scaled), _TINY)
    sign = np.where(scaled < 0.0, -1.0, 1.0)
    for knot, bend, jump in zip(payoff.knots, payoff.bends, payoff.jumps, strict=True):
        threshold = knot - outside
        if np.all(np.asarray(v) > 0.0):
            k = np.maximum(np.abs(threshold), _TINY)
            d = np.clip(np.log(size / k) / v, -_FAR, _FAR)
            d = np.where((scaled < 0.0) != (threshold < 0.0), _FAR, d)
            density = np.where(np.abs(d) < _FAR, np.exp(-0.5 * d * d) / np.sqrt(2.0 * np.pi), 0.0)
            above = ndtr(sign * d)
            weighted = growth * ndtr(sign * (d + v))
            value = value + bend * (scaled * weighted - threshold * above) + jump * above
            spread = density / v
            landing = jump * spread / size
            by_scaled = by_scaled + bend * weighted + landing
            by_factor = by_factor + bend * (v * weighted + sign * density * k / size) - d * landing
            by_scaled_twice = by_scaled_twice + (bend * spread * sign * k / size - landing * (d + v) / v) / size
            landing = jump * spread / k
            by_outside = by_outside + bend * above + landing
            by_outside_twice = by_outside_twice + (bend * spread + landing * (v - d) / v) / k
        else:
            above = np.where(is_above(scaled + outside, knot, gross), 1.0, 0.0)
            value = value + (bend * (scaled - threshold) + jump) * above
            by_scaled = by_scaled + bend * above
            by_outside = by_outside + bend * above
    return Integrated(value, by_scaled, by_factor, by_outside, by_scaled_twice, by_outside_twice)
