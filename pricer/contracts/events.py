"""What a contract does in the days ahead, and how far each trigger is."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import date

import numpy as np
from numpy.typing import NDArray

from pricer.contracts.aggregate import Aggregate, AggregateKind
from pricer.contracts.contract import Contract
from pricer.contracts.expiry_level import ExpiryLevel
from pricer.contracts.feature import Appointment
from pricer.contracts.life_cycle import AsOf
from pricer.contracts.profile import Profile, ProfileKind
from pricer.contracts.trigger import Direction, Trigger

#: Observations this many calendar days or fewer apart, a weekend and a holiday, are a daily series.
DAILY = 4
#: Where options pay that have a strike and one side of it.
_PAYS = {
    ProfileKind.CALL: Direction.UP,
    ProfileKind.PUT: Direction.DOWN,
    ProfileKind.CASH_DIGITAL_CALL: Direction.UP,
    ProfileKind.CASH_DIGITAL_PUT: Direction.DOWN,
    ProfileKind.ASSET_DIGITAL_CALL: Direction.UP,
    ProfileKind.ASSET_DIGITAL_PUT: Direction.DOWN,
}


@dataclass(frozen=True, slots=True)
class Event:
    """Something that happens, or may happen, on ``day``.

    ``amount`` is per unit, None where it depends on the level. For a trigger, ``current`` is what it
    compares with ``level`` at today's spots; ``distance`` is the move that remains, as a share of
    ``current`` (-0.10: a fall of 10 %), whichever side the trigger is on; ``deviations`` is the
    same in standard deviations until that day, without drift; ``met_today`` says whether
    today's levels would meet it. At the expiry of an option its strike stands for a trigger, met where
    it pays. Equal events of a daily series are one, until ``last_day`` (None for a single day), to
    which the deviations are counted then.
    """

    day: date
    what: str
    amount: float | None = None
    payment_date: date | None = None
    level: float | None = None
    current: float | None = None
    distance: float | None = None
    deviations: float | None = None
    met_today: bool | None = None
    last_day: date | None = None


def events(
    state: AsOf,
    until: date,
    volatilities: Mapping[str, float] | None = None,
    correlations: NDArray[np.float64] | None = None,
) -> tuple[Event, ...]:
    """Observations, decisions, expiry and payments after the valuation date, up to and including ``until``.

    ``volatilities`` are annual, by underlying (of the converted price, for a composite), and
    ``correlations`` (n_assets, n_assets) in the contract's order; without either, no deviations.
    """
    contract, after = state.contract, state.valuation_date
    found = [
        Event(p.payment_date, f"payment: {p.reason}", p.amount, p.payment_date)
        for p in state.to_be_paid
        if p.payment_date <= until
    ]
    if state.progress.ending is None:
        covariance = _covariance(contract.underlyings, volatilities, correlations)
        label = contract.statistic.label
        # The level at expiry is the expiry itself.
        statistic_days = () if isinstance(contract.statistic, ExpiryLevel) else state.statistic_dates_to_come
        series = [
            [Event(day, "reference set") for day in state.setting_dates_to_come if day <= until],
            [Event(day, f"{label} observed") for day in statistic_days if day <= until],
        ]
        for i in range(len(contract.features)):
            series.append([_event(item, state, covariance) for item in state.appointments(i) if item.day <= until])
        found += [event for each in series for event in _runs_joined(each)]
        if after < contract.expiry.day <= until:
            found.append(_event(_expiry(contract), state, covariance))
    return tuple(sorted(found, key=lambda event: event.day))


def _expiry(contract: Contract) -> Appointment:
    """The expiry; an option's strike is its trigger, met where it would pay."""
    day, paid, statistic, payout = (
        contract.expiry.day,
        contract.expiry.payment_date,
        contract.statistic,
        contract.payout,
    )
    is_struck = isinstance(payout, Profile) and payout.kind in _PAYS and payout.strike != 0.0
    if not isinstance(statistic, ExpiryLevel) or not isinstance(payout, Profile) or not is_struck:
        return Appointment(day, "expiry", paid)
    trigger = Trigger(_PAYS[payout.kind], statistic.aggregate)
    return Appointment(day, "expiry", paid, trigger=trigger, level=payout.strike)


def _runs_joined(series: Sequence[Event]) -> Iterator[Event]:
    """The events of one series, in order; equal ones that follow each other day by day become one."""
    run: list[Event] = []
    for event in series:
        if run and not _continues(run[-1], event):
            yield _joined(run)
            run = []
        run.append(event)
    if run:
        yield _joined(run)


def _continues(earlier: Event, later: Event) -> bool:
    same = (earlier.what, earlier.level, earlier.amount) == (later.what, later.level, later.amount)
    return same and (later.day - earlier.day).days <= DAILY


def _joined(run: Sequence[Event]) -> Event:
    first, last = run[0], run[-1]
    if first is last:
        return first
    payment_date = first.payment_date if first.payment_date == last.payment_date else None
    return replace(first, payment_date=payment_date, deviations=last.deviations, last_day=last.day)


def _event(item: Appointment, state: AsOf, covariance: NDArray[np.float64] | None) -> Event:
    event = Event(item.day, item.what, item.amount, item.payment_date, item.level)
    if item.trigger is None or item.level is None or state.levels is None:
        return event
    levels = np.array(state.levels)
    current = float(item.trigger.measure(levels)[0])
    deviation = None if covariance is None else _deviation(item.trigger, levels, covariance)
    years = state.years_to(item.day)
    return Event(
        item.day,
        item.what,
        item.amount,
        item.payment_date,
        item.level,
        current,
        None if current == 0.0 else (item.level - current) / abs(current),
        None if not deviation else _in_deviations(item.level, current, deviation * math.sqrt(years)),
        item.trigger.met(current, item.level),
    )


def _in_deviations(level: float, current: float, deviation: float) -> float:
    """From ``current`` to ``level``: in logarithms where both are positive, else in plain differences."""
    if level > 0.0 and current > 0.0:
        return math.log(level / current) * current / deviation
    return (level - current) / deviation


def _deviation(trigger: Trigger, levels: NDArray[np.float64], covariance: NDArray[np.float64]) -> float:
    """Standard deviation over a year of the trigger's aggregate, to first order at today's levels and ranks."""
    scaled = levels if trigger.scales is None else levels / np.array(trigger.scales)
    exposures = _slopes(trigger.aggregate, scaled) * scaled
    return math.sqrt(max(0.0, float(exposures @ covariance @ exposures)))


def _slopes(aggregate: Aggregate, levels: NDArray[np.float64]) -> NDArray[np.float64]:
    """Derivatives of the aggregate by each level (n_assets,); ties go to the first."""
    weights = np.array(aggregate.weights)
    if aggregate.kind is AggregateKind.WEIGHTED_SUM:
        return weights
    if aggregate.kind is AggregateKind.GEOMETRIC:
        return np.asarray(float(aggregate(levels)) * weights / levels)
    slopes = np.empty(len(levels))
    slopes[np.argsort(-levels, kind="stable")] = weights
    return slopes


def _covariance(
    names: tuple[str, ...], volatilities: Mapping[str, float] | None, correlations: NDArray[np.float64] | None
) -> NDArray[np.float64] | None:
    if volatilities is None or any(name not in volatilities for name in names):
        return None
    if correlations is None:
        if len(names) > 1:
            return None
        correlations = np.ones((1, 1))
    sizes = np.array([volatilities[name] for name in names])
    return np.outer(sizes, sizes) * correlations
