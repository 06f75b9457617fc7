"""The prices that a contract's levels are made of: fixings, converted where they must be, and today's spots."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from datetime import date

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.ageing import Walk
from pricer.contracts.contract import Contract
from pricer.contracts.fixings import Fixings
from pricer.contracts.option import Conversion
from pricer.core.issues import Issue

SHOWN_DAYS = 5


@dataclass(frozen=True, slots=True)
class PriceRecord:
    """Prices in the currency that the contract's levels are in: fixings, and spots for today's missing ones."""

    contract: Contract
    fixings: Fixings
    spots: Mapping[str, float]
    exchange_rates: Mapping[str, str]
    today: date

    @property
    def _names(self) -> tuple[str, ...]:
        """The underlyings, then the pairs that convert some of them."""
        return (*self.contract.underlyings, *(pair for pair in self._pairs if pair))

    @property
    def _pairs(self) -> tuple[str, ...]:
        """The pair that converts each underlying, empty for none."""
        composite = self.contract.conversion is Conversion.COMPOSITE
        return tuple(self.exchange_rates.get(name, "") if composite else "" for name in self.contract.underlyings)

    def is_fixed(self, day: date) -> bool:
        return all(self.fixings.level(name, day) is not None for name in self._names)

    def without_fixing(self, day: date) -> tuple[str, ...]:
        return tuple(dict.fromkeys(name for name in self._names if self.fixings.level(name, day) is None))

    def prices(self, days: Sequence[date]) -> NDArray[np.float64]:
        """Prices (n_days, n_assets), NaN where missing."""
        prices = self.fixings.matrix(self.contract.underlyings, days)
        for i, pair in enumerate(self._pairs):
            if pair:
                prices[:, i] *= self.fixings.matrix((pair,), days)[:, 0]
        if days and days[-1] == self.today:
            prices[-1] = [
                self._now(name, pair) for name, pair in zip(self.contract.underlyings, self._pairs, strict=True)
            ]
        return prices

    def spot_prices(self) -> NDArray[np.float64] | None:
        """Today's prices (n_assets,) from spots alone; None if one is missing."""
        if any(name not in self.spots for name in self._names):
            return None
        pairs = zip(self.contract.underlyings, self._pairs, strict=True)
        return np.array([self.spots[name] * (self.spots[pair] if pair else 1.0) for name, pair in pairs])

    def _now(self, name: str, pair: str) -> float:
        """Today's price: fixing, else spot, of the underlying and of its exchange rate each."""
        out = 1.0
        for each in filter(None, (name, pair)):
            fixing = self.fixings.level(each, self.today)
            out *= self.spots.get(each, np.nan) if fixing is None else fixing
        return out

    def gaps(self, found: Walk) -> Iterator[Issue]:
        """One issue per name, with its first days without a fixing."""
        for name in dict.fromkeys(self._names):
            days = [day for day in found.gaps if self.fixings.level(name, day) is None]
            if days and not (days == [self.today] and name in self.spots):
                yield self._gap(name, days)

    def _gap(self, name: str, days: Sequence[date]) -> Issue:
        shown = ", ".join(map(str, days[:SHOWN_DAYS]))
        more = f" and {len(days) - SHOWN_DAYS} more days up to {days[-1]}" if len(days) > SHOWN_DAYS else ""
        reasons = dict.fromkeys(filter(None, (self.fixings.reason(name, day) for day in days)))
        said = f" ({'; '.join(reasons)})" if reasons else ""
        return Issue(
            "missing-fixing",
            f"no fixing of {name} on {shown}{more}{said}",
            "a fixing for every observation up to now",
            f"Add {'a row' if len(days) == 1 else 'rows'} to the market's fixings table: underlying {name}, date "
            f"{days[0]}{' and so on' if len(days) > 1 else ''}, and the official level; where a day itself had none, "
            "the one that the trade's terms fall back on.",
        )
