"""Gates over the market as a whole: implausible or inconsistent data, used but reported."""

from __future__ import annotations

from collections.abc import Iterator
from datetime import date, timedelta
from itertools import combinations, pairwise

from pricer.core.issues import Issue
from pricer.market.correlation import Repair
from pricer.market.curves import DiscountCurve
from pricer.market.findings import Locate, nowhere, percent, warning
from pricer.market.fx import FxRates
from pricer.market.market import Market
from pricer.market.underlying import Underlying

#: Zero rates outside this range are reported.
PLAUSIBLE_ZERO_RATES = (-0.05, 0.30)
#: Continuous dividend yields, which may hold a repo margin, outside this range are reported.
PLAUSIBLE_YIELDS = (-0.05, 0.25)
#: Proportional dividends of one underlying that add up to more than this within a year are reported.
PLAUSIBLE_DIVIDENDS = 0.50
#: A quoted exchange rate that differs by more than this from its cross is reported.
TRIANGLE_TOLERANCE = 0.01


def gates(market: Market, repair: Repair | None = None, place: Locate = nowhere) -> tuple[Issue, ...]:
    """Warnings about ``market``, and about the ``repair`` its correlation matrix took.

    ``place`` gives the cell of "valuation_date", "curve:ID", "dividend_yield:UNDERLYING",
    "dividends:UNDERLYING", "fx:EURUSD" or "correlation:A:B", or None.
    """
    issues: list[Issue] = [*_weekend(market.valuation_date, place)]
    if repair is not None:
        issues.append(_repair(repair, place))
    for curve in market.curves.values():
        issues.extend(_curve(curve, place))
    for underlying in market.underlyings.values():
        issues.extend(_dividend_yield(underlying, place))
        issues.extend(_dividends(underlying, place))
    issues.extend(_triangles(market.fx, place))
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


def _curve(curve: DiscountCurve, place: Locate) -> Iterator[Issue]:
    here = place(f"curve:{curve.curve_id}")
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


def _dividends(underlying: Underlying, place: Locate) -> Iterator[Issue]:
    payments = sorted((d.ex_date, d.fraction) for d in underlying.dividends.proportional)
    sums = [
        (sum(fraction for day, fraction in payments if first <= day < first + timedelta(days=365)), first)
        for first, _ in payments
    ]
    if sums and max(sums)[0] > PLAUSIBLE_DIVIDENDS:
        total, first = max(sums)
        yield warning(
            place(f"dividends:{underlying.underlying_id}"),
            "implausible-dividends",
            f"proportional dividends of {underlying.underlying_id} that add up to {percent(total, 1)} of its price "
            f"in the year from {first}",
            f"at most {percent(PLAUSIBLE_DIVIDENDS)} in a year",
            "Check the unit: a dividend of 2 % of the price is entered as 0.02. The dividends are used as given.",
        )


def _triangles(fx: FxRates, place: Locate) -> Iterator[Issue]:
    for a, b, c in combinations(fx.currencies, 3):
        if not all((x, y) in fx.quotes or (y, x) in fx.quotes for x, y in ((a, b), (b, c), (a, c))):
            continue
        pair = (a, c) if (a, c) in fx.quotes else (c, a)
        quoted, crossed = fx.rate(*pair), fx.rate(pair[0], b) * fx.rate(b, pair[1])
        # Relative to the smaller of the two, so that the order of the three currencies does not matter.
        if max(quoted, crossed) / min(quoted, crossed) - 1.0 > TRIANGLE_TOLERANCE:
            name = "".join(pair)
            yield warning(
                place(f"fx:{name}"),
                "inconsistent-fx",
                f"{name} quoted at {quoted:.6g}, but {crossed:.6g} through {b}",
                f"quotes that agree to {percent(TRIANGLE_TOLERANCE)}",
                "Check the three pairs; each conversion uses the direct quote where there is one.",
            )
