"""Calls, puts and digitals on one lognormal level (Black & Scholes 1973; Merton 1973; Black 1976)."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

from pricer.contracts.profile import is_above
from pricer.engines.closed_form.family import Estimate, Side, other

Numbers: TypeAlias = float | NDArray[np.float64]

#: Error of a formula of the normal distribution function, relative to forward plus strike.
ROUNDING = 4e-16


def black(forward: Numbers, strike: Numbers, deviation: Numbers, side: Side) -> NDArray[np.float64]:
    """``E[(side (X - strike))+]`` for lognormal X, undiscounted.

    ``forward`` > 0, ``strike`` of any sign and ``deviation`` >= 0 (of the log) broadcast.
    """
    f, k, s = np.broadcast_arrays(forward, strike, deviation)
    d1, d2 = _arguments(f, k, s)
    spread = side * (f - k)
    value = side * (f * ndtr(side * d1) - k * ndtr(side * d2))
    return np.asarray(np.where(s > 0.0, np.maximum(value, 0.0), np.maximum(spread, 0.0)))


def exceedance(forward: Numbers, strike: Numbers, deviation: Numbers, side: Side) -> NDArray[np.float64]:
    """``P(X > strike)`` for side +1, ``P(X <= strike)`` for side -1; arguments as for :func:`black`."""
    f, k, s = np.broadcast_arrays(forward, strike, deviation)
    _, d2 = _arguments(f, k, s)
    certain = is_above(f, k) == (side == 1)
    return np.asarray(np.where(s > 0.0, ndtr(side * d2), certain.astype(float)))


def _arguments(
    forward: NDArray[np.float64], strike: NDArray[np.float64], deviation: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Black's d1 and d2; infinite at strikes that a positive level always exceeds."""
    positive = strike > 0.0
    moneyness = np.log(forward / np.where(positive, strike, 1.0)) / np.where(deviation > 0.0, deviation, 1.0)
    d1 = np.where(positive, moneyness + 0.5 * deviation, np.inf)
    return d1, d1 - deviation


@dataclass(frozen=True, slots=True)
class ShiftedLognormal:
    """The law of ``shift + coefficient * X`` with ``X`` lognormal of mean 1.

    ``coefficient`` is not 0 and may be negative; ``deviation`` > 0 is that of ``log X``.
    """

    shift: float
    coefficient: float
    deviation: float

    def mean(self) -> Estimate:
        return Estimate(self.shift + self.coefficient)

    def option(self, strike: float, side: Side) -> Estimate:
        size, level, mirrored = self._mirror(strike, side)
        return Estimate(float(black(size, level, self.deviation, mirrored)), ROUNDING * (size + abs(level)))

    def digital(self, strike: float, side: Side) -> Estimate:
        size, level, mirrored = self._mirror(strike, side)
        return Estimate(float(exceedance(size, level, self.deviation, mirrored)), ROUNDING)

    def _mirror(self, strike: float, side: Side) -> tuple[float, float, Side]:
        """The same question about ``|coefficient| X`` alone."""
        if self.coefficient > 0.0:
            return self.coefficient, strike - self.shift, side
        return -self.coefficient, self.shift - strike, other(side)
