"""Where a contract stands on a valuation date: what is fixed, what was paid, what is still to come."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from datetime import date
from enum import StrEnum
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.ageing import Progress, Walk, days_between, start, walk
from pricer.contracts.barrier import Barrier, BarrierState
from pricer.contracts.contract import Contract
from pricer.contracts.feature import Appointment, Ending
from pricer.contracts.fixings import Fixings
from pricer.contracts.levels import references
from pricer.contracts.observation import Payment
from pricer.contracts.price_record import PriceRecord
from pricer.core.issues import Issue, Severity

DAYS_PER_YEAR = 365.0  # ACT/365F, the day count of volatility
NO_RATES: Mapping[str, str] = MappingProxyType({})


class Status(StrEnum):
    """What is left of a contract."""

    LIVE = "live"
    TO_BE_PAID = "ended, to be paid"
    SETTLED = "settled"
    UNDETERMINED = "undetermined"  # a fixing of the past is missing


@dataclass(frozen=True, slots=True)
class AsOf:
    """A contract on ``valuation_date``.

    ``progress`` holds the states of the contract's parts, in their order, and all amounts decided so
    far. ``confirmed`` is the part of it that rests on fixings alone; it leaves out today's
    observation while today's spots stand in for its fixings (``assumed`` names them).
    ``levels`` are today's (n_assets), from spots; None while references are not set or a spot is missing.
    """

    contract: Contract
    valuation_date: date
    progress: Progress
    confirmed: Progress
    levels: tuple[float, ...] | None = None
    assumed: tuple[str, ...] = ()
    issues: tuple[Issue, ...] = ()

    @property
    def status(self) -> Status:
        if any(issue.severity is not Severity.WARNING for issue in self.issues):
            return Status.UNDETERMINED
        if self.progress.ending is None:
            return Status.LIVE
        return Status.TO_BE_PAID if self.to_be_paid else Status.SETTLED

    @property
    def ending(self) -> Ending | None:
        return self.progress.ending

    @property
    def to_be_paid(self) -> tuple[Payment, ...]:
        """Decided amounts other than 0 that are paid after the valuation date; today's payments count as paid."""
        return tuple(p for p in self.progress.payments if p.payment_date > self.valuation_date and p.amount)

    @property
    def references(self) -> NDArray[np.float64] | None:
        """The references (n_assets,), None while they are still being set."""
        return references(self.contract.levels, self.progress.references)

    def years_to(self, day: date) -> float:
        """Years from the valuation date to ``day`` (ACT/365F)."""
        return (day - self.valuation_date).days / DAYS_PER_YEAR

    @property
    def setting_dates_to_come(self) -> tuple[date, ...]:
        return self._to_come(self.contract.levels.setting_dates)

    @property
    def statistic_dates_to_come(self) -> tuple[date, ...]:
        return self._to_come(self.contract.statistic.dates)

    def appointments(self, feature: int) -> tuple[Appointment, ...]:
        """What may still happen by the feature of that number; nothing once the contract has ended."""
        if self.progress.ending is not None:
            return ()
        found = self.contract.features[feature].appointments(self.progress.features[feature])
        return tuple(item for item in found if item.day > self.valuation_date)

    def _to_come(self, dates: Sequence[date]) -> tuple[date, ...]:
        if self.progress.ending is not None:
            return ()
        return tuple(day for day in dates if day > self.valuation_date)


def as_of(
    contract: Contract,
    valuation_date: date,
    fixings: Fixings,
    spots: Mapping[str, float],
    exchange_rates: Mapping[str, str] = NO_RATES,
    known: AsOf | None = None,
) -> AsOf:
    """The contract on ``valuation_date``.

    ``exchange_rates`` names, for each underlying of a composite in another currency, the pair
    that converts it ("USDEUR"), found among the fixings either way round and among ``spots``
    as written. ``known``, the same contract on an earlier day, saves walking its past again;
    fixings that were corrected since then are not seen. Raises ValueError if it is not that.
    """
    progress = _resumed(contract, valuation_date, known)
    record = PriceRecord(contract, fixings, spots, exchange_rates, valuation_date)
    days = days_between(contract, progress.through, valuation_date)
    has_spot_day = bool(days) and days[-1] == valuation_date and not record.is_fixed(valuation_date)
    past, today = (days[:-1], days[-1:]) if has_spot_day else (days, ())
    try:
        first = walk(contract, progress, past, record.prices(past))
        confirmed, latest = first.progress, first
        assumed: tuple[str, ...] = ()
        if not first.gaps and today:
            latest = walk(contract, confirmed, today, record.prices(today))
            assumed = record.without_fixing(valuation_date) if latest.needed and not latest.gaps else ()
    except ValueError as undefined:
        issue = Issue("no-final-level", str(undefined), "fixings that form a final level", "Check the fixings.")
        return AsOf(contract, valuation_date, progress, progress, issues=(issue,))
    issues = (*record.gaps(latest), *_assumptions(assumed, valuation_date), *_records(contract, latest, valuation_date))
    known_references = references(contract.levels, latest.progress.references)
    now = record.spot_prices()
    levels = None if known_references is None or now is None else tuple((now / known_references).tolist())
    return AsOf(contract, valuation_date, latest.progress, confirmed, levels, assumed, issues)


def _resumed(contract: Contract, valuation_date: date, known: AsOf | None) -> Progress:
    if known is None:
        return start(contract)
    if known.contract != contract or known.valuation_date > valuation_date:
        raise ValueError("what is known must be the same contract on an earlier day")
    return known.confirmed


def _assumptions(names: Sequence[str], day: date) -> Iterator[Issue]:
    if names:
        yield Issue(
            "spot-for-fixing",
            f"an observation today, {day}, without a fixing of {', '.join(names)}",
            "today's fixings",
            "Today's spots stand in for them; enter the fixings once they are published.",
            Severity.WARNING,
        )


def _records(contract: Contract, found: Walk, day: date) -> Iterator[Issue]:
    """Facts that no fixing tells: touches between observations, the writer's default."""
    for feature, state in zip(contract.features, found.progress.features, strict=True):
        if not isinstance(feature, Barrier) or not isinstance(state, BarrierState):
            continue
        watched = feature.continuous and state.hit_on is None and found.progress.ending is None
        if watched and state.seen and (feature.clear_until is None or feature.clear_until < day):
            yield Issue(
                "touch-not-recorded",
                f"a {feature.kind} watched at all times and no record since {feature.clear_until or feature.dates[0]}",
                f"the day until which it is known to be untouched, {day}",
                "It counts as untouched, as no fixing is beyond it; enter the day of a hit, or until when it is clear.",
                Severity.WARNING,
            )
    if contract.writer is not None and contract.writer.defaulted_on is not None and contract.writer.defaulted_on <= day:
        yield Issue(
            "writer-defaulted",
            f"{contract.writer.name} as the writer, in default since {contract.writer.defaulted_on}",
            "a writer who can still pay",
            "Carry the claim outside this book, at the recovery that is expected.",
        )
