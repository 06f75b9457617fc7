"""Barriers watched continuously on one lognormal level: any payoff, by reflection.

A path that starts at the mirror image of the start reaches the same places as one that has touched the
barrier, so that what survives is the plain law less that of the images (Merton 1973; Reiner & Rubinstein
1991 for one barrier, Ikeda & Kunitomo 1992 for two). Each image costs one valuation of the payoff's straight
pieces on the levels that survive: calls, puts, digitals and capped ones need no formulas of their own.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import log_ndtr

from pricer.contracts.profile import PiecewiseLinear
from pricer.engines.closed_form.family import Estimate, Side
from pricer.engines.closed_form.payoff_pieces import part_between

Array = NDArray[np.float64]

_FAR = 9.0  # deviations beyond which an image adds nothing
#: -zeta(1/2) / sqrt(2 pi): mean overshoot of a random walk over a distant barrier, in steps (Chernoff 1965).
OVERSHOOT = 0.5825971579390107


@dataclass(frozen=True, slots=True)
class WatchedLevel:
    """A level that follows geometric Brownian motion from ``spot`` to the payment of one date.

    ``forward`` is its forward to that date, ``deviation`` > 0 that of its log. Growth must come at
    the pace of variance (constant drift and volatility, or both scaled alike in time): where it does not, these
    formulas are an approximation.
    """

    spot: float
    forward: float
    deviation: float

    def __post_init__(self) -> None:
        if not (self.spot > 0.0 and self.forward > 0.0 and self.deviation > 0.0):
            raise ValueError(f"spot, forward and deviation must be above 0; got {self}")

    @property
    def drift(self) -> float:
        """Mean of the log's change."""
        return math.log(self.forward / self.spot) - 0.5 * self.deviation**2

    def image(self, shift: float) -> tuple[float, float]:
        """Log of the weight, and forward, of the level whose log starts ``shift`` higher."""
        return self.drift * shift / self.deviation**2, self.forward * math.exp(shift)


@dataclass(frozen=True, slots=True)
class Corridor:
    """The levels at which an option is alive: above ``lower`` and below ``upper``; 0 and infinity for no barrier."""

    lower: float = 0.0
    upper: float = math.inf

    def __post_init__(self) -> None:
        if not 0.0 <= self.lower < self.upper:
            raise ValueError(f"the lower barrier {self.lower} must be below the upper one {self.upper}")

    def contains(self, level: float) -> bool:
        return self.lower < level < self.upper

    def widened(self, step_deviation: float) -> Corridor:
        """Barriers further out that, watched continuously, act like these watched step by step.

        ``step_deviation`` is that of the log between two observations (Broadie, Glasserman & Kou 1997). An
        approximation, good where the start is more than a few steps away from the barrier.
        """
        out = math.exp(OVERSHOOT * step_deviation)
        return Corridor(self.lower / out, self.upper * out)


def knock_out(level: WatchedLevel, corridor: Corridor, payoff: PiecewiseLinear) -> Estimate:
    """``E[payoff(level at expiry); never outside the corridor]``, undiscounted."""
    if not corridor.contains(level.spot):
        return Estimate(0.0)
    alive = part_between(payoff, corridor.lower, corridor.upper, level.forward, level.deviation)
    return alive + _images_inside(level, corridor, payoff)


def knock_in(level: WatchedLevel, corridor: Corridor, payoff: PiecewiseLinear) -> Estimate:
    """``E[payoff(level at expiry); outside the corridor at least once]``, undiscounted.

    Not the difference of two large numbers: what lies outside at expiry has been out for certain.
    """
    if not corridor.contains(level.spot):
        return part_between(payoff, 0.0, math.inf, level.forward, level.deviation)
    below = part_between(payoff, 0.0, corridor.lower, level.forward, level.deviation)
    above = part_between(payoff, corridor.upper, math.inf, level.forward, level.deviation)
    return below + above + _images_inside(level, corridor, payoff).times(-1.0)


def survival_given_end(level: WatchedLevel, corridor: Corridor, end: Array) -> Array:
    """Probability of never having been outside, given the log-change ``end`` (m,) to expiry: that of a bridge."""
    low = math.log(corridor.lower / level.spot) if corridor.lower > 0.0 else -math.inf
    inside = (end > low) & (end < math.log(corridor.upper / level.spot))
    at = np.where(inside, end, 0.0)
    total = np.zeros_like(at)
    for sign, shift in _images(level, corridor):
        total += sign * np.exp(shift * (2.0 * at - shift) / (2.0 * level.deviation**2))
    return np.where(inside, np.maximum(total, 0.0), 0.0)


def touch_probability(level: WatchedLevel, corridor: Corridor) -> Estimate:
    """Probability of leaving the corridor before expiry: what a rebate paid at expiry is worth, undiscounted."""
    return knock_in(level, corridor, PiecewiseLinear(1.0, 0.0))


def one_touch(level: WatchedLevel, barrier: float, discount_factor: float) -> Estimate | None:
    """Value of 1 paid when the level first touches ``barrier`` before expiry (Rubinstein & Reiner 1991).

    ``discount_factor`` is that of expiry; discounting must come at the pace of variance too. None where
    negative rates leave the formula without a real root.
    """
    h, s, m = math.log(barrier / level.spot), level.deviation, level.drift
    side: Side = 1 if h > 0.0 else -1
    square = m * m - 2.0 * s * s * math.log(discount_factor)
    if h == 0.0:
        return Estimate(1.0)
    if square < 0.0:
        return None
    root, distance = math.sqrt(square), abs(h)
    near = math.exp(h * (m - side * root) / s**2 + float(log_ndtr((root - distance) / s)))
    far = math.exp(h * (m + side * root) / s**2 + float(log_ndtr((-root - distance) / s)))
    return Estimate(near + far, 1e-14 * (near + far))


def _images(level: WatchedLevel, corridor: Corridor) -> list[tuple[float, float]]:
    """Signs and shifts of the log of the start and of its images, the start first."""
    if corridor.lower == 0.0 and corridor.upper == math.inf:
        return [(1.0, 0.0)]
    if corridor.lower == 0.0 or corridor.upper == math.inf:
        barrier = corridor.lower if corridor.upper == math.inf else corridor.upper
        return [(1.0, 0.0), (-1.0, 2.0 * math.log(barrier / level.spot))]
    width = math.log(corridor.upper / corridor.lower)
    reflected = 2.0 * math.log(corridor.upper / level.spot)
    # The weight of an image moves its centre by no more than the drift; a call's, by the variance.
    reach = _FAR * level.deviation + abs(level.drift) + level.deviation**2 + 2.0 * width
    most = math.ceil(reach / (2.0 * width))
    found = [(1.0, 0.0), (-1.0, reflected)]
    for n in range(1, most + 1):
        for turns in (2.0 * n * width, -2.0 * n * width):
            found += [(1.0, turns), (-1.0, reflected + turns)]
    return found


def _images_inside(level: WatchedLevel, corridor: Corridor, payoff: PiecewiseLinear) -> Estimate:
    """What the images take off the payoff that is inside at expiry."""
    total = Estimate(0.0)
    for sign, shift in _images(level, corridor)[1:]:
        log_weight, forward = level.image(shift)
        part = part_between(payoff, corridor.lower, corridor.upper, forward, level.deviation, log_weight)
        total = total + part.times(sign)
    return total
