"""A contract walked through its past, day by day."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import date
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.contract import Contract
from pricer.contracts.feature import Ending
from pricer.contracts.known_level import paid_at
from pricer.contracts.levels import ReferenceSums, references
from pricer.contracts.observation import Payment

#: Shown where the levels of a day do not matter.
UNSEEN = (math.nan,)


@dataclass(frozen=True, slots=True)
class Progress:
    """Where a contract stands after the day ``through``: states of its parts, and what is decided."""

    through: date
    references: ReferenceSums
    statistic: Any
    features: tuple[Any, ...]
    payments: tuple[Payment, ...] = ()
    ending: Ending | None = None
    ended_on: date | None = None


@dataclass(frozen=True, slots=True)
class Walk:
    """The progress made; ``needed`` are the days whose prices were asked for, ``gaps`` those without a price.

    At the first gap the progress stands still: what came of later days is not known.
    """

    progress: Progress
    needed: tuple[date, ...]
    gaps: tuple[date, ...]


def start(contract: Contract) -> Progress:
    """The progress before anything happened."""
    return Progress(
        date.min,
        ReferenceSums((0.0,) * len(contract.underlyings)),
        contract.statistic.start(),
        tuple(feature.start() for feature in contract.features),
    )


def days_between(contract: Contract, after: date, until: date) -> tuple[date, ...]:
    """The contract's days after ``after`` up to and including ``until``."""
    return tuple(day for day in contract.dates if after < day <= until)


def walk(contract: Contract, progress: Progress, days: Sequence[date], prices: NDArray[np.float64]) -> Walk:
    """Take the contract's next ``days`` into account, with ``prices`` (n_days, n_assets), NaN where missing.

    Raises ValueError where the final level cannot be formed (a correlation of what never moved).
    """
    if progress.ending is not None or not len(days):
        return Walk(progress, (), ())
    missing: dict[date, bool] = dict(zip(days, np.any(np.isnan(prices), axis=1), strict=True))
    needed: list[date] = []
    progress = _set_references(contract, progress, days, prices, missing, needed)
    known = references(contract.levels, progress.references)
    if known is None:
        known = np.full(len(contract.underlyings), np.nan)
    levels = prices / known
    parts = (contract.statistic, *contract.features)
    own = [frozenset(part.dates) for part in parts]
    stopped = any(missing[day] for day in needed)
    # Each day is measured alone: in one product of many days the last bit would depend on how many there are.
    for day, row in zip(days, levels, strict=True):
        states = (progress.statistic, *progress.features)
        wanted = [day in mine and part.needs(state, day) for mine, part, state in zip(own, parts, states, strict=True)]
        if any(wanted):
            needed.append(day)
            stopped = stopped or missing[day]
        if not stopped:
            shown = [
                None if day not in mine else part.measure(row).tolist() if want else UNSEEN
                for part, mine, want in zip(parts, own, wanted, strict=True)
            ]
            progress = _next(contract, progress, day, shown)
            if progress.ending is not None:
                break
    asked = tuple(dict.fromkeys(needed))
    return Walk(progress, asked, tuple(day for day in asked if missing[day]))


def _set_references(
    contract: Contract,
    progress: Progress,
    days: Sequence[date],
    prices: NDArray[np.float64],
    missing: Mapping[date, bool],
    needed: list[date],
) -> Progress:
    sums, setting = progress.references, set(contract.levels.setting_dates)
    for day, row in zip(days, prices.tolist(), strict=True):
        if day in setting:
            needed.append(day)
            sums = sums if missing[day] else sums.with_prices(row)
    return replace(progress, references=sums)


def _next(contract: Contract, progress: Progress, day: date, shown: Sequence[Sequence[float] | None]) -> Progress:
    """The progress after ``day``; ``shown`` has the numbers of each part, None for one not observed on that day."""
    statistic = progress.statistic
    if shown[0] is not None:
        statistic = contract.statistic.observe(statistic, day, shown[0])
    states, payments, ending = list(progress.features), list(progress.payments), None
    for i, (feature, measured) in enumerate(zip(contract.features, shown[1:], strict=True)):
        if measured is not None:
            step = feature.observe(states[i], day, measured)
            states[i], ending = step.state, step.ending
            payments.extend(step.payments)
            if ending is not None:
                break
    if ending is None and day == contract.expiry.day:
        ending = Ending.EXPIRED
        pairs = zip(contract.features, states, strict=True)
        instead = (feature.payout_instead(state) for feature, state in pairs)
        payout = next((payout for payout in instead if payout is not None), contract.payout)
        amount = paid_at(payout, contract.statistic.value(statistic))
        payments.append(Payment(contract.expiry.payment_date, amount, "final payoff", day))
    ended_on = None if ending is None else day
    return Progress(day, progress.references, statistic, tuple(states), tuple(payments), ending, ended_on)
