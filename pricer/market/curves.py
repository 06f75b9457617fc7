"""Discount curves: one per currency and collateral."""

from __future__ import annotations

import math
from bisect import bisect_left
from collections.abc import Sequence
from dataclasses import dataclass, replace
from datetime import date
from itertools import pairwise

from pricer.market.calendars import currency_calendar, year_fraction
from pricer.market.quoted_curves import REPRICING_TOLERANCE, RateQuote, bootstrap, repriced


@dataclass(frozen=True, slots=True)
class DiscountCurve:
    """Discount factors, log-linear in time between the quoted dates and beyond the last.

    Between two dates the instantaneous forward rate is therefore constant, and beyond the
    last date it stays what it was before it. ``collateral`` is empty for the currency's
    standard curve. ``calendar`` is the one its tenors were counted on; interpolation
    does not need it. ``dates`` are the quoted dates after the valuation date; ``times`` and
    ``log_discount_factors`` begin with the valuation date itself (0 and 0). ``quotes`` are the deposits
    and swaps that it was made from, if it was.

    Use the named constructors, which check their input.
    """

    curve_id: str
    currency: str
    collateral: str
    valuation_date: date
    day_count: str
    calendar: str
    dates: tuple[date, ...]
    times: tuple[float, ...]
    log_discount_factors: tuple[float, ...]
    quotes: tuple[RateQuote, ...] = ()

    @classmethod
    def from_zero_rates(
        cls,
        curve_id: str,
        currency: str,
        collateral: str,
        valuation_date: date,
        dates: Sequence[date],
        zero_rates: Sequence[float],
        day_count: str = "ACT/365F",
        calendar: str = "NONE",
    ) -> DiscountCurve:
        """From continuously compounded zero rates per year of ``day_count``.

        Raises ValueError unless there is one finite rate per date and the dates increase
        strictly and lie after the valuation date.
        """
        _check_quotes(curve_id, valuation_date, dates, zero_rates)
        times = [year_fraction(valuation_date, day, day_count) for day in dates]
        logs = [-rate * time for rate, time in zip(zero_rates, times, strict=True)]
        return cls._from_logs(curve_id, currency, collateral, valuation_date, dates, times, logs, day_count, calendar)

    @classmethod
    def from_discount_factors(
        cls,
        curve_id: str,
        currency: str,
        collateral: str,
        valuation_date: date,
        dates: Sequence[date],
        discount_factors: Sequence[float],
        day_count: str = "ACT/365F",
        calendar: str = "NONE",
    ) -> DiscountCurve:
        """From discount factors; one given for the valuation date must be 1.

        Raises ValueError unless there is one positive finite factor per date and the dates
        increase strictly from the valuation date on.
        """
        if dates and dates[0] == valuation_date and len(dates) == len(discount_factors):
            if discount_factors[0] != 1.0:
                raise ValueError(
                    f"curve {curve_id}: the discount factor on the valuation date {valuation_date} "
                    f"must be 1; got {discount_factors[0]:g}"
                )
            dates, discount_factors = dates[1:], discount_factors[1:]
        _check_quotes(curve_id, valuation_date, dates, discount_factors)
        for day, factor in zip(dates, discount_factors, strict=True):
            if factor <= 0.0:
                raise ValueError(f"curve {curve_id}: the discount factor of {day} must be above 0; got {factor:g}")
        times = [year_fraction(valuation_date, day, day_count) for day in dates]
        logs = [math.log(factor) for factor in discount_factors]
        return cls._from_logs(curve_id, currency, collateral, valuation_date, dates, times, logs, day_count, calendar)

    @classmethod
    def from_quotes(
        cls,
        curve_id: str,
        currency: str,
        collateral: str,
        valuation_date: date,
        quotes: Sequence[RateQuote],
        day_count: str = "ACT/365F",
    ) -> DiscountCurve:
        """From deposits and overnight-indexed swaps of ``currency`` (see :mod:`pricer.market.quoted_curves`).

        The quotes' last dates become the curve's dates; :func:`pricer.market.quoted_curves.reprice`
        shows each quote beside the curve's rate. Raises ValueError for a currency without
        conventions, quotes that end on one date or that no curve satisfies, and a curve that
        misses a quote by more than ``REPRICING_TOLERANCE``.
        """
        try:
            found = bootstrap(currency, valuation_date, quotes, day_count)
        except ValueError as error:
            raise ValueError(f"curve {curve_id}: {error}") from error
        curve = cls.from_discount_factors(
            curve_id,
            currency,
            collateral,
            valuation_date,
            found.dates,
            found.discount_factors,
            day_count,
            currency_calendar(currency),
        )
        worst = max(repriced(found.instruments, curve.discount_factor), key=lambda quote: abs(quote.error))
        if abs(worst.error) > REPRICING_TOLERANCE:
            raise ValueError(
                f"curve {curve_id}: the {worst.quote} quoted at {worst.quote.rate:g} is repriced at {worst.rate:.12g}"
            )
        return replace(curve, quotes=tuple(instrument.quote for instrument in found.instruments))

    @classmethod
    def _from_logs(
        cls,
        curve_id: str,
        currency: str,
        collateral: str,
        valuation_date: date,
        dates: Sequence[date],
        times: Sequence[float],
        logs: Sequence[float],
        day_count: str,
        calendar: str,
    ) -> DiscountCurve:
        nodes = (0.0, *times)
        for (start, end), day in zip(pairwise(nodes), dates, strict=True):
            if end <= start:  # 30/360 sees no time between a 30th and a 31st
                raise ValueError(f"curve {curve_id}: {day} adds no time to the date before it under {day_count}")
        return cls(
            curve_id, currency, collateral, valuation_date, day_count, calendar, tuple(dates), nodes, (0.0, *logs)
        )

    @property
    def last_date(self) -> date:
        """The last quoted date."""
        return self.dates[-1]

    def is_extrapolated(self, day: date) -> bool:
        """Whether ``day`` lies beyond the last quoted date."""
        return day > self.last_date

    def discount_factor(self, day: date) -> float:
        """Value on the valuation date of 1 paid on ``day``.

        Raises ValueError if ``day`` lies before the valuation date.
        """
        return math.exp(self.log_discount_factor(self.time(day)))

    def zero_rate(self, day: date) -> float:
        """Continuously compounded zero rate to ``day``; on the valuation date, the limit there."""
        time = self.time(day)
        if time <= 0.0:
            time = self.times[1]
        return -self.log_discount_factor(time) / time

    def time(self, day: date) -> float:
        """Years of the day count from the valuation date to ``day``; raises ValueError for a day before it."""
        if day < self.valuation_date:
            raise ValueError(
                f"curve {self.curve_id}: {day} lies before the valuation date {self.valuation_date} and has no "
                "discount factor"
            )
        return year_fraction(self.valuation_date, day, self.day_count)

    def log_discount_factor(self, time: float) -> float:
        """Logarithm of the discount factor at ``time`` >= 0 in years of the day count."""
        times, logs = self.times, self.log_discount_factors
        right = min(max(bisect_left(times, time), 1), len(times) - 1)
        start, end = times[right - 1], times[right]
        weight = (time - start) / (end - start)
        return logs[right - 1] + weight * (logs[right] - logs[right - 1])


def _check_quotes(curve_id: str, valuation_date: date, dates: Sequence[date], values: Sequence[float]) -> None:
    if len(dates) != len(values):
        raise ValueError(f"curve {curve_id}: {len(dates)} dates for {len(values)} values")
    if not dates:
        raise ValueError(f"curve {curve_id}: no date after the valuation date {valuation_date}")
    if dates[0] <= valuation_date:
        raise ValueError(f"curve {curve_id}: date {dates[0]} is not after the valuation date {valuation_date}")
    for earlier, later in pairwise(dates):
        if later <= earlier:
            raise ValueError(f"curve {curve_id}: dates must increase; {later} follows {earlier}")
    for day, value in zip(dates, values, strict=True):
        if not math.isfinite(value):
            raise ValueError(f"curve {curve_id}: the value of {day} is not a finite number")
