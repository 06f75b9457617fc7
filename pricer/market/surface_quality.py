"""Gates over one volatility surface: contradictions, misses, and whether it may be used at all."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence

from pricer.core.issues import Issue
from pricer.core.source import Place
from pricer.market.arbitrage import ArbitrageKind, Violation
from pricer.market.checked_surface import WORST_CONTRADICTION, CheckedSurface
from pricer.market.findings import Locate, error, nowhere, percent, warning
from pricer.market.volatility_quality import quote_place

#: Quotes between 10 and 90 delta that are missed by more than this volatility (0.05 vol points) are reported.
VISIBLE_MISS = 5e-4
#: Violations told one by one; of the rest only the number is given.
MOST_VIOLATIONS = 10


def surface_gates(surface: CheckedSurface, place: Locate = nowhere) -> tuple[Issue, ...]:
    """Warnings about the quotes and the fit of ``surface``, and one error if it fails.

    ``place`` gives the cell of "volatility:UNDERLYING:EXPIRY:STRIKE" or, for the first quote of an expiry (a date
    like 2027-05-31), "volatility:UNDERLYING:EXPIRY", or None.
    """
    name = surface.underlying_id

    def at(violation: Violation) -> Place | None:
        return _nearest_cell(surface, violation, place)

    ordered = sorted(surface.violations, key=lambda violation: -violation.size)
    issues = [_violation(name, violation, at(violation)) for violation in ordered[:MOST_VIOLATIONS]]
    if len(ordered) > MOST_VIOLATIONS:
        issues.append(_rest(name, ordered[MOST_VIOLATIONS:], at(ordered[MOST_VIOLATIONS])))
    issues.extend(_misses(surface, place))
    if not surface.passes:
        issues.append(_failure(surface, _worst_cell(surface, ordered, place)))
    return tuple(issues)


def _nearest_cell(surface: CheckedSurface, violation: Violation, place: Locate) -> Place | None:
    """The quote of the violation's (earlier) expiry next to its strike."""
    own = [fit for fit in surface.quotes if fit.expiry_date == violation.expiry_date]
    if not own:
        return place(f"volatility:{surface.underlying_id}:{violation.expiry_date}")
    nearest = min(own, key=lambda fit: abs(math.log(fit.relative_strike) - violation.log_moneyness))
    return quote_place(surface.underlying_id, nearest, place)


def _worst_cell(surface: CheckedSurface, ordered: Sequence[Violation], place: Locate) -> Place | None:
    """The quote that the first of the surface's failures is about."""
    for grave in (
        [v for v in ordered if v.quoted and v.size > WORST_CONTRADICTION],
        [v for v in ordered if not v.quoted],
    ):
        if grave:
            return _nearest_cell(surface, grave[0], place)
    middle = [fit for fit in surface.quotes if fit.in_the_middle] or list(surface.quotes)
    return quote_place(surface.underlying_id, max(middle, key=lambda fit: abs(fit.error)), place)


def _violation(name: str, violation: Violation, here: Place | None) -> Issue:
    days = f"{violation.expiry_date}"
    if violation.later_date is not None:
        days = f"{violation.expiry_date} and {violation.later_date}"
    whose = "the quotes" if violation.quoted else "the fitted surface"
    strike = percent(math.exp(violation.log_moneyness), 1)
    calendar = violation.kind is ArbitrageKind.CALENDAR
    size = f"of {_points(violation.size)}" if violation.quoted or calendar else f"(g = {-violation.size:.3g})"
    if not violation.quoted:
        mend = "The quotes around it admit no better surface; review them."
    elif calendar:
        mend = f"Raise the volatility of {violation.later_date} there by {_points(violation.size)}, or lower the other."
    else:
        mend = f"Lower the volatility at this strike by {_points(violation.size)}, or raise its neighbours."
    return warning(
        here,
        "calendar-arbitrage" if calendar else "butterfly-arbitrage",
        f"{violation.kind} arbitrage {size} in {whose} of {name} for {days}, at strike {strike} of the forward",
        "total variance that does not fall in time" if calendar else "option prices that are convex in strike",
        mend,
    )


def _rest(name: str, rest: Sequence[Violation], here: Place | None) -> Issue:
    return warning(
        here,
        "more-arbitrage",
        f"{len(rest)} more violations of {name}, none larger than those named",
        "a surface without arbitrage",
        "Correct the larger ones first; they often cause the others.",
    )


def _misses(surface: CheckedSurface, place: Locate) -> Iterator[Issue]:
    missed = [fit for fit in surface.quotes if fit.in_the_middle and abs(fit.error) > VISIBLE_MISS]
    if not missed:
        return
    worst = max(missed, key=lambda fit: abs(fit.error))
    others = f", and {len(missed) - 1} more of its quotes by less" if len(missed) > 1 else ""
    yield warning(
        quote_place(surface.underlying_id, worst, place),
        "volatility-miss",
        f"a surface of {surface.underlying_id} that misses the quote of {worst.expiry_date} at strike "
        f"{worst.strike:.6g} ({percent(worst.relative_strike, 1)} of the forward) by {_points(abs(worst.error))}: "
        f"{percent(worst.fitted_volatility, 2)} for {percent(worst.quoted_volatility, 2)}{others}",
        f"quotes between 10 and 90 delta met within {_points(VISIBLE_MISS)}",
        "Check these quotes and their neighbours: no surface free of arbitrage and smooth in strike meets them.",
    )


def _failure(surface: CheckedSurface, here: Place | None) -> Issue:
    return error(
        here,
        "failing-surface",
        f"a volatility surface of {surface.underlying_id} that fails its checks: {'; '.join(surface.failures)}",
        "quotes that a surface free of arbitrage meets",
        "Correct the quotes of this underlying, or run with --accept-failing-surfaces: trades on it are then priced "
        "and marked.",
    )


def _points(size: float) -> str:
    return f"{100.0 * size:.2f} vol points"
