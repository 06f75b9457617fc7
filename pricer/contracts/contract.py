"""The one contract: levels, a statistic of their path, a payout on it, and features over time."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import Aggregate
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.feature import Feature, Payout, Statistic
from pricer.contracts.levels import Levels
from pricer.contracts.observation import Observation
from pricer.contracts.option import Conversion, EuropeanOption
from pricer.contracts.product_name import family
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.writer import Writer


@dataclass(frozen=True, slots=True)
class Contract:
    """Pays ``payout(statistic)`` per unit at expiry, and what its features pay until then.

    Features are observed in the order given, each day's coupons before its call, say, so that the
    coupon of the call date is paid. A contract that a feature ends pays nothing after that but
    what is already decided. ``writer`` is given where the payer may default.
    """

    levels: Levels
    statistic: Statistic[Any]
    payout: Payout
    expiry: Observation
    features: tuple[Feature[Any], ...] = ()
    writer: Writer | None = None

    def __post_init__(self) -> None:
        """Raises ValueError for parts that do not fit: numbers of underlyings, dates out of order."""
        flat = np.ones((1, len(self.levels.underlyings)))
        first = self.levels.setting_dates[-1] if self.levels.setting_dates else date.min
        for part in (self.statistic, *self.features):
            name = part.label or "expiry level"
            try:
                part.measure(flat)
            except ValueError as unfit:
                raise ValueError(f"{name}: {unfit}; there are {flat.shape[1]} underlyings") from unfit
            if part.dates and part.dates[0] < first:
                raise ValueError(f"{name}: {part.dates[0]} lies before {first}, when the references are set")
            if part.dates and part.dates[-1] > self.expiry.day:
                raise ValueError(f"{name}: {part.dates[-1]} lies after the expiry date {self.expiry.day}")

    @classmethod
    def european(cls, option: EuropeanOption) -> Contract:
        """The European option as a contract."""
        levels = Levels(
            option.underlyings,
            option.reference_levels,
            on_performance=option.on_performance,
            conversion=option.conversion,
        )
        statistic = ExpiryLevel(option.expiry_date, option.aggregate)
        return cls(levels, statistic, option.profile, Observation(option.expiry_date, option.payment_date))

    def as_european(self) -> EuropeanOption | None:
        """The European option that this contract is; None for one with a path, features or a doubtful writer."""
        statistic, payout, levels = self.statistic, self.payout, self.levels
        if not isinstance(statistic, ExpiryLevel) or not isinstance(payout, Profile) or self.features or self.writer:
            return None
        if levels.references is None or statistic.day != self.expiry.day:
            return None
        return EuropeanOption(
            levels.underlyings,
            levels.references,
            statistic.aggregate,
            payout,
            self.expiry.day,
            self.expiry.payment_date,
            levels.on_performance,
            levels.conversion,
        )

    @property
    def dates(self) -> tuple[date, ...]:
        """Every day on which something is set, observed or decided, expiry included."""
        days = {*self.levels.setting_dates, *self.statistic.dates, self.expiry.day}
        return tuple(sorted(days.union(*(feature.dates for feature in self.features))))

    @property
    def underlyings(self) -> tuple[str, ...]:
        return self.levels.underlyings

    @property
    def conversion(self) -> Conversion | None:
        return self.levels.conversion

    @property
    def on_performance(self) -> bool:
        return self.levels.on_performance

    @property
    def expiry_date(self) -> date:
        return self.expiry.day

    @property
    def payment_date(self) -> date:
        return self.expiry.payment_date

    @property
    def product(self) -> str:
        """The contract's everyday name, used to group reports."""
        aggregate = self._aggregate
        group = "multi-asset" if aggregate is None else family(aggregate)
        forward_start = "forward-start" if self.levels.setting_dates else ""
        labels = dict.fromkeys((forward_start, self.statistic.label, *(feature.label for feature in self.features)))
        kind = str(self.payout.kind) if isinstance(self.payout, Profile) else "note"
        vulnerable = "vulnerable" if self.writer is not None else ""
        return " ".join(filter(None, (vulnerable, group, *labels, kind)))

    def unit_notional(self, spots: NDArray[np.float64]) -> float:
        """The amount that one unit refers to, by the rules of a European option on the same aggregate."""
        return self._plain.unit_notional(spots)

    @property
    def has_fixed_notional(self) -> bool:
        """Whether the amount that one unit refers to is the same at all prices."""
        return self._plain.has_fixed_notional

    @property
    def _plain(self) -> EuropeanOption:
        """A European option that refers to the same amount."""
        n = len(self.underlyings)
        aggregate = self._aggregate or Aggregate.weighted_sum((1.0 / n,) * n)
        profile = self.payout if isinstance(self.payout, Profile) else Profile(ProfileKind.FORWARD)
        day, paid = self.expiry.day, self.expiry.payment_date
        return EuropeanOption(self.underlyings, (1.0,) * n, aggregate, profile, day, paid, self.on_performance)

    @property
    def _aggregate(self) -> Aggregate | None:
        """The statistic's aggregate; None for one that has none."""
        found = getattr(self.statistic, "aggregate", None)
        return found if isinstance(found, Aggregate) else None
