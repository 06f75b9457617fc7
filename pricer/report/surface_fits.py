"""How well the fitted surface and the simulated model reprice the quotes: errors in vol points, judged and counted."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from enum import StrEnum

from pricer.run.outcome import Outcome, QuoteFit, SurfaceFacts

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


class Standing(StrEnum):
    """How a surface came out, the worst first."""

    FAILS = "fails"  # its checks: not priced from unless asked for
    MISSES = "misses target"  # passes its checks, but a quote between 10 and 90 delta is missed by more than the target
    PASSES = "passes"


@dataclass(frozen=True, slots=True)
class SurfaceFit:
    """One underlying's quotes in a few numbers; errors are the largest absolute ones, in vol points.

    ``middle`` means the quotes between 10 and 90 delta, ``wings`` the others; NaN where there are none, or where
    nothing was simulated. ``beyond_target`` counts the middle quotes whose simulated error exceeds the target,
    ``fit_beyond_target`` those whose fit error does.
    """

    underlying: str
    verdict: Standing
    expiries: int
    quotes: int
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


def surface_fit(surface: SurfaceFacts) -> SurfaceFit:
    """The numbers of one underlying; ``why`` is what fails it, else the first of its violations."""
    middle = [quote for quote in surface.quotes if quote.counts]
    wings = [quote for quote in surface.quotes if not quote.counts]
    fit_beyond = sum(not abs(fit_error(quote)) <= TARGET + _ROUNDING for quote in middle)
    beyond = sum(reach(quote) is Reach.BEYOND for quote in middle)
    off_target = Standing.MISSES if beyond or fit_beyond else Standing.PASSES
    return SurfaceFit(
        underlying=surface.underlying,
        verdict=off_target if surface.passes else Standing.FAILS,
        expiries=len({quote.expiry_date for quote in surface.quotes}),
        quotes=len(surface.quotes),
        violations=len(surface.violations),
        worst_fit_error_middle=_worst(map(fit_error, middle)),
        worst_fit_error_wings=_worst(map(fit_error, wings)),
        worst_simulated_error_middle=_worst(map(simulated_error, middle)),
        worst_simulated_error_wings=_worst(map(simulated_error, wings)),
        fit_beyond_target=fit_beyond,
        beyond_target=beyond,
        why="; ".join(surface.failures) or next(iter(surface.violations), ""),
    )


def surface_fits(outcome: Outcome) -> list[SurfaceFit]:
    """Failing surfaces first, then those that miss the target, then in the market's order."""
    fits = [surface_fit(surface) for surface in outcome.market.surfaces]
    return sorted(fits, key=lambda fit: list(Standing).index(fit.verdict))


def all_quotes(surfaces: Iterable[SurfaceFacts]) -> Sequence[QuoteFit]:
    """The quotes of all surfaces, in the market's order."""
    return [quote for surface in surfaces for quote in surface.quotes]


def _worst(errors: Iterable[float]) -> float:
    """The largest absolute error; NaN where there is none. Quotes without a simulated error are passed over."""
    return max((abs(error) for error in errors if not math.isnan(error)), default=math.nan)
