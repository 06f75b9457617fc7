"""One underlying's volatility surface with the record of how far it can be trusted.

Quotes are volatilities of the price S; the surface is that of its random part X (see
:mod:`pricer.market.affine_price`), because X is what a simulation moves. Everything shown to people (strikes,
deltas, fitted volatilities, violations) is in terms of S again.

A surface fails, and is then not used unless the user says so, by a rule of our own: where quotes contradict each
other by more than ``WORST_CONTRADICTION``, where the fitted surface itself has arbitrage, or where a quote in the
middle of a smile (``MIDDLE_DELTAS``) is missed by more than ``WORST_MISS``.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from datetime import date

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

from pricer.market.affine_price import AffineLevel, AffinePrice
from pricer.market.arbitrage import ArbitrageKind, Violation, quote_violations, surface_violations
from pricer.market.implied_surface import ImpliedSurface
from pricer.market.pure_smile import price_deviations, price_error, price_strikes, pure_log_strikes
from pricer.market.smile_quotes import Smile, SmileParameters, SmileQuotes
from pricer.market.surface_quotes import (
    SAME_STRIKE,
    ExpiryQuotes,
    QuoteFault,
    UnusableQuotesError,
    VolatilityQuote,
    by_expiry,
)
from pricer.market.volatility import VolatilityCurve

__all__ = ["CheckedSurface", "QuoteFault", "QuoteFit", "UnusableQuotesError", "VolatilityQuote", "build_surface"]

Array = NDArray[np.float64]

#: Quotes that contradict each other by more than this volatility (0.25 vol points) fail a surface. The bid-offer
#: spread of a liquid smile is wider; what is beyond is a stale or mistyped quote.
WORST_CONTRADICTION = 0.0025
#: A quote of these call deltas that is missed by more than this volatility (0.5 vol points) fails a surface.
WORST_MISS = 0.005
#: Forward deltas of calls between which a smile is quoted liquidly (common practice).
MIDDLE_DELTAS = (0.10, 0.90)


@dataclass(frozen=True, slots=True)
class QuoteFit:
    """One quote beside what the surface says.

    ``strike`` in currency, ``relative_strike`` over the forward of S, ``delta`` the call's forward delta N(d1) at the
    quoted volatility. ``quoted_volatility`` and ``fitted_volatility`` are those of S; ``pure_log_strike`` is where to
    read the surface of X. A smile given by parameters stands as three quotes, at the forward and one standard
    deviation to either side, each what the parameters mean there (to second order, where no smile has them); the
    latter two are ``derived``, not quoted.
    """

    expiry_date: date
    strike: float
    relative_strike: float
    delta: float
    quoted_volatility: float
    fitted_volatility: float
    pure_log_strike: float
    derived: bool = False

    @property
    def error(self) -> float:
        """Fitted less quoted volatility of S (0.001 is 0.1 vol points)."""
        return self.fitted_volatility - self.quoted_volatility

    @property
    def in_the_middle(self) -> bool:
        """Whether the delta lies in ``MIDDLE_DELTAS``."""
        return MIDDLE_DELTAS[0] <= self.delta <= MIDDLE_DELTAS[1]


@dataclass(frozen=True, slots=True, eq=False)
class CheckedSurface:
    """The implied volatility surface of X, its quotes and what is wrong with them.

    ``quotes`` in order of expiry and strike. ``violations`` of the quotes and of the fitted surface, with
    ``log_moneyness`` the logarithm of strike over forward of S (on the later date, if there are two) and sizes in
    volatility of S. ``failures`` : why it must not be used unasked; empty if it passes.
    """

    underlying_id: str
    surface: ImpliedSurface
    quotes: tuple[QuoteFit, ...]
    violations: tuple[Violation, ...] = ()
    failures: tuple[str, ...] = ()

    @property
    def passes(self) -> bool:
        """Whether trades may be priced on it without being asked for."""
        return not self.failures

    @property
    def valuation_date(self) -> date:
        """The date from which its times count."""
        return self.surface.valuation_date

    @property
    def last_date(self) -> date:
        """The last quoted expiry date."""
        return self.surface.last_date

    def is_extrapolated(self, day: date) -> bool:
        """Whether ``day`` lies beyond the last quoted expiry date."""
        return self.surface.is_extrapolated(day)

    @property
    def wings(self) -> tuple[tuple[float, float], ...]:
        """Per expiry, slopes of X's total variance far left (in -k) and far right of the quotes; below 2 (Lee 2004)."""
        return tuple(smile.wings for smile in self.surface.slices)

    @property
    def atm_curve(self) -> VolatilityCurve:
        """Volatilities of X at its forward, by expiry; total variance never falls."""
        surface = self.surface
        totals = np.maximum.accumulate([float(surface.total_variance(0.0, time)) for time in surface.times])
        volatilities = np.sqrt(totals / np.array(surface.times))
        return VolatilityCurve.from_quotes(surface.valuation_date, surface.dates, volatilities.tolist())


