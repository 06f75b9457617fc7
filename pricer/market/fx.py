"""Spot exchange rates and their volatilities, inverted and crossed as needed."""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from itertools import pairwise

from pricer.market.volatility import VolatilityCurve

_PAIR = re.compile(r"[A-Z]{6}")


class MissingRate(KeyError):  # noqa: N818 - says what is missing
    """No chain of quoted pairs leads from one currency to the other."""

    def __init__(self, from_currency: str, to_currency: str) -> None:
        super().__init__(from_currency, to_currency)
        self.from_currency = from_currency
        self.to_currency = to_currency

    def __str__(self) -> str:
        return f"no quoted exchange rates lead from {self.from_currency} to {self.to_currency}"


def currencies_of(pair: str) -> tuple[str, str]:
    """("EUR", "USD") for "EURUSD"; raises ValueError for a name that is not two different currencies."""
    first, second = pair[:3], pair[3:]
    if _PAIR.fullmatch(pair) is None or first == second:
        raise ValueError(f'"{pair}" is not a currency pair: write two currency codes together, e.g. EURUSD')
    return first, second


@dataclass(frozen=True, slots=True)
class FxRates:
    """``quotes`` maps (first, second) currency to units of the second for one of the first.

    ``volatilities`` maps pairs to the volatility of their rate, which is that of its inverse too.
    """

    quotes: Mapping[tuple[str, str], float]
    volatilities: Mapping[tuple[str, str], VolatilityCurve] = field(default_factory=dict)

    @classmethod
    def from_pairs(
        cls, pairs: Mapping[str, float], volatilities: Mapping[str, VolatilityCurve] | None = None
    ) -> FxRates:
        """From quotes such as ``{"EURUSD": 1.08}``: 1.08 USD for 1 EUR, and volatilities by pair.

        Raises ValueError for a name that is not two different currencies, a rate that is not
        a positive finite number, and a pair given in both directions.
        """
        quotes: dict[tuple[str, str], float] = {}
        for pair, rate in pairs.items():
            first, second = currencies_of(pair)
            if not (math.isfinite(rate) and rate > 0.0):
                raise ValueError(f"the rate of {pair} must be above 0; got {rate}")
            if (second, first) in quotes:
                raise ValueError(f"both {second}{first} and {pair} are quoted: keep one of them")
            quotes[first, second] = float(rate)
        curves: dict[tuple[str, str], VolatilityCurve] = {}
        for pair, curve in (volatilities or {}).items():
            first, second = currencies_of(pair)
            if (second, first) in curves:
                raise ValueError(f"both {second}{first} and {pair} have a volatility: keep one of them")
            curves[first, second] = curve
        return cls(quotes, curves)

    @property
    def currencies(self) -> tuple[str, ...]:
        """Every quoted currency, in alphabetical order."""
        return tuple(sorted({currency for pair in self.quotes for currency in pair}))

    def knows(self, currency: str) -> bool:
        """Whether the currency is quoted against any other."""
        return any(currency in pair for pair in self.quotes)

    def rate(self, from_currency: str, to_currency: str) -> float:
        """Units of ``to_currency`` for one unit of ``from_currency``.

        A quoted pair or its inverse comes first; otherwise the shortest chain of quoted
        pairs, the alphabetically first if there are several. Raises :class:`MissingRate`.
        """
        if from_currency == to_currency:
            return 1.0
        if (from_currency, to_currency) in self.quotes:
            return self.quotes[from_currency, to_currency]
        rate = 1.0
        for first, second in pairwise(self.chain(from_currency, to_currency)):
            quote = self.quotes.get((first, second))
            rate *= 1.0 / self.quotes[second, first] if quote is None else quote
        return rate

    def chain(self, from_currency: str, to_currency: str) -> tuple[str, ...]:
        """The currencies passed on the way, both ends included; raises :class:`MissingRate`.

        The way back is the same way reversed.
        """
        # Searching from the alphabetically smaller end makes both directions pass the same currencies.
        start, end = sorted((from_currency, to_currency))
        reached: list[tuple[str, ...]] = [(start,)]
        seen = {start}
        while reached:
            for path in reached:
                if path[-1] == end:
                    return path if start == from_currency else path[::-1]
            longer: list[tuple[str, ...]] = []
            for path in reached:
                for currency in self._neighbours(path[-1]):
                    if currency not in seen:
                        seen.add(currency)
                        longer.append((*path, currency))
            reached = longer
        raise MissingRate(from_currency, to_currency)

    def volatility(self, from_currency: str, to_currency: str) -> VolatilityCurve | None:
        """Volatility of the rate between the two, either way round; None where the pair has none of its own."""
        ahead = self.volatilities.get((from_currency, to_currency))
        return ahead if ahead is not None else self.volatilities.get((to_currency, from_currency))

    def log_factors(self, from_currency: str, to_currency: str) -> dict[str, float]:
        """The logarithm of ``rate(from_currency, to_currency)`` as a sum of those of pairs with a volatility.

        Pairs as they were given, e.g. ``{"EURUSD": -1.0}`` for USD in EUR; a cross without a
        volatility of its own is a chain of several. Raises :class:`MissingRate`.
        """
        linked = FxRates(dict.fromkeys(self.volatilities, 1.0))  # its shortest chain is the pair itself, if there
        out: dict[str, float] = {}
        for first, second in pairwise(linked.chain(from_currency, to_currency)):
            ahead = (first, second) in self.volatilities
            out[first + second if ahead else second + first] = 1.0 if ahead else -1.0
        return out

    def _neighbours(self, currency: str) -> list[str]:
        return sorted(a if b == currency else b for a, b in self.quotes if currency in (a, b))
