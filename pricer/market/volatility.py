"""Volatility by expiry, flat in strike, and the covariance it gives several underlyings."""

from __future__ import annotations

import math
from bisect import bisect_left
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from pricer.market.calendars import year_fraction

#: A fall of total variance up to this size is rounding, not arbitrage.
VARIANCE_ROUNDING = 1e-12


class CalendarArbitrageError(ValueError):
    """Total variance (volatility squared times years) falls between two expiry dates."""

    def __init__(self, earlier: date, later: date, before: float, after: float, lowest_volatility: float) -> None:
        super().__init__(earlier, later, before, after, lowest_volatility)
        self.earlier = earlier
        self.later = later
        self.before = before
        self.after = after
        self.lowest_volatility = lowest_volatility  # the least the later date may have

    def __str__(self) -> str:
        return (
            f"total variance falls from {self.before:.6f} on {self.earlier} to {self.after:.6f} on {self.later}, "
            f"by {self.before - self.after:.6f}; the volatility of {self.later} must be at least "
            f"{_percent_rounded_up(self.lowest_volatility)}"
        )


@dataclass(frozen=True, slots=True)
class VolatilityCurve:
    """Implied volatilities per ACT/365F year; total variance is linear in time between quotes.

    Before the first quote and after the last the volatility is that quote's.
    ``dates`` are the quoted expiry dates; ``times`` and ``variances`` (total, from the
    valuation date) begin with the valuation date itself (0 and 0) and never fall.
    """

    valuation_date: date
    dates: tuple[date, ...]
    times: tuple[float, ...]
    variances: tuple[float, ...]

    @classmethod
    def from_quotes(
        cls, valuation_date: date, expiry_dates: Sequence[date], volatilities: Sequence[float]
    ) -> VolatilityCurve:
        """From one annualised volatility (0.20 for 20 %) per expiry date.

        Raises :class:`CalendarArbitrageError` at the first pair of dates between which total
        variance falls, and ValueError unless dates increase strictly after the valuation
        date and volatilities are finite and not negative.
        """
        if len(expiry_dates) != len(volatilities):
            raise ValueError(f"{len(expiry_dates)} expiry dates for {len(volatilities)} volatilities")
        if not expiry_dates:
            raise ValueError("a volatility curve needs at least one quote")
        for earlier, later in pairwise((valuation_date, *expiry_dates)):
            if later <= earlier:
                raise ValueError(
                    f"expiry dates must increase and lie after the valuation date {valuation_date}; "
                    f"{later} follows {earlier}"
                )
        for day, volatility in zip(expiry_dates, volatilities, strict=True):
            if not (math.isfinite(volatility) and volatility >= 0.0):
                raise ValueError(f"the volatility of {day} must be a number from 0 up; got {volatility}")
        times = [year_fraction(valuation_date, day) for day in expiry_dates]
        variances: list[float] = []
        for j, (time, volatility) in enumerate(zip(times, volatilities, strict=True)):
            variance = volatility * volatility * time
            if variances and variance < variances[-1]:
                before = variances[-1]
                if variance < before - VARIANCE_ROUNDING:
                    raise CalendarArbitrageError(
                        expiry_dates[j - 1], expiry_dates[j], before, variance, math.sqrt(before / time)
                    )
                variance = before
            variances.append(variance)
        return cls(valuation_date, tuple(expiry_dates), (0.0, *times), (0.0, *variances))

    @property
    def last_date(self) -> date:
        """The last quoted expiry date."""
        return self.dates[-1]

    def is_extrapolated(self, day: date) -> bool:
        """Whether ``day`` lies beyond the last quoted expiry date."""
        return day > self.last_date

    def total_variance(self, day: date) -> float:
        """Variance of the log-level from the valuation date to ``day``, not annualised.

        Raises ValueError if ``day`` lies before the valuation date.
        """
        if day < self.valuation_date:
            raise ValueError(f"{day} lies before the valuation date {self.valuation_date} and has no volatility")
        return self.variance_at(year_fraction(self.valuation_date, day))

    def variance_at(self, time: float) -> float:
        """Total variance at ``time`` >= 0 in ACT/365F years."""
        times, variances = self.times, self.variances
        if time >= times[-1]:
            return variances[-1] * time / times[-1]
        right = max(bisect_left(times, time), 1)
        weight = (time - times[right - 1]) / (times[right] - times[right - 1])
        return variances[right - 1] + weight * (variances[right] - variances[right - 1])

    def volatility(self, day: date) -> float:
        """Annualised volatility to ``day``; on the valuation date, the first quote's."""
        if day == self.valuation_date:
            return math.sqrt(self.variances[1] / self.times[1])
        return math.sqrt(self.total_variance(day) / year_fraction(self.valuation_date, day))


def covariance(curves: Sequence[VolatilityCurve], correlation: NDArray[np.float64], day: date) -> NDArray[np.float64]:
    """Covariance of the log-levels from the valuation date to ``day``, not annualised: (n, n).

    ``correlation`` : (n, n), constant in time. Entry (i, j) is the correlation times the
    integral of the product of the two instantaneous volatilities. These are constant
    between the quoted dates of all curves together, so the integral is a finite sum and exact.

    Raises ValueError if the curves' valuation dates differ, ``day`` lies before them, or
    shapes do not fit.
    """
    correlation = np.asarray(correlation, dtype=float)
    n = len(curves)
    if n == 0 or correlation.shape != (n, n):
        raise ValueError(f"{n} volatility curves do not fit a correlation matrix of shape {correlation.shape}")
    starts = {curve.valuation_date for curve in curves}
    if len(starts) > 1:
        raise ValueError(f"volatility curves of different valuation dates: {', '.join(map(str, sorted(starts)))}")
    start = starts.pop()
    if day < start:
        raise ValueError(f"{day} lies before the valuation date {start} and has no covariance")
    end = year_fraction(start, day)
    times = sorted({time for curve in curves for time in curve.times if time < end} | {0.0, end})
    variances = np.array([[curve.variance_at(time) for time in times] for curve in curves])
    # Rounding may leave a difference of -1e-18 where the instantaneous volatility is 0.
    deviations = np.sqrt(np.maximum(np.diff(variances, axis=1), 0.0))  # (n, n_intervals)
    out: NDArray[np.float64] = correlation * (deviations @ deviations.T)
    return out


def _percent_rounded_up(volatility: float) -> str:
    """Upwards, so that entering the text's number mends the curve."""
    return f"{math.ceil(volatility * 1e4) / 100:.2f} %"
