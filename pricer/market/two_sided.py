"""Two rate curves of which one never lies below the other: what one pays, and what one earns."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import date
from itertools import pairwise

from pricer.market.curves import DiscountCurve

#: Forward rates that cross by no more than this are taken as equal.
RATE_ROUNDING = 1e-12


def check_order(paid: DiscountCurve, earned: DiscountCurve, paid_word: str, earned_word: str) -> None:
    """Raise ValueError where the forward rate earned exceeds the one paid: money for nothing.

    Both curves have the same dates. Zero rates in order are not enough: over a span in which
    they approach each other too fast the forward rates cross.
    """
    starts = (paid.valuation_date, *paid.dates)
    spans = zip(pairwise(starts), forward_rates(paid), forward_rates(earned), strict=True)
    for (start, end), pays, earns in spans:
        if earns > pays + RATE_ROUNDING:
            raise ValueError(
                f"{paid.curve_id}: from {start} to {end} the forward {earned_word} rate {100.0 * earns:.4f} % exceeds "
                f"the forward {paid_word} rate {100.0 * pays:.4f} %"
            )


def forward_rates(curve: DiscountCurve) -> list[float]:
    """The constant instantaneous forward rate of each span between quoted dates, continuous per year."""
    spans = zip(pairwise(curve.times), pairwise(curve.log_discount_factors), strict=True)
    return [(x - y) / (t - s) for (s, t), (x, y) in spans]


def average_forward_rate(curve: DiscountCurve, start: date, end: date) -> float:
    """Continuous forward rate from ``start`` to ``end``, per year of the curve's day count."""
    begin, finish = curve.time(start), curve.time(end)
    if finish <= begin:
        raise ValueError(f"curve {curve.curve_id}: a forward rate needs an end after its start; got {start} to {end}")
    return (curve.log_discount_factor(begin) - curve.log_discount_factor(finish)) / (finish - begin)


def as_curves(
    owner: str,
    currency: str,
    valuation_date: date,
    dates: Sequence[date],
    sides: Sequence[tuple[str, Sequence[float]]],
    day_count: str,
) -> list[DiscountCurve]:
    """A curve "owner side" of continuous zero rates (or spreads) for each (side, rates), all on the same dates."""
    return [
        DiscountCurve.from_zero_rates(f"{owner} {side}", currency, "", valuation_date, dates, rates, day_count)
        for side, rates in sides
    ]
