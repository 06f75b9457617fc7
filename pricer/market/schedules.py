"""Observation schedules from their rules; every date is QuantLib's."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date
from enum import StrEnum
from typing import Any

import QuantLib as ql  # noqa: N813 - the short name of QuantLib's own examples

from pricer.contracts.observation import Observation
from pricer.market.calendars import advance, calendar_named, convention_named, from_quantlib, to_period, to_quantlib


class Stub(StrEnum):
    """Where a period goes that is not as long as the others, and which way it differs."""

    SHORT_FIRST = "short first"
    LONG_FIRST = "long first"
    SHORT_LAST = "short last"
    LONG_LAST = "long last"


@dataclass(frozen=True, slots=True)
class ScheduleRule:
    """How often to observe, on which days, and when to pay.

    ``frequency`` is a tenor ("3M", "1W"); "1D" means every business day, "5D" every fifth.
    ``calendar`` may join several ("TARGET+NYSE": days open in all). ``payment_lag_days`` are
    business days of ``payment_calendar`` (None: the observation's own). With ``end_of_month``,
    a schedule that is counted from a month's last day stays on last days.
    """

    frequency: str
    calendar: str
    convention: str = "modified following"
    stub: Stub = Stub.SHORT_FIRST
    end_of_month: bool = False
    payment_lag_days: int = 0
    payment_calendar: str | None = None

    def __post_init__(self) -> None:
        if self.payment_lag_days < 0:
            raise ValueError(f"a payment lag counts business days from 0 up; got {self.payment_lag_days}")


def joint(*calendars: str) -> str:
    """The calendar on whose days all the given ones are open, each named once."""
    return "+".join(dict.fromkeys(part.strip() for name in calendars for part in name.split("+")))


def period_dates(start: date, end: date, rule: ScheduleRule) -> tuple[date, ...]:
    """The dates that bound the periods from ``start`` to ``end``, both included as rolled.

    Raises ValueError for dates out of order and for a calendar, tenor or convention that is not known.
    """
    if end <= start:
        raise ValueError(f"the schedule's end {end} does not lie after its start {start}")
    calendar, tenor = calendar_named(rule.calendar), to_period(rule.frequency)
    if tenor.length() < 1:
        raise ValueError(f'a schedule needs a frequency above zero; got "{rule.frequency}"')
    if tenor.units() == ql.Days:
        days = [from_quantlib(d) for d in calendar.businessDayList(to_quantlib(start), to_quantlib(end))]
        if not days:
            raise ValueError(f"no business day of {rule.calendar} lies between {start} and {end}")
        return _every(days, tenor.length(), rule.stub)
    convention = convention_named(rule.convention)
    generated = _generated(start, end, tenor, rule, calendar, convention)
    return tuple(sorted({from_quantlib(day) for day in generated}))


def schedule(start: date, end: date, rule: ScheduleRule) -> tuple[Observation, ...]:
    """One observation at the end of each period from ``start`` (not observed) to ``end``, and its payment date.

    Raises ValueError as :func:`period_dates` does.
    """
    calendar = rule.payment_calendar or rule.calendar
    days = period_dates(start, end, rule)
    if to_period(rule.frequency).units() != ql.Days or days[0] == start:
        days = days[1:]
    return tuple(Observation(day, advance(calendar, day, rule.payment_lag_days)) for day in days)


def _every(days: list[date], step: int, stub: Stub) -> tuple[date, ...]:
    """Every ``step``-th business day, counted from the end away from the stub; both ends are kept."""
    if stub in (Stub.SHORT_FIRST, Stub.LONG_FIRST):
        kept = days[::-1][::step][::-1]
        kept = kept if kept[0] == days[0] else [days[0], *(kept[1:] if stub is Stub.LONG_FIRST else kept)]
    else:
        kept = days[::step]
        kept = kept if kept[-1] == days[-1] else [*(kept[:-1] if stub is Stub.LONG_LAST else kept), days[-1]]
    return tuple(sorted({days[0], *kept, days[-1]}))


def _generated(start: date, end: date, tenor: Any, rule: ScheduleRule, calendar: Any, convention: int) -> list[Any]:
    first, last = to_quantlib(start), to_quantlib(end)
    backward = rule.stub in (Stub.SHORT_FIRST, Stub.LONG_FIRST)
    way = ql.DateGeneration.Backward if backward else ql.DateGeneration.Forward
    plain = ql.Schedule(first, last, tenor, ql.NullCalendar(), ql.Unadjusted, ql.Unadjusted, way, rule.end_of_month)
    none, dates = ql.Date(), list(plain)
    # A long stub is a short one merged with its neighbour: QuantLib is told where the regular periods start or stop.
    if rule.stub is Stub.LONG_FIRST and len(dates) > 2 and not plain.isRegular(1):
        ends = (dates[2], none)
    elif rule.stub is Stub.LONG_LAST and len(dates) > 2 and not plain.isRegular(len(dates) - 1):
        ends = (none, dates[-3])
    else:
        ends = (none, none)
    if last in ends or first in ends:  # one long period is left
        return [calendar.adjust(first, convention), calendar.adjust(last, convention)]
    return list(ql.Schedule(first, last, tenor, calendar, convention, convention, way, rule.end_of_month, *ends))
