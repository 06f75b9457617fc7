"""Volatilities as a market quotes them on a price, sorted by expiry and turned into smiles of its random part."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from datetime import date
from itertools import pairwise
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from pricer.market.affine_price import AffineLevel, AffinePrice
from pricer.market.calendars import year_fraction
from pricer.market.pure_smile import pure_deviations, pure_log_strikes, pure_parameters
from pricer.market.smile_quotes import (
    LARGEST_VOLATILITY,
    LEAST_VOLATILITY,
    Smile,
    SmileParameters,
    SmileQuotes,
    is_volatility,
    rounding_of,
)

Array = NDArray[np.float64]

#: A strike this many standard deviations from the forward, if its option is worth nothing, is a slip of strike or spot.
FARTHEST_STRIKE = 6.0
#: The only quote of an expiry must lie within this share of the forward, or within these standard deviations of it.
LONE_QUOTE_SHARE, LONE_QUOTE_DEVIATIONS = 0.02, 0.5
#: Strikes closer than this share of the forward are one strike.
SAME_STRIKE = 1e-9


@dataclass(frozen=True, slots=True)
class VolatilityQuote:
    """One quoted volatility of the price S, annualised (0.20 for 20 %).

    It belongs to the ``strike`` in currency, or to ``relative_strike`` (0.9 for 90 %) times the forward of S on the
    expiry date. With neither it is the volatility at the forward, alone or with ``skew`` and ``curvature``, the first
    and second derivative of volatility in the logarithm of the strike there; see
    :class:`~pricer.market.smile_quotes.SmileParameters`.
    """

    expiry_date: date
    volatility: float
    strike: float | None = None
    relative_strike: float | None = None
    skew: float | None = None
    curvature: float | None = None

    @property
    def has_shape(self) -> bool:
        """Whether it describes a smile by itself, by skew or curvature."""
        return self.skew is not None or self.curvature is not None

    def on(self, forward: float) -> float:
        """Its strike in currency where the forward is ``forward``."""
        if self.strike is not None:
            return self.strike
        return forward if self.relative_strike is None else self.relative_strike * forward


@dataclass(frozen=True, slots=True)
class QuoteFault:
    """Why a quote cannot be used at all. ``strike`` in currency, None where the whole expiry is meant."""

    expiry_date: date
    strike: float | None
    found: str
    expected: str
    mend: str

    def __str__(self) -> str:
        return f"found {self.found}; expected {self.expected}. {self.mend}"


class UnusableQuotesError(ValueError):
    """Quotes of which no surface can be made; ``faults`` has all of them, in order of expiry and strike.

    ``expiry_date`` and ``strike`` are those of the first.
    """

    def __init__(self, faults: Sequence[QuoteFault]) -> None:
        super().__init__(*faults)
        self.faults: tuple[QuoteFault, ...] = tuple(faults)
        self.expiry_date = self.faults[0].expiry_date
        self.strike = self.faults[0].strike

    def __str__(self) -> str:
        return "\n".join(map(str, self.faults))


class ExpiryQuotes(NamedTuple):
    """One expiry's quotes on S, sorted by strike, and the smile of X that they make.

    ``strikes`` : (n,) in currency. ``volatilities`` : (n,) of S. ``smile`` : of X; parameters if ``stated`` (those of
    S) is not None.
    """

    expiry_date: date
    time: float
    level: AffineLevel
    strikes: Array
    volatilities: Array
    smile: Smile
    stated: SmileParameters | None


def by_expiry(price: AffinePrice, valuation_date: date, quotes: Sequence[VolatilityQuote]) -> tuple[ExpiryQuotes, ...]:
    """The quotes of each expiry date, in order. Raises :class:`UnusableQuotesError` with every fault there is."""
    if not quotes:
        raise ValueError("a volatility surface needs at least one quote")
    days = sorted({quote.expiry_date for quote in quotes})
    groups = {day: [quote for quote in quotes if quote.expiry_date == day] for day in days}
    any_shape = any(quote.has_shape for quote in quotes) or any(len(group) > 1 for group in groups.values())
    faults: list[QuoteFault] = []
    found: list[ExpiryQuotes] = []
    for day, group in groups.items():
        if day <= valuation_date:
            faults.append(
                QuoteFault(
                    day,
                    group[0].strike,
                    f"a volatility for {day}",
                    f"an expiry date after the valuation date {valuation_date}",
                    "Remove the quotes of expiries that are over, or correct the date.",
                )
            )
            continue
        level, time = price.at(day), year_fraction(valuation_date, day)
        group = sorted(group, key=lambda quote: quote.on(level.forward))
        own = list(_faults(group, level, any_shape))
        own = own or list(_lone(group, level, time))
        made = _expiry(group, level, time, price.spot) if not own else None
        if isinstance(made, ExpiryQuotes):
            found.append(made)
        faults.extend(own if made is None else [made] if isinstance(made, QuoteFault) else [])
    if faults:
        raise UnusableQuotesError(faults)
    return tuple(found)


def _faults(group: Sequence[VolatilityQuote], level: AffineLevel, any_shape: bool) -> Iterator[QuoteFault]:
    day = group[0].expiry_date
    for quote in group:
        numbers = (quote.volatility, quote.on(level.forward), quote.skew or 0.0, quote.curvature or 0.0)
        if not (all(map(math.isfinite, numbers)) and quote.volatility > 0.0):
            yield QuoteFault(
                day,
                quote.strike,
                f"a volatility of {quote.volatility:g} for {day}",
                "finite numbers, and a volatility above 0",
                "Enter 20 % as 0.20.",
            )
        elif not is_volatility(quote.volatility):
            yield QuoteFault(
                day,
                quote.strike,
                f"a volatility of {quote.volatility:g} for {day}",
                f"a volatility from {LEAST_VOLATILITY:g} to {LARGEST_VOLATILITY:g}",
                "Enter 20 % as 0.20.",
            )
        elif quote.strike is not None and quote.relative_strike is not None:
            yield QuoteFault(
                day,
                quote.strike,
                f"a strike of {quote.strike:g} and a relative strike of {quote.relative_strike:g} for {day}",
                "one of the two",
                "Clear one of them.",
            )
        elif quote.on(level.forward) <= level.floor:
            wanted = "a strike above 0"
            if level.floor > 0.0:
                wanted = f"a strike above {level.floor:.6g}, what the cash dividends after {day} are worth then"
            yield QuoteFault(
                day,
                quote.on(level.forward),
                f"a volatility for {day} at strike {quote.on(level.forward):.6g}",
                wanted,
                "Remove the quote or correct its strike: the price cannot end below it.",
            )
    shaped = [quote for quote in group if quote.has_shape]
    if shaped and (len(group) > 1 or shaped[0].on(level.forward) != level.forward):
        yield QuoteFault(
            day,
            shaped[0].strike,
            f"a skew or curvature beside quotes at strikes for {day}",
            "volatilities at strikes, or one at the forward with skew and curvature",
            "Keep one of the two ways to quote this expiry.",
        )
    for one, other in pairwise(group):
        low, high = one.on(level.forward), other.on(level.forward)
        if high - low <= SAME_STRIKE * level.forward and not shaped:
            yield QuoteFault(
                day,
                high,
                f"two volatilities for {day} at strike {high:.6g}, {one.volatility:g} and {other.volatility:g}",
                "one volatility for a strike",
                "Remove one of them.",
            )
    if any_shape and len(group) == 1 and not shaped:
        strike = group[0].on(level.forward)
        yield QuoteFault(
            day,
            strike,
            f"a single volatility for {day}, without skew, while other expiries have smiles",
            "at least three strikes, or a skew",
            "Enter volatilities of more strikes, or the skew at the forward (0 if it is known to be flat).",
        )


def _lone(group: Sequence[VolatilityQuote], level: AffineLevel, time: float) -> Iterator[QuoteFault]:
    """A single quote says what the volatility is at the forward only if it is quoted near it."""
    quote = group[0]
    strike, forward = quote.on(level.forward), level.forward
    near = max(LONE_QUOTE_SHARE, LONE_QUOTE_DEVIATIONS * quote.volatility * math.sqrt(time))
    if len(group) == 1 and abs(math.log(strike / forward)) > near:
        yield QuoteFault(
            quote.expiry_date,
            strike,
            f"a single volatility for {quote.expiry_date}, at strike {strike:.6g}, where the forward is {forward:.6g}",
            "at least three strikes, or one volatility at the forward",
            "Add quotes at other strikes, or clear the strike if it is the volatility at the forward.",
        )


def _expiry(
    group: Sequence[VolatilityQuote], level: AffineLevel, time: float, spot: float
) -> ExpiryQuotes | QuoteFault:
    day, root = group[0].expiry_date, math.sqrt(time)
    strikes = np.array([quote.on(level.forward) for quote in group])
    volatilities = np.array([quote.volatility for quote in group])
    found = pure_deviations(level, strikes, volatilities * root) / root
    bad = np.flatnonzero(~is_volatility(found))
    if not bad.size and not group[0].has_shape:
        quotes = SmileQuotes.of(day, pure_log_strikes(level, strikes), found, rounding_of(volatilities))
        return ExpiryQuotes(day, time, level, strikes, volatilities, quotes, None)
    if not bad.size:
        stated = SmileParameters(day, group[0].volatility, group[0].skew or 0.0, group[0].curvature)
        try:
            return ExpiryQuotes(day, time, level, strikes, volatilities, pure_parameters(level, stated, time), stated)
        except ValueError:
            bad = np.array([0])
    i = int(bad[0])
    if abs(math.log(strikes[i] / level.forward)) > FARTHEST_STRIKE * volatilities[i] * root:
        return QuoteFault(
            day,
            float(strikes[i]),
            f"strike {strikes[i]:.6g} for {day}, where the spot is {spot:.6g} and the forward {level.forward:.6g}",
            f"a strike where an option at a volatility of {100.0 * volatilities[i]:.2f} % is worth more than nothing",
            "Check the strike and the spot: pence against pounds, a split, or per cent of the forward in the column of "
            "absolute strikes?",
        )
    return QuoteFault(
        day,
        float(strikes[i]),
        f"a volatility of {100.0 * volatilities[i]:.2f} % for {day} at strike {strikes[i]:.6g}",
        f"an option worth more than nothing, and less than the price can move above the {level.floor:.6g} of cash "
        f"dividends after that date",
        "Check the volatility and the cash dividends.",
    )