def build_surface(
    underlying_id: str, price: AffinePrice, valuation_date: date, quotes: Sequence[VolatilityQuote]
) -> CheckedSurface:
    """The surface of X fitted to ``quotes`` on S, in any order, with its checks.

    ``price`` gives forwards and the cash dividends still to come on each expiry date. Quotes that contradict each
    other or the fit are reported, not refused. Raises :class:`UnusableQuotesError`, a ValueError that names expiry
    and strike, for quotes of which nothing can be made, and ValueError if there are none.
    """
    groups = by_expiry(price, valuation_date, quotes)
    surface = ImpliedSurface.from_quotes(valuation_date, [group.smile for group in groups])
    fits = tuple(fit for group in groups for fit in _fits(surface, group))
    levels = {group.expiry_date: group.level for group in groups}
    quoted = [_near(group.smile, group.time) for group in groups]
    found = [*quote_violations(valuation_date, quoted), *surface_violations(surface)]
    violations = tuple(_of_price(violation, surface, levels) for violation in found)
    return CheckedSurface(underlying_id, surface, fits, violations, tuple(_failures(violations, fits)))


def _near(smile: Smile, time: float) -> SmileQuotes:
    """What is checked for contradictions: quotes as they are, parameters within a standard deviation of the forward."""
    if isinstance(smile, SmileQuotes):
        return smile
    k = smile.volatility * math.sqrt(time) * np.linspace(-1.0, 1.0, 5)
    return SmileQuotes(smile.expiry_date, k, np.sqrt(smile.slice(time).total_variance(k) / time))


def _fits(surface: ImpliedSurface, group: ExpiryQuotes) -> Iterator[QuoteFit]:
    strikes, volatilities = group.strikes, group.volatilities
    if group.stated is not None:
        strikes, volatilities = _meant(group.stated, group.level, group.time)
    forward, root = group.level.forward, math.sqrt(group.time)
    k = pure_log_strikes(group.level, strikes)
    fitted = price_deviations(group.level, k, np.sqrt(surface.total_variance(k, group.time))) / root
    deviations = volatilities * root
    deltas = ndtr(-np.log(strikes / forward) / deviations + 0.5 * deviations)
    derived = (group.stated is not None) & (np.abs(strikes / forward - 1.0) > SAME_STRIKE)
    columns = (strikes, strikes / forward, deltas, volatilities, fitted, k, derived)
    for values in zip(*(column.tolist() for column in columns), strict=True):
        yield QuoteFit(group.expiry_date, *values)


def _meant(stated: SmileParameters, level: AffineLevel, time: float) -> tuple[Array, Array]:
    """Strikes in currency and volatilities of S that the parameters mean, where they lie above the floor."""
    k = stated.volatility * math.sqrt(time) * np.array([-1.0, 0.0, 1.0])
    smile = stated.slice(time)
    variance, slope, curvature = (float(value) for value in smile.derivatives(0.0))
    volatilities = np.sqrt(smile.total_variance(k) / time)
    if stated.curvature is not None:
        # The slice is the nearest there is; what it lacks of the quoted curvature is added where it shows.
        own = (0.5 * curvature - 0.25 * slope * slope / variance) / math.sqrt(variance * time)
        volatilities = volatilities + 0.5 * (stated.curvature - own) * k * k
    strikes = level.forward * np.exp(k)
    above = (strikes > level.floor) & (volatilities > 0.0)
    return strikes[above], volatilities[above]


def _of_price(violation: Violation, surface: ImpliedSurface, levels: dict[date, AffineLevel]) -> Violation:
    """The same violation of X in terms of S."""
    day = violation.later_date or violation.expiry_date
    level, k = levels[day], violation.log_moneyness
    strike = float(price_strikes(level, k))
    size = violation.size
    if violation.quoted or violation.kind is ArbitrageKind.CALENDAR:
        time = surface.times[surface.dates.index(day)]
        deviation = math.sqrt(float(surface.total_variance(k, time)))
        size = price_error(level, k, deviation, size)
    return replace(violation, log_moneyness=math.log(strike / level.forward), size=size)


def _failures(violations: Sequence[Violation], fits: Sequence[QuoteFit]) -> Iterator[str]:
    contradictions = [v for v in violations if v.quoted and v.size > WORST_CONTRADICTION]
    if contradictions:
        yield f"quotes contradict each other: {max(contradictions, key=_size)}{_more(len(contradictions) - 1)}"
    left = [v for v in violations if not v.quoted]
    if left:
        yield f"the fitted surface has arbitrage: {max(left, key=_size)}{_more(len(left) - 1)}"
    missed = [fit for fit in fits if fit.in_the_middle and not abs(fit.error) <= WORST_MISS]
    if missed:
        worst = max(missed, key=lambda fit: abs(fit.error))
        yield (
            f"a quote is missed by {100.0 * abs(worst.error):.2f} vol points: {worst.expiry_date}, strike "
            f"{100.0 * worst.relative_strike:.1f} % of the forward{_more(len(missed) - 1)}"
        )


def _size(violation: Violation) -> float:
    return violation.size


def _more(count: int) -> str:
    return f" (and {count} more)" if count else ""
