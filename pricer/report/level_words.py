"""Levels, amounts, aggregates, triggers and payouts in words, in the units of the contract that they belong to."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.average import Average, AverageOf
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.feature import Payout
from pricer.contracts.locked_in import LockedIn
from pricer.contracts.performance_sum import PerformanceSum
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.realised_correlation import RealisedCorrelation
from pricer.contracts.realised_variance import RealisedVariance
from pricer.contracts.redemption import Redemption
from pricer.contracts.trigger import Direction, Trigger

_DIGITS = 8  # significant ones


@dataclass(frozen=True, slots=True)
class Words:
    """The words of one contract: performances and amounts per unit of notional are told in percent."""

    underlyings: tuple[str, ...]
    on_performance: bool
    currency: str

    @property
    def names(self) -> str:
        """The underlyings, listed."""
        return ", ".join(self.underlyings)

    def level(self, level: float) -> str:
        """A level of an aggregate."""
        return f"{100.0 * level:,.{_DIGITS}g} %" if self.on_performance else f"{level:,.{_DIGITS}g}"

    def amount(self, amount: float) -> str:
        """An amount per unit."""
        if self.on_performance:
            return f"{100.0 * amount:,.{_DIGITS}g} %"
        return f"{amount:,.{_DIGITS}g} {self.currency}"

    def aggregate(self, aggregate: Aggregate) -> str:
        """What the underlyings are made into."""
        if len(self.underlyings) == 1 and aggregate.weights == (1.0,) and aggregate.cash is None:
            return self.names
        cash = "" if aggregate.cash is None else f" and cash at {self.level(aggregate.cash)}"
        weights = aggregate.weights
        match aggregate.kind:
            case AggregateKind.BEST_OF | AggregateKind.WORST_OF:
                return f"{aggregate.kind} {self.names}{cash}"
            case AggregateKind.KTH_BEST:
                return f"number {weights.index(1.0) + 1} from the best of {self.names}"
            case AggregateKind.RANK_WEIGHTED:
                return f"{', '.join(f'{w:g}' for w in weights)} by rank, the best first, of {self.names}"
        terms = ", ".join(f"{w:g} {name}" for w, name in zip(weights, self.underlyings, strict=True))
        return f"{aggregate.kind} of {terms}"

    def trigger(self, trigger: Trigger) -> str:
        """A trigger up to its level: "worst of A, B at or above"."""
        side = "above" if trigger.direction is Direction.UP else "below"
        beyond = f"at or {side}" if trigger.at_level_counts else side
        scales = ""
        if trigger.scales is not None:
            prices = (f"{name} by {x:,.{_DIGITS}g}" for name, x in zip(self.underlyings, trigger.scales, strict=True))
            scales = f", first divided {', '.join(prices)},"
        return f"{self.aggregate(trigger.aggregate)}{scales} is {beyond}"

    def payout(self, payout: Payout) -> str:
        """A payout as a function of the final level."""
        if isinstance(payout, Profile):
            return self._profile(payout)
        if isinstance(payout, Redemption):
            return self._redemption(payout)
        return "a payout of its own"

    def statistic(self, statistic: Any) -> str:
        """What makes the final level, up to its dates."""
        match statistic:
            case ExpiryLevel():
                return f"{self.aggregate(statistic.aggregate)} on"
            case Average(of=AverageOf.AGGREGATE):
                return f"mean over the dates of the {self.aggregate(statistic.aggregate)}:"
            case Average():
                return f"{self.aggregate(statistic.aggregate)} of each one's mean over"
            case PerformanceSum():
                local = Words(self.underlyings, True, self.currency).payout(statistic.local)
                return f"sum over the periods of: {local} on {self.aggregate(statistic.aggregate)} in the period;"
            case LockedIn():
                return f"mean of levels locked in, number {statistic.rank} from the best of those left, who leaves, on"
            case RealisedVariance():
                return (
                    f"{_variance(statistic, self)}, {statistic.returns_per_year:g} returns a year, no mean subtracted;"
                )
            case RealisedCorrelation():
                taken = "less their means" if statistic.demeaned else "no mean subtracted"
                weights = ", ".join(f"{w:g} {n}" for w, n in zip(statistic.weights, self.underlyings, strict=True))
                return f"realised correlation of returns, {taken}, pairs weighted by {weights};"
        return str(getattr(statistic, "label", ""))

    def _profile(self, profile: Profile) -> str:
        told = [str(profile.kind)]
        if profile.kind is not ProfileKind.EXCHANGE:
            told.append(f"strike {self.level(profile.strike)}")
        if profile.kind in (ProfileKind.CASH_DIGITAL_CALL, ProfileKind.CASH_DIGITAL_PUT):
            told.append(f"pays {self.amount(profile.cash_amount)}")
        return ", ".join([*told, *self._limits(profile.floor, profile.cap)])

    def _redemption(self, payout: Redemption) -> str:
        told = [self.amount(payout.capital)]
        if payout.put_strike is not None:
            told.append(f"less {_times(payout.leverage)}the fall below {self.level(payout.put_strike)}")
        if payout.call_strike is not None:
            told.append(f"plus {_times(payout.participation)}the rise above {self.level(payout.call_strike)}")
        return ", ".join([" ".join(told), *self._limits(payout.floor, payout.cap)])

    def _limits(self, floor: float | None, cap: float | None) -> list[str]:
        limits = [] if floor is None else [f"at least {self.amount(floor)}"]
        return limits if cap is None else [*limits, f"at most {self.amount(cap)}"]


def _times(factor: float) -> str:
    return "" if factor == 1.0 else f"{factor:.6g} times "


def _variance(statistic: RealisedVariance, words: Words) -> str:
    what = "volatility" if statistic.as_volatility else "variance"
    *own, whole = statistic.weights
    terms = [f"{w:g} that of {name}" for w, name in zip(own, words.underlyings, strict=True) if w]
    terms += [f"{whole:g} that of the {words.aggregate(statistic.aggregate)}"] if whole else []
    return f"annual realised {what}: {', '.join(terms)}"
