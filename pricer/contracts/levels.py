"""Levels of underlyings: prices, or performances from references that are known or still to be set."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.observation import in_order
from pricer.contracts.option import Conversion


@dataclass(frozen=True, slots=True)
class Levels:
    """Each underlying's price over its reference.

    ``references`` are ones for prices and the initial fixings for performances. None: they are
    set by the market, as the mean of the prices on ``reference_dates`` (averaging-in; a
    forward start has one date). Where references are given, the dates are history.
    ``conversion`` is that of :class:`pricer.contracts.option.EuropeanOption`.
    """

    underlyings: tuple[str, ...]
    references: tuple[float, ...] | None
    reference_dates: tuple[date, ...] = ()
    on_performance: bool = True
    conversion: Conversion | None = None

    def __post_init__(self) -> None:
        in_order(self.reference_dates, "reference dates")
        if not self.underlyings:
            raise ValueError("levels need at least one underlying")
        if self.references is None and not self.reference_dates:
            raise ValueError("references must be given, or dates that set them")
        if self.references is None and not self.on_performance:
            raise ValueError("only performances have references that dates set")
        if self.references is not None:
            if len(self.references) != len(self.underlyings):
                raise ValueError(f"{len(self.underlyings)} underlyings have {len(self.references)} references")
            if min(self.references) <= 0.0:
                raise ValueError(f"references must be above 0; got {self.references}")

    @classmethod
    def of_prices(cls, underlyings: tuple[str, ...], conversion: Conversion | None = None) -> Levels:
        return cls(underlyings, (1.0,) * len(underlyings), on_performance=False, conversion=conversion)

    @property
    def setting_dates(self) -> tuple[date, ...]:
        """The dates whose prices set the references; none where these are given."""
        return self.reference_dates if self.references is None else ()


@dataclass(frozen=True, slots=True)
class ReferenceSums:
    """References on their way: sums of the first ``count`` prices, one per underlying."""

    sums: tuple[float, ...]
    count: int = 0

    def with_prices(self, prices: list[float]) -> ReferenceSums:
        return ReferenceSums(tuple(s + p for s, p in zip(self.sums, prices, strict=True)), self.count + 1)


def references(levels: Levels, sums: ReferenceSums) -> NDArray[np.float64] | None:
    """The references (n_assets,), or None while a date that sets them is still to come."""
    if levels.references is not None:
        return np.array(levels.references)
    if sums.count < len(levels.reference_dates):
        return None
    return np.array(sums.sums) / sums.count
