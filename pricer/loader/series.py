"""A trade's series of dates, from explicit rows or from a rule; each date keeps the row it stands in."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date, timedelta
from decimal import Decimal
from functools import lru_cache
from typing import Any

from pricer.contracts.observation import Observation
from pricer.loader.book_models import RULES, SCHEDULES
from pricer.loader.faults import Fault, blank_cell
from pricer.loader.findings import repeated_dates
from pricer.loader.schedule_rows import SILENT, Purpose
from pricer.loader.statistic_columns import OF_PERIODS
from pricer.loader.table import UNREAD, Row
from pricer.loader.trade_parts import TradeParts
from pricer.market.schedules import ScheduleRule, Stub, period_dates, schedule

Numbers = tuple[float | None, ...]


@dataclass(frozen=True, slots=True)
class Series:
    """Dates in order, with what goes with each.

    ``observations``, ``levels``, ``amounts``, ``ceilings`` and ``rows`` (in ``table``) have one entry per date.
    """

    observations: tuple[Observation, ...]
    levels: Numbers
    amounts: Numbers
    ceilings: Numbers
    table: str
    rows: tuple[int, ...]

    @property
    def days(self) -> tuple[date, ...]:
        return tuple(observation.day for observation in self.observations)

    @property
    def column(self) -> str:
        """Where its dates stand."""
        return "date" if self.table == SCHEDULES else "end_date"


@dataclass(slots=True)
class AllSeries:
    """A trade's series by purpose and number of the feature; what is missing may have been there where some broke."""

    by_key: dict[tuple[Purpose, int], Series]
    first_rows: dict[tuple[Purpose, int], tuple[str, int]]  # also of series that could not be made: table, row
    is_whole: bool  # every row could be read

    def get(self, purpose: Purpose, feature: int = 1) -> Series | None:
        return self.by_key.get((purpose, feature))

    def is_given(self, purpose: Purpose, feature: int = 1) -> bool:
        """Whether there are rows for it, be they good or bad."""
        return (purpose, feature) in self.first_rows or not self.is_whole

    def numbers(self, purpose: Purpose) -> list[int]:
        """The numbers of the features that have dates of this purpose."""
        return sorted(number for found, number in self.first_rows if found is purpose)


def all_series(parts: TradeParts) -> AllSeries:
    """Every series of the trade; faults are told to ``parts``."""
    out = AllSeries({}, {}, is_whole=True)
    by_key: dict[str, dict[tuple[Purpose, int], list[Row[Any]]]] = {SCHEDULES: {}, RULES: {}}
    for table, groups in by_key.items():
        found = defaultdict(list)
        for row in parts.rows(table):
            if row.get("purpose") is UNREAD or row.get("feature") is UNREAD:
                out.is_whole = False
                continue
            found[row.get("purpose"), row.get("feature")].append(row)
        groups.update(found)
    for key, rows in by_key[SCHEDULES].items():
        out.first_rows[key] = SCHEDULES, rows[0].number
        series = _from_rows(parts, key[0], rows)
        if series is not None:
            out.by_key[key] = series
    for key, rows in by_key[RULES].items():
        if key in out.first_rows or len(rows) > 1:
            table, first = out.first_rows.get(key, (RULES, rows[0].number))
            found_words = f"a second rule for dates of purpose {key[0]}, like row {first}"
            if table == SCHEDULES:
                found_words = f"a rule for dates of purpose {key[0]}, which the table {SCHEDULES} has from row {first}"
            mend = "Delete one of the two, or give it a number of its own in the column feature."
            fault = Fault("repeated-series", found_words, "one series by purpose and feature", mend)
            parts.tell(RULES, rows[-1].number, "purpose", fault)
        out.first_rows.setdefault(key, (RULES, rows[0].number))
        series = None if key in out.by_key or len(rows) > 1 else _from_rule(parts, key[0], rows[0])
        if series is not None:
            out.by_key[key] = series
    return out


def _from_rows(parts: TradeParts, purpose: Purpose, rows: Sequence[Row[Any]]) -> Series | None:
    table = parts.tables[SCHEDULES]
    repeated = repeated_dates(table, rows, "date")
    parts.issues += repeated
    late = False
    for row in rows:
        late |= _is_late(parts, SCHEDULES, row.number, "date", row.get("date"))
    if repeated or late or any(row.value is None for row in rows):
        return None
    found = sorted(rows, key=lambda row: row.get("date"))
    values: list[Any] = [row.value for row in found]
    silent = purpose in SILENT
    return Series(
        tuple(Observation(v.date, v.date if silent else v.payment_date or parts.paid_after(v.date)) for v in values),
        tuple(v.level for v in values),
        tuple(v.amount for v in values),
        tuple(v.ceiling for v in values),
        SCHEDULES,
        tuple(row.number for row in found),
    )


