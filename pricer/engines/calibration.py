"""Does the simulated model give back what the market quotes?

The underlying's own local-volatility paths, by the scheme that trades are valued on, price every
quoted vanilla; the volatility implied from that price stands beside the quoted one.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import date

import numpy as np

from pricer.engines.local_vol_vanillas import reprice
from pricer.market.affine_price import AffinePrice
from pricer.market.black import deviation_of_time_value, vega
from pricer.market.calendars import year_fraction
from pricer.market.checked_surface import CheckedSurface
from pricer.market.local_vol_surface import LocalVolSurface
from pricer.market.pure_smile import price_deviations, price_error


@dataclass(frozen=True, slots=True)
class Simulated:
    """A number from paths and its standard error, with what time steps may leave."""

    value: float
    standard_error: float


@dataclass(frozen=True, slots=True)
class Calibration:
    """Volatility of the price for each quote of a surface, in its order, and the mean of X by date, ideally 1."""

    quotes: tuple[Simulated, ...]
    means: Mapping[date, Simulated]


def calibrate(checked: CheckedSurface, price: AffinePrice, dates: Sequence[date], *, seed: int) -> Calibration:
    """Simulate the underlying to all ``dates``, which increase and hold every expiry of the surface's quotes.

    A volatility is NaN where paths give the option no value that any volatility explains, far in the wings.
    """
    today = checked.valuation_date
    quotes = {day: [quote for quote in checked.quotes if quote.expiry_date == day] for day in dates}
    times = [year_fraction(today, day) for day in dates]
    surface = LocalVolSurface.from_implied(checked.surface, horizon=times[-1])
    found = reprice(
        surface,
        times,
        [np.array([quote.pure_log_strike for quote in quotes[day]]) for day in dates],
        group=f"{checked.underlying_id}/vanillas",
        seed=seed,
    )
    errors_with_steps = [np.hypot(e, b) for e, b in zip(found.errors, found.step_biases, strict=True)]
    simulated: dict[tuple[date, float], Simulated] = {}
    for day, time, values, errors in zip(dates, times, found.values, errors_with_steps, strict=True):
        level, root = price.at(day), math.sqrt(time)
        k = np.array([quote.pure_log_strike for quote in quotes[day]])
        deviations = deviation_of_time_value(k, values)
        volatilities = price_deviations(level, k, deviations) / root
        for quote, deviation, volatility, error in zip(quotes[day], deviations, volatilities, errors, strict=True):
            in_volatility = error / float(vega(quote.pure_log_strike, deviation)) / root
            own = price_error(level, quote.pure_log_strike, float(deviation), in_volatility)
            simulated[day, quote.pure_log_strike] = Simulated(float(volatility), own)
    means = {
        day: Simulated(float(mean), float(error))
        for day, mean, error in zip(dates, found.means, found.mean_errors, strict=True)
    }
    ordered = tuple(simulated[quote.expiry_date, quote.pure_log_strike] for quote in checked.quotes)
    return Calibration(ordered, means)
