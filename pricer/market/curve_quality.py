"""Gates over discount and repo curves: implausible zero rates, and forward rates that point at one bad quote."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from itertools import pairwise

from pricer.core.issues import Issue
from pricer.core.source import Place
from pricer.market.curves import DiscountCurve
from pricer.market.findings import Locate, percent, warning
from pricer.market.quoted_curves import first_day
from pricer.market.repo import RepoCurve

#: Zero rates outside this range are reported (a rule of our own).
PLAUSIBLE_ZERO_RATES = (-0.05, 0.30)
#: Repo rates outside this range are reported: those of a share in demand fall, none rise far above cash.
PLAUSIBLE_REPO_RATES = (-0.05, 0.15)
#: Repo rates that differ by more than this from the zero rates of their currency are reported.
PLAUSIBLE_REPO_MARGIN = 0.10
#: Forward rates below this are reported, and those that differ by more than the second from a neighbour.
LEAST_FORWARD_RATE, LARGEST_STEP = -0.05, 0.10
#: Steps of forward rates over so short a time that they move discount factors by less than this are rounding.
FACTOR_ROUNDING = 2e-4


def curve_gates(curve: DiscountCurve, place: Locate) -> Iterator[Issue]:
    """Warnings about a discount curve.

    ``place`` gives the cell of "curve:ID", "curve_points:ID:TENOR" or "curve_points:ID:DATE", or None.
    """
    here = place(f"curve:{curve.curve_id}")
    yield from _holiday(curve, here)
    points = [_point_place(curve, i, place) or here for i in range(len(curve.dates))]
    told = list(_zero_rates(curve, points, PLAUSIBLE_ZERO_RATES))
    yield from told or _forward_rates(curve, points)


def repo_gates(name: str, repo: RepoCurve, standard: DiscountCurve | None, place: Locate) -> Iterator[Issue]:
    """Warnings about the repo rates of the underlying ``name``.

    ``standard`` is the curve of its currency, None if that is in doubt itself. ``place`` gives the cell of
    "repo:UNDERLYING" or "repo:UNDERLYING:DATE", or None.
    """
    here = place(f"repo:{name}")
    for curve in (repo.long, repo.short):
        points = [place(f"repo:{name}:{day}") or here for day in curve.dates]
        told = list(_zero_rates(curve, points, PLAUSIBLE_REPO_RATES))
        yield from told or (_margin(curve, standard, points) if standard is not None else ())


def _holiday(curve: DiscountCurve, here: Place | None) -> Iterator[Issue]:
    """Weekends are told once for the whole market."""
    today = curve.valuation_date
    first = first_day(curve.currency, today) if curve.quotes and today.weekday() < 5 else today
    if first != today:
        yield warning(
            here,
            "holiday-valuation",
            f"the valuation date {today}, on which the market of curve {curve.curve_id}'s quotes is closed",
            "quotes of a business day",
            f"They are taken as those of {first}, and the first rate accrues until then. Check the date.",
        )


def _point_place(curve: DiscountCurve, i: int, place: Locate) -> Place | None:
    """The cell of the curve's point number ``i``, by its tenor if it was quoted by one."""
    key = curve.quotes[i].tenor if curve.quotes else str(curve.dates[i])
    return place(f"curve_points:{curve.curve_id}:{key}")


def _zero_rates(
    curve: DiscountCurve, points: Sequence[Place | None], plausible: tuple[float, float]
) -> Iterator[Issue]:
    low, high = plausible
    rates = [(curve.zero_rate(day), day, here) for day, here in zip(curve.dates, points, strict=True)]
    strange = [item for item in rates if not low <= item[0] <= high]
    if strange:
        rate, day, here = max(strange, key=lambda item: abs(item[0]))
        yield warning(
            here,
            "implausible-rate",
            f"a zero rate of {percent(rate, 2)} for {day} on curve {curve.curve_id}",
            f"zero rates between {percent(low)} and {percent(high)}",
            "Check the unit: 2.5 % is entered as 0.025. The rate is used as given.",
        )


def _margin(curve: DiscountCurve, standard: DiscountCurve, points: Sequence[Place | None]) -> Iterator[Issue]:
    margins = [
        (curve.zero_rate(day) - standard.zero_rate(day), day, here)
        for day, here in zip(curve.dates, points, strict=True)
    ]
    margin, day, here = max(margins, key=lambda item: abs(item[0]))
    if abs(margin) > PLAUSIBLE_REPO_MARGIN:
        yield warning(
            here,
            "implausible-repo",
            f"a rate of {percent(curve.zero_rate(day), 2)} for {day} on curve {curve.curve_id}, "
            f"{percent(abs(margin), 2)} {'above' if margin > 0.0 else 'below'} curve {standard.curve_id}",
            f"repo rates within {percent(PLAUSIBLE_REPO_MARGIN)} of the currency's own",
            "Check the unit: 2.5 % is entered as 0.025. The rate is used as given.",
        )


def _forward_rates(curve: DiscountCurve, points: Sequence[Place | None]) -> Iterator[Issue]:
    """One warning, at the point without which forward rates would be the most even."""
    times, logs = curve.times, curve.log_discount_factors
    never_negative = all(log <= 1e-12 for log in logs)
    worst = _strangeness(times, logs, never_negative)
    if worst == 0.0:
        return
    left = [_strangeness(_without(times, i), _without(logs, i), never_negative) for i in range(1, len(times))]
    i = min(range(len(left)), key=left.__getitem__)
    days, forwards = (curve.valuation_date, *curve.dates), list(_forwards(times, logs))
    rates = f"{percent(forwards[i], 2)} from {days[i]} to {days[i + 1]}"
    if i + 1 < len(forwards):
        rates += f" and {percent(forwards[i + 1], 2)} from there to {days[i + 2]}"
    what = (
        f"the {curve.quotes[i]} at {percent(curve.quotes[i].rate, 2)}" if curve.quotes else f"the point {days[i + 1]}"
    )
    yield warning(
        points[i],
        "implausible-forward-rate",
        f"{what} of curve {curve.curve_id}, which makes forward rates of {rates}",
        "forward rates that change little from one point to the next, and none below 0 while zero rates are above it",
        "Check this point, then its neighbours. They are used as given.",
    )


def _forwards(times: Sequence[float], logs: Sequence[float]) -> Iterator[float]:
    for (s, t), (x, y) in zip(pairwise(times), pairwise(logs), strict=True):
        yield (x - y) / (t - s)


def _strangeness(times: Sequence[float], logs: Sequence[float], never_negative: bool) -> float:
    """The largest excess of forward rates over what is plausible; 0 if there is none.

    ``times``, ``logs`` : of the curve's points, beginning with the valuation date. ``never_negative`` : no zero rate is
    below 0, so no forward rate is expected to be.
    """
    spans = [t - s for s, t in pairwise(times)]
    forwards = list(_forwards(times, logs))
    out = 0.0
    for forward in forwards:
        out = max(out, LEAST_FORWARD_RATE - forward)
        # Flat stretches of rounded quotes miss 0 by rounding only.
        if never_negative and forward < -1e-8:
            out = max(out, -forward)
    for (f, g), (s, t) in zip(pairwise(forwards), pairwise(spans), strict=True):
        if abs(g - f) * min(s, t) > FACTOR_ROUNDING:
            out = max(out, abs(g - f) - LARGEST_STEP)
    return out


def _without(values: Sequence[float], i: int) -> list[float]:
    return [*values[:i], *values[i + 1 :]]
