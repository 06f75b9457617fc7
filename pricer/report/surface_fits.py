"""How well the fitted surface and the simulated model reprice the quotes: errors in vol points, judged and counted."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from enum import StrEnum

from pricer.run.outcome import Outcome, QuoteFit, SurfaceFacts, UnderlyingStanding

#: The simulated model is to reprice every quote between 10 and 90 delta within this many vol points.
TARGET = 0.05
# Rounding of an error computed from volatilities must not push it over the target.
_ROUNDING = 1e-9
_VOL_POINTS = 100.0


class Reach(StrEnum):
    """Where a quote's simulated error ended."""

    BEYOND = "beyond target"
    WITHIN = "within target"
    OUTSIDE = "outside 10 to 90 delta"  # where no target applies
    NOT_SIMULATED = "not simulated"


class Origin(StrEnum):
    """Where a point of the calibration comes from."""

    QUOTED = "quote"
    DERIVED = "derived"  # what a quoted skew and curvature mean one standard deviation from the forward


class Standing(StrEnum):
    """How an underlying's volatilities came out, the worst first."""

    FAILS = "fails"  # its checks: not priced from unless asked for
    UNUSABLE = "cannot be used"  # the underlying lacks something, or something of it was refused
    MISSES = "misses target"  # passes its checks, but a quote between 10 and 90 delta is missed by more than the target
    PASSES = "passes"
    NO_SMILE = "no smile"  # quoted at the forward alone: nothing to fit


@dataclass(frozen=True, slots=True)
class SurfaceFit:
    """One underlying's quotes in a few numbers; errors are the largest absolute ones, in vol points.

    ``trades`` of the book depend on the underlying, ``trades_refused`` of them have no price because of it. ``quotes``
    are the market's; ``derived`` points, which quoted skews and curvatures stand for, are judged like them.
    ``middle`` means those between 10 and 90 delta, ``wings`` the others; NaN where there are none, or where
    nothing was simulated. ``beyond_target`` counts the middle quotes whose simulated error exceeds the target,
    ``fit_beyond_target`` those whose fit error does.
    """

    underlying: str
    verdict: Standing
    trades: int
    trades_refused: int
    expiries: int
    quotes: int
    derived: int
    violations: int
    worst_fit_error_middle: float
    worst_fit_error_wings: float
    worst_simulated_error_middle: float
    worst_simulated_error_wings: float
    fit_beyond_target: int
    beyond_target: int
    why: str


def fit_error(quote: QuoteFit) -> float:
    """Fitted less quoted volatility, in vol points."""
    return _VOL_POINTS * (quote.fitted - quote.quoted)


def simulated_error(quote: QuoteFit) -> float:
    """Simulated less quoted volatility, in vol points; NaN where it was not simulated."""
    return math.nan if quote.simulated is None else _VOL_POINTS * (quote.simulated - quote.quoted)


def reach(quote: QuoteFit) -> Reach:
    """Whether the simulated model reprices the quote as closely as it is to. An error that is no number is beyond."""
    if quote.simulated is None:
        return Reach.NOT_SIMULATED
    if not quote.counts:
        return Reach.OUTSIDE
    return Reach.WITHIN if abs(simulated_error(quote)) <= TARGET + _ROUNDING else Reach.BEYOND


def surface_fit(surface: SurfaceFacts, standing: UnderlyingStanding | None = None) -> SurfaceFit:
    """The numbers of one underlying; ``why`` is what fails it, or keeps it from use, else its first violation."""
    middle = [quote for quote in surface.quotes if quote.counts]
    wings = [quote for quote in surface.quotes if not quote.counts]
    fit_beyond = sum(not abs(fit_error(quote)) <= TARGET + _ROUNDING for quote in middle)
    beyond = sum(reach(quote) is Reach.BEYOND for quote in middle)
    return SurfaceFit(
        underlying=surface.underlying,
        verdict=_verdict(surface, standing, off_target=bool(beyond or fit_beyond)),
        trades=standing.trades if standing else 0,
        trades_refused=standing.trades_refused if standing else 0,
        expiries=len({quote.expiry_date for quote in surface.quotes}),
        quotes=sum(not quote.derived for quote in surface.quotes),
        derived=sum(quote.derived for quote in surface.quotes),
        violations=len(surface.violations),
        worst_fit_error_middle=_worst(map(fit_error, middle)),
        worst_fit_error_wings=_worst(map(fit_error, wings)),
        worst_simulated_error_middle=_worst(map(simulated_error, middle)),
        worst_simulated_error_wings=_worst(map(simulated_error, wings)),
        fit_beyond_target=fit_beyond,
        beyond_target=beyond,
        why="; ".join((*(standing.unusable if standing else ()), *surface.failures))
        or next(iter(surface.violations), ""),
    )


def _verdict(surface: SurfaceFacts, standing: UnderlyingStanding | None, *, off_target: bool) -> Standing:
    if not surface.passes:
        return Standing.FAILS
    if standing is not None and standing.unusable:
        return Standing.UNUSABLE
    if off_target:
        return Standing.MISSES
    return Standing.PASSES if surface.has_smile else Standing.NO_SMILE


def surface_fits(outcome: Outcome) -> list[SurfaceFit]:
    """One an underlying that is quoted, used by the book or refused: the worst verdicts first, else in order of id."""
    surfaces = {surface.underlying: surface for surface in outcome.market.surfaces}
    standings = {standing.underlying: standing for standing in outcome.market.underlyings}
    fits = [
        surface_fit(surfaces.get(name) or SurfaceFacts(name, True, (), (), (), has_smile=False), standings.get(name))
        for name in (*surfaces, *(name for name in standings if name not in surfaces))
    ]
    return sorted(fits, key=lambda fit: list(Standing).index(fit.verdict))


def all_points(surfaces: Iterable[SurfaceFacts]) -> Sequence[QuoteFit]:
    """The quotes of all surfaces and the points derived from their parameters, in the market's order."""
    return [quote for surface in surfaces for quote in surface.quotes]


def all_quotes(surfaces: Iterable[SurfaceFacts]) -> Sequence[QuoteFit]:
    """What the market quotes: without the points derived from parameters."""
    return [quote for quote in all_points(surfaces) if not quote.derived]


def smiles(surfaces: Iterable[SurfaceFacts]) -> list[SurfaceFacts]:
    """The surfaces with a smile, which can fail."""
    return [surface for surface in surfaces if surface.has_smile]


def mean_pull(points: Iterable[QuoteFit]) -> float:
    """Mean of simulated less fitted volatility over its standard error; NaN where nothing was simulated.

    0 but for chance where simulation and surface agree. Errors of one underlying share draws: no test of many.
    """
    pulls = [
        (point.simulated - point.fitted) / point.simulated_standard_error
        for point in points
        if point.simulated is not None and point.simulated_standard_error
    ]
    finite = [pull for pull in pulls if math.isfinite(pull)]
    return math.fsum(finite) / len(finite) if finite else math.nan


def _worst(errors: Iterable[float]) -> float:
    """The largest absolute error; NaN where there is none. Quotes without a simulated error are passed over."""
    return max((abs(error) for error in errors if not math.isnan(error)), default=math.nan)
