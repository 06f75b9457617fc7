"""What it costs to hold an underlying with borrowed cash, and what cash from selling it short earns."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date

from pricer.market.curves import DiscountCurve
from pricer.market.two_sided import as_curves, average_forward_rate, check_order


@dataclass(frozen=True, slots=True)
class RepoCurve:
    """Repo rates of one underlying, log-linear discount factors like any curve.

    ``long`` holds the rate paid on cash raised against a long position, ``short`` the rate
    earned on the proceeds of a short one (lower by the lending fee), ``mid`` the mean of both
    zero rates. The linear price grows the spot at ``mid``; what long and short positions cost
    beyond it, half the difference on the absolute position, is a matter of nonlinear valuation.
    """

    underlying_id: str
    long: DiscountCurve
    short: DiscountCurve
    mid: DiscountCurve

    @classmethod
    def from_zero_rates(
        cls,
        underlying_id: str,
        currency: str,
        valuation_date: date,
        dates: Sequence[date],
        long_rates: Sequence[float],
        short_rates: Sequence[float],
        day_count: str = "ACT/365F",
    ) -> RepoCurve:
        """From continuously compounded zero rates per year of ``day_count``, one of each per date.

        Raises ValueError unless dates increase strictly after the valuation date, rates are
        finite, and no forward rate earned short exceeds the one paid long.
        """
        if len(long_rates) != len(short_rates):
            raise ValueError(
                f"repo of {underlying_id}: {len(long_rates)} long rates for {len(short_rates)} short rates"
            )
        middle = [0.5 * (paid + earned) for paid, earned in zip(long_rates, short_rates, strict=True)]
        sides = (("long", long_rates), ("short", short_rates), ("mid", middle))
        long, short, mid = as_curves(f"repo of {underlying_id},", currency, valuation_date, dates, sides, day_count)
        check_order(long, short, "long", "short")
        return cls(underlying_id, long, short, mid)

    @property
    def last_date(self) -> date:
        """The last quoted date."""
        return self.mid.last_date

    def is_extrapolated(self, day: date) -> bool:
        """Whether ``day`` lies beyond the last quoted date."""
        return self.mid.is_extrapolated(day)

    def half_spread(self, start: date, end: date) -> float:
        """Half of long less short forward rate from ``start`` to ``end``, continuous per year; never negative."""
        difference = average_forward_rate(self.long, start, end) - average_forward_rate(self.short, start, end)
        return max(0.5 * difference, 0.0)