def _is_late(parts: TradeParts, table: str, row: int, column: str, day: Any) -> bool:
    """Whether the day lies after the expiry, which is told."""
    expiry = parts.get("expiry_date")
    if not isinstance(day, date) or expiry is None or day <= expiry:
        return False
    expected = f"a date up to the expiry date {expiry}"
    parts.tell(table, row, column, Fault("dates-out-of-order", f"the date {day}", expected, "Correct one of the two."))
    return True


def _from_rule(parts: TradeParts, purpose: Purpose, row: Row[Any]) -> Series | None:
    rule, expiry, calendar = row.value, parts.get("expiry_date"), parts.observation_calendar
    if rule is None or expiry is None or calendar is None or parts.row.get("trade_date") is UNREAD:
        return None
    start, end = rule.start_date or parts.get("trade_date"), rule.end_date or expiry
    if start is None:
        parts.tell(RULES, row.number, "start_date", blank_cell("the trade has no trade date"))
        return None
    if _is_late(parts, RULES, row.number, "end_date", end):
        return None
    if end <= start:
        column = "end_date" if rule.end_date else "start_date"
        found = f"a schedule from {start} to {end}"
        parts.tell(RULES, row.number, column, Fault("dates-out-of-order", found, "a start before its end"))
        return None
    lag = rule.payment_lag_days
    made = ScheduleRule(
        rule.frequency,
        calendar,
        rule.roll or "modified following",
        rule.stub or Stub.SHORT_FIRST,
        rule.end_of_month or False,
        (parts.get("settlement_lag_days") or 0) if lag is None else lag,
        parts.settlement_calendar,
    )
    try:
        observations = _generated(start, end, made, _has_start(parts, purpose), purpose in SILENT)
    except ValueError as error:
        mend = "Correct the dates, the frequency or the calendar."
        parts.tell(RULES, row.number, "frequency", Fault("no-schedule", str(error), "a rule that gives dates", mend))
        return None
    if not observations or observations[-1].day > expiry:
        last = f"a last date of {observations[-1].day}, as rolled" if observations else "a rule that gives no date"
        mend = "Correct the end date, choose the roll preceding, or move the expiry to a business day."
        fault = Fault("dates-out-of-order", last, f"dates up to the expiry date {expiry}", mend)
        parts.tell(RULES, row.number, "end_date", fault)
        return None
    n = len(observations)
    return Series(
        observations,
        _stepped(rule.level, rule.level_step, n),
        _stepped(rule.amount, rule.amount_step, n),
        (rule.ceiling,) * n,
        RULES,
        (row.number,) * n,
    )


def _has_start(parts: TradeParts, purpose: Purpose) -> bool:
    """Whether a rule's start is itself a date: where it sets references, or begins a period that counts."""
    if purpose is Purpose.REFERENCE:
        return True
    return purpose is Purpose.OBSERVATION and parts.get("statistic") in OF_PERIODS


@lru_cache(maxsize=4096)
def _generated(start: date, end: date, rule: ScheduleRule, has_start: bool, is_silent: bool) -> tuple[Observation, ...]:
    """Books repeat their schedules: notes of one issue day, and every daily barrier to one expiry."""
    if has_start:
        return tuple(Observation(day, day) for day in period_dates(start, end, rule))
    found = schedule(start, end, rule)
    return tuple(Observation(o.day, o.day) for o in found) if is_silent else found


def business_days(start: date, end: date, calendar: str, payment_calendar: str, lag: int) -> tuple[Observation, ...]:
    """Every business day from ``start`` to ``end``, both included; raises ValueError if there is none."""
    rule = ScheduleRule("1D", calendar, payment_lag_days=lag, payment_calendar=payment_calendar)
    return _generated(start - timedelta(days=1), end, rule, False, False)


@lru_cache(maxsize=4096)
def _stepped(first: float | None, step: float | None, n: int) -> Numbers:
    """``first``, ``first + step`` and so on, as a person would write them: 0.85, never 0.8500000000000001."""
    if first is None or not step:
        return (first,) * n
    start, by = Decimal(repr(first)), Decimal(repr(step))
    return tuple(float(start + k * by) for k in range(n))
