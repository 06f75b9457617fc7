"""What a market quotes of one expiry's smile: volatilities by strike, or level, skew and curvature."""

from __future__ import annotations

import math
from dataclasses import dataclass
from datetime import date

import numpy as np
from numpy.typing import ArrayLike, NDArray

from pricer.market.svi import SviSlice

Array = NDArray[np.float64]

#: Nothing is quoted outside these, 0.0001 % and 1000 % a year; far outside, its variance would not be a number.
LEAST_VOLATILITY, LARGEST_VOLATILITY = 1e-6, 10.0
_VOLATILITIES = f"from {LEAST_VOLATILITY:g} to {LARGEST_VOLATILITY:g}"
#: Units to which volatilities are rounded in practice, from 0.1 vol points down; what none of them divides is exact.
ROUNDINGS = (1e-3, 5e-4, 1e-4, 5e-5, 1e-5)
#: Errors in volatility that are not worth a bend of the smile: half the quotes' rounding, but within these.
LEAST_ALLOWANCE, LARGEST_ALLOWANCE = 2.5e-5, 2e-4


@dataclass(frozen=True, slots=True, eq=False)
class SmileQuotes:
    """Implied volatilities (n,) of one expiry at log-moneyness (n,), increasing; see :class:`SviSlice` for k.

    ``rounding`` : the unit to which they were rounded, 0 for none.
    """

    expiry_date: date
    log_moneyness: Array
    volatilities: Array
    rounding: float = 0.0

    @property
    def allowance(self) -> float:
        """The error in volatility that a quote near the forward may be met to."""
        return min(max(0.5 * self.rounding, LEAST_ALLOWANCE), LARGEST_ALLOWANCE)

    @classmethod
    def of(
        cls, expiry_date: date, log_moneyness: ArrayLike, volatilities: ArrayLike, rounding: float | None = None
    ) -> SmileQuotes:
        """Checked, and sorted by log-moneyness. Volatilities are annualised, 0.20 for 20 %.

        ``rounding`` is read off the volatilities by :func:`rounding_of` where it is not given.

        Raises ValueError unless there is one volatility per log-moneyness, from ``LEAST_VOLATILITY`` to
        ``LARGEST_VOLATILITY``, all are finite and no log-moneyness comes twice.
        """
        k, volatility = (np.atleast_1d(np.asarray(x, dtype=float)) for x in (log_moneyness, volatilities))
        if k.ndim != 1 or k.shape != volatility.shape or k.size == 0:
            raise ValueError(f"{volatility.shape} volatilities do not fit log-moneyness of shape {k.shape}")
        if not (np.all(np.isfinite(k)) and np.all(is_volatility(volatility))):
            raise ValueError(f"the volatilities of {expiry_date} must be {_VOLATILITIES}, and all its quotes finite")
        order = np.argsort(k, kind="stable")
        k, volatility = k[order], volatility[order]
        if np.any(np.diff(k) <= 0.0):
            raise ValueError(f"{expiry_date} has two volatilities for one strike")
        return cls(expiry_date, k, volatility, rounding_of(volatility) if rounding is None else rounding)


@dataclass(frozen=True, slots=True)
class SmileParameters:
    """A smile by its volatility at the forward and that volatility's derivatives in log-moneyness there.

    ``volatility`` : annualised, k = 0. ``skew`` : d volatility / dk at k = 0 (-0.10: the volatility of
    a strike 1 % lower is about 0.1 vol points higher). ``curvature`` : d^2 volatility / dk^2
    at k = 0, or None if it is not quoted.
    """

    expiry_date: date
    volatility: float
    skew: float = 0.0
    curvature: float | None = None

    def __post_init__(self) -> None:
        numbers = (self.volatility, self.skew, 0.0 if self.curvature is None else self.curvature)
        if not (all(map(math.isfinite, numbers)) and is_volatility(self.volatility)):
            raise ValueError(f"the volatility of {self.expiry_date} must be {_VOLATILITIES}, and all its quotes finite")

    def slice(self, time: float) -> SviSlice:
        """The slice with these three at ``time`` years; where no convex total variance has them, the nearest one."""
        curvature = None
        if self.curvature is not None:
            curvature = 2.0 * time * (self.skew * self.skew + self.volatility * self.curvature)
        slope = 2.0 * self.volatility * self.skew * time
        return SviSlice.from_forward(self.volatility**2 * time, slope, curvature)

    def samples(self, time: float) -> SmileQuotes:
        """Nine volatilities of :meth:`slice` within two standard deviations of the forward."""
        k = np.linspace(-2.0, 2.0, 9) * self.volatility * math.sqrt(time)
        return SmileQuotes(self.expiry_date, k, np.sqrt(self.slice(time).total_variance(k) / time))


def is_volatility(volatility: ArrayLike) -> NDArray[np.bool_]:
    """Whether each lies from ``LEAST_VOLATILITY`` to ``LARGEST_VOLATILITY``, any shape; a NaN does not."""
    volatility = np.asarray(volatility, dtype=float)
    out: NDArray[np.bool_] = (volatility >= LEAST_VOLATILITY) & (volatility <= LARGEST_VOLATILITY)
    return out


def rounding_of(volatilities: Array) -> float:
    """The largest of ``ROUNDINGS`` of which all volatilities are multiples; 0 if there is none."""
    for unit in ROUNDINGS:
        multiples = volatilities / unit
        if np.all(np.abs(multiples - np.round(multiples)) < 1e-6):
            return unit
    return 0.0


#: Either way of quoting one expiry.
Smile = SmileQuotes | SmileParameters
