"""Dividends of one underlying: a continuous yield, proportional payments and cash amounts."""

from __future__ import annotations

import math
from dataclasses import dataclass
from datetime import date

from pricer.market.calendars import year_fraction


@dataclass(frozen=True, slots=True)
class ProportionalDividend:
    """On ``ex_date`` the price falls by ``fraction`` of itself (0.02 for 2 %)."""

    ex_date: date
    fraction: float

    def __post_init__(self) -> None:
        if not 0.0 <= self.fraction < 1.0:
            raise ValueError(
                f"the dividend of {self.ex_date} must be a fraction from 0 to below 1 of the price; got {self.fraction}"
            )


@dataclass(frozen=True, slots=True)
class CashDividend:
    """On ``ex_date`` the price falls by ``amount``, in the underlying's currency, whatever the price is."""

    ex_date: date
    amount: float

    def __post_init__(self) -> None:
        if not (math.isfinite(self.amount) and self.amount >= 0.0):
            raise ValueError(f"the cash dividend of {self.ex_date} must be an amount from 0 up; got {self.amount}")


@dataclass(frozen=True, slots=True)
class Dividends:
    """``yield_rate`` is continuous, per ACT/365F year; it may hold a repo margin and be negative.

    Where a proportional and a cash dividend share an ex date, the proportional one goes first.
    """

    yield_rate: float = 0.0
    proportional: tuple[ProportionalDividend, ...] = ()
    cash: tuple[CashDividend, ...] = ()

    def __post_init__(self) -> None:
        if not math.isfinite(self.yield_rate):
            raise ValueError(f"the dividend yield must be a finite number; got {self.yield_rate}")

    def growth(self, valuation_date: date, day: date) -> float:
        """What yield and proportional dividends leave of the forward: ``exp(-q t) prod (1 - fraction)``.

        The product is over ex dates after the valuation date (whose spot is already without
        its dividend) up to and including ``day``. Cash dividends are not in it: see
        :mod:`pricer.market.affine_price`. Raises ValueError if ``day`` comes first.
        """
        if day < valuation_date:
            raise ValueError(f"{day} lies before the valuation date {valuation_date} and has no forward")
        factor = math.exp(-self.yield_rate * year_fraction(valuation_date, day))
        for dividend in self.proportional:
            if valuation_date < dividend.ex_date <= day:
                factor *= 1.0 - dividend.fraction
        return factor
