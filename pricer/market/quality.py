"""Gates over the market as a whole: implausible or inconsistent data, used but reported."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import date
from itertools import pairwise

from pricer.core.issues import Issue
from pricer.core.source import Place
from pricer.market.correlation import Repair
from pricer.market.credit import HazardCurve
from pricer.market.curves import DiscountCurve
from pricer.market.dividend_quality import dividend_gates
from pricer.market.findings import Locate, nowhere, percent, warning
from pricer.market.fx_quality import fx_gates
from pricer.market.market import Market
from pricer.market.surface_quality import surface_gates
from pricer.market.underlying import Underlying

#: Zero rates outside this range are reported.
PLAUSIBLE_ZERO_RATES = (-0.05, 0.30)
#: Continuous dividend yields, which may hold a repo margin, outside this range are reported.
PLAUSIBLE_YIELDS = (-0.05, 0.25)
#: Hazard rates above this are reported.
PLAUSIBLE_HAZARD_RATE = 0.50


def gates(market: Market, repair: Repair | None = None, place: Locate = nowhere) -> tuple[Issue, ...]:
    """Warnings about ``market``, and about the ``repair`` its correlation matrix took; errors of what cannot be used.

    ``place`` gives the cell of "valuation_date", "curve:ID", "repo:UNDERLYING", "volatility:UNDERLYING:EXPIRY",
    "dividend_yield:UNDERLYING", "dividends:UNDERLYING", "fx:EURUSD", "fx_volatilities:EURUSD", "credit:NAME" or
    "correlation:A:B", or None.
    """
    issues: list[Issue] = [*_weekend(market.valuation_date, place)]
    if repair is not None:
        issues.append(_repair(repair, place))
    for curve in market.curves.values():
        here = place(f"curve:{curve.curve_id}")
        issues.extend(_rates(curve, here))
        issues.extend(_forward_rates(curve, here))
    for name, repo in market.repo.items():
        for curve in (repo.long, repo.short):
            issues.extend(_rates(curve, place(f"repo:{name}")))
    for underlying in market.underlyings.values():
        issues.extend(_dividend_yield(underlying, place))
    issues.extend(dividend_gates(market, place))
    for surface in market.surfaces.values():
        issues.extend(surface_gates(surface, place))
    for credit in market.credit.values():
        issues.extend(_hazard_rates(credit, place))
    issues.extend(fx_gates(market, place))
    return tuple(issues)


def _weekend(day: date, place: Locate) -> Iterator[Issue]:
    if day.weekday() >= 5:
        yield warning(
            place("valuation_date"),
            "weekend-valuation",
            f"the valuation date {day}, a {'Saturday' if day.weekday() == 5 else 'Sunday'}",
            "a day on which markets close",
            "Check the date; the book is valued to it as given.",
        )


def _repair(repair: Repair, place: Locate) -> Issue:
    a, b = repair.pair
    return warning(
        place(f"correlation:{a}:{b}") or place(f"correlation:{b}:{a}"),
        "correlation-repaired",
        f"correlations that contradict each other (smallest eigenvalue {repair.smallest_eigenvalue:.3g})",
        "a positive semi-definite matrix",
        f"The nearest correlation matrix is used instead, at distance {repair.distance:.3g}; its largest change is "
        f"{a} / {b} from {repair.before:.6f} to {repair.after:.6f}. Review the correlations of this pair.",
    )


def _rates(curve: DiscountCurve, here: Place | None) -> Iterator[Issue]:
    low, high = PLAUSIBLE_ZERO_RATES
    rates = [(curve.zero_rate(day), day) for day in curve.dates]
    strange = [(rate, day) for rate, day in rates if not low <= rate <= high]
    if strange:
        rate, day = max(strange, key=lambda item: abs(item[0]))
        yield warning(
            here,
            "implausible-rate",
            f"a zero rate of {percent(rate, 2)} for {day} on curve {curve.curve_id}",
            f"zero rates between {percent(low)} and {percent(high)}",
            "Check the unit: 2.5 % is entered as 0.025. The rate is used as given.",
        )


def _forward_rates(curve: DiscountCurve, here: Place | None) -> Iterator[Issue]:
    days = (curve.valuation_date, *curve.dates)
    spans = zip(pairwise(days), pairwise(curve.times), pairwise(curve.log_discount_factors), strict=True)
    forwards = [((x - y) / (t - s), start, end) for (start, end), (s, t), (x, y) in spans]
    # Flat stretches of rounded quotes miss 0 by rounding only.
    falling = [item for item in forwards if item[0] < -1e-8]
    if falling:
        rate, start, end = min(falling)
        others = f" (and over {len(falling) - 1} other spans)" if len(falling) > 1 else ""
        yield warning(
            here,
            "negative-forward-rate",
            f"discount factors that rise from {start} to {end} on curve {curve.curve_id}, "
            f"a forward rate of {percent(rate, 2)}{others}",
            "discount factors that fall with time, unless rates are negative",
            "Check the curve's points around these dates; they are used as given.",
        )


def _dividend_yield(underlying: Underlying, place: Locate) -> Iterator[Issue]:
    (low, high), rate = PLAUSIBLE_YIELDS, underlying.dividends.yield_rate
    if not low <= rate <= high:
        yield warning(
            place(f"dividend_yield:{underlying.underlying_id}"),
            "implausible-dividend-yield",
            f"a dividend yield of {percent(rate, 1)} for {underlying.underlying_id}",
            f"dividend yields between {percent(low)} and {percent(high)}",
            "Check the unit: 2.1 % is entered as 0.021. The yield is used as given.",
        )


def _hazard_rates(credit: HazardCurve, place: Locate) -> Iterator[Issue]:
    rate, day = max(zip(credit.hazard_rates, credit.dates, strict=True))
    if rate > PLAUSIBLE_HAZARD_RATE:
        yield warning(
            place(f"credit:{credit.name}"),
            "implausible-hazard-rate",
            f"a hazard rate of {percent(rate, 1)} a year to {day} for {credit.name}",
            f"hazard rates up to {percent(PLAUSIBLE_HAZARD_RATE)}",
            "Check the unit: a spread of 120 basis points is entered as 0.012. The rates are used as given.",
        )
